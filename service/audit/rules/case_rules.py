"""Rules on cases: one a release and hazard, judged by the mark crossed and the safeguards."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, BOOSTED, DESIGN, LOST
from service.audit.assessment import SEVERITIES
from service.audit.hazards import (
    FLAMMABLE,
    HAZARDS,
    MEAN_8H,
    MEAN_15MIN,
    OXYGEN_HIGH,
    OXYGEN_LOW,
    PEAK,
    REFERENCE_LIMIT,
    TOXIC,
)
from service.audit.inventory import QUENCH_DURATION
from service.audit.marks import measure_name
from service.audit.release_rows import JACKET_OPEN, NO_VARIANT, PIPE_FAILED, VARIANTS
from service.audit.releases import (
    ALL_VESSELS,
    BOIL_OFF,
    DETECTION,
    FILLING,
    LINE_BREAK,
    NOBODY_INSIDE,
    OVERFILL,
    QUENCH,
    RELEASES,
    SHUT_OFF,
    SPILL,
    VACUUM_LOSS,
    VENTILATION,
)
from service.audit.rules.kinds import never
from service.audit.rules.remedies import remedy
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables
from service.audit.rules.words import (
    as_record,
    at_least,
    duration_text,
    listed,
    number,
    oxygen_text,
)
from service.audit.sources import NO_LINE
from service.physics.arrays import Mask, rounded
from service.physics.constants import SECONDS_PER_HOUR
from service.physics.insulation_loss import JACKET_OPEN as JACKET_OPEN_FLUX
from service.physics.pool import spread_area, time_to_evaporate
from service.physics.quench import PEAK_OVER_MEAN

LOW_MARKS: Final = ("deficient", "danger", "critical")
HIGH_MARKS: Final = ("enriched", "second", "third")
ORDINALS: Final = ("first", "second", "third")

_MEASURED: Final = {
    PEAK: "a peak of",
    MEAN_15MIN: "a mean over 15 min of",
    MEAN_8H: "a mean over 8 h of",
}
_AIR: Final = {
    AS_MEASURED: "with the ventilation as measured",
    DESIGN: "with every fan at its design flow",
    LOST: "without power for its fans",
    BOOSTED: "with the ventilation boosted by the alarm",
}
_METHOD: Final = {
    BOIL_OFF: "ventilation/piecewise-constant",
    FILLING: "filling/transfer-loss",
    OVERFILL: "filling/overfill",
    SPILL: "spill/pool-on-floor",
    VACUUM_LOSS: "vacuum-loss/heat-flux",
    LINE_BREAK: "line-break/liquid",
    QUENCH: "quench/mean-and-peak",
}


@dataclass(frozen=True, slots=True)
class CaseRule:
    """A release that takes a room beyond a mark of a hazard; one a family, release and gas."""

    slug: str
    release: str
    hazard: str
    gas: str | None
    method: str
    source: str

    @property
    def subject(self) -> Subject:
        """A finding a room, from its worst case."""
        return Subject.CASES

    @property
    def worse_is(self) -> Direction:
        """Less oxygen is worse, or more of anything else."""
        return Direction.LOWER if self.hazard == OXYGEN_LOW else Direction.HIGHER

    @property
    def _hazard(self) -> int:
        return [(each.slug, each.gas) for each in HAZARDS].index((self.hazard, self.gas or ""))

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where a case of the release is beyond a mark."""
        table, results = tables.cases.table, tables.cases.results
        release = [release.slug for release in RELEASES].index(self.release)
        chosen = (table.release == release) & (table.hazard == self._hazard) & table.shown
        if self.release == ALL_VESSELS:
            # A single one is what the largest vessel says already.
            chosen &= np.diff(table.member_start) > 1
        return Judged(
            broken=chosen & (results.mark > 0),
            measure=tables.cases.decisive_value,
            limit=tables.cases.decisive_limit,
            consequence=tables.cases.severity,
            turns_at=never(table.size),
        )

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say how far the worst case goes, and what would keep it inside."""
        statement, evidence = told_of_cases(tables, rows)
        return Said(statement, remedy(tables, rows[0]), evidence)


def told_of_cases(tables: Tables, rows: Sequence[int]) -> tuple[str, dict[str, Any]]:
    """What there is to say of the worst of some cases, and the numbers of all."""
    others = [case_evidence(tables, each) for each in rows[1:]]
    worst = {**case_evidence(tables, rows[0]), **_pool(tables, rows[0])}
    return _statement(tables, rows[0]), {**worst, "cases": others}


def _statement(tables: Tables, row: int) -> str:
    hazard = HAZARDS[int(tables.cases.table.hazard[row])]
    if hazard.slug in (OXYGEN_LOW, OXYGEN_HIGH):
        effect = _oxygen_effect(tables, row)
    elif hazard.slug == TOXIC:
        effect = _toxic_effect(tables, row)
    else:
        effect = _flammable_effect(tables, row)
    return f"{_event(tables, row)} would {effect}; {_times(tables, row)}{_caution(tables, row)}."


def _oxygen_effect(tables: Tables, row: int) -> str:
    table, results = tables.cases.table, tables.cases.results
    low = HAZARDS[int(table.hazard[row])].slug == OXYGEN_LOW
    level = oxygen_text(100.0 * float(results.oxygen[row]), low=low)
    pressure = float(results.oxygen_pressure[row]) / 1000.0
    name = (LOW_MARKS if low else HIGH_MARKS)[int(results.mark[row]) - 1]
    limit = _limit(tables, row)
    return (
        f"bring oxygen {'down' if low else 'up'} to {level} "
        f"({pressure:.1f} kPa), {'below' if low else 'above'} the {name} mark of {limit:.4g} %"
    )


def _toxic_effect(tables: Tables, row: int) -> str:
    table, results = tables.cases.table, tables.cases.results
    gas = HAZARDS[int(table.hazard[row])].gas.replace("-", " ")
    percent = 100.0 * float(table.gas_by_level[row])
    peak, quarter, shift = (
        percent * float(value) for value in (results.level[row], *results.means[row])
    )
    measure = int(table.measured_on[row, int(results.mark[row]) - 1])
    limit = _limit(tables, row)
    return (
        f"bring {gas} to a peak of {at_least(peak)} % (highest mean of 15 min {at_least(quarter)} "
        f"%, of 8 h {at_least(shift)} %), beyond the {ORDINALS[int(results.mark[row]) - 1]} mark, "
        f"{_MEASURED[measure]} {limit:.4g} %"
    )


def _flammable_effect(tables: Tables, row: int) -> str:
    table, results = tables.cases.table, tables.cases.results
    share = 100.0 * float(results.level[row]) / REFERENCE_LIMIT
    percent = 100.0 * float(table.gas_by_level[row] * results.level[row])
    return (
        f"bring flammable gas to {at_least(share)} % of its lower flammable limit "
        f"({at_least(percent)} % by volume, where it gathers), beyond the "
        f"{ORDINALS[int(results.mark[row]) - 1]} mark of {_limit(tables, row):.4g} % of that limit"
    )


def _limit(tables: Tables, row: int) -> float:
    """Limit of the worst mark crossed, in percent."""
    return float(tables.cases.limits[row, int(tables.cases.results.mark[row]) - 1])


def _event(tables: Tables, row: int) -> str:
    table = tables.cases.table
    vessels = [record.tag for record in tables.records.vessels[row]]
    source, gas = listed(vessels or ["the purge"]), listed(tables.records.fluids[row])
    air = _AIR[AIRFLOWS[int(table.airflow[row])]]
    release = RELEASES[int(table.release[row])].slug
    if release == BOIL_OFF:
        return f"Normal evaporation and use of {gas} from {source}, {air},"
    if release == FILLING:
        return f"Filling {source} with {gas}, one after another, {air},"
    if release == OVERFILL:
        which = source if len(vessels) == 1 else f"any one of {source}"
        return f"Automatic filling of {which} with {gas} that does not stop, {air},"
    if release == SPILL:
        if table.instant[row] > 0.0:
            return f"All {gas} of {source} spilt on the floor"
        return f"{source} emptied on the floor, {air},"
    if release == VACUUM_LOSS:
        torn = ", its jacket torn open," if table.variant[row] == JACKET_OPEN else ""
        return f"The loss of the insulating vacuum of {source}{torn} with {gas}, {air},"
    if release == LINE_BREAK:
        lines = [record.tag for record in tables.records.lines[row]]
        what = f"supply line {listed(lines)}" if lines else f"the withdrawal hose of {source}"
        return f"A full break of {what}, or what it leaves open, with {gas}, {air},"
    if release == QUENCH:
        failed = table.variant[row] == PIPE_FAILED
        return f"A quench of {source}, {'its quench pipe failed' if failed else 'as expected'},"
    return f"All {gas} of {source} let go at once"


def _times(tables: Tables, row: int) -> str:
    """When the first mark is passed, and when the room is back inside it."""
    table, results = tables.cases.table, tables.cases.results
    place = int(np.argmax(results.crossed[row]))
    passed, back = float(results.to_marks[row, place]), float(results.recovered[row])
    start = "" if table.at_once[row] else f"it would pass the mark after {duration_text(passed)} "
    if np.isnan(back):
        end = f"and would not be back within {duration_text(float(results.course.times[row, -1]))}"
    else:
        end = f"and would be back inside the first mark after {duration_text(back)}"
    return f"it {end.removeprefix('and ')}" if table.at_once[row] else f"{start}{end}"


def _caution(tables: Tables, row: int) -> str:
    """What detection can do for a release at once."""
    table, guards = tables.cases.table, tables.cases.guards
    if table.at_once[row] and guards.detection[row]:
        return "; the detector protects those who would enter, not those inside"
    return ""


def case_evidence(tables: Tables, row: int) -> dict[str, Any]:
    """The numbers and records of a case."""
    table, results, guards = tables.cases.table, tables.cases.results, tables.cases.guards
    severity = int(tables.cases.severity[row])
    hazard = HAZARDS[int(table.hazard[row])]
    percent = 100.0 * float(table.gas_by_level[row])
    told = {
        "release": RELEASES[int(table.release[row])].slug,
        "airflow": AIRFLOWS[int(table.airflow[row])],
        "hazard": hazard.slug,
        "gas": hazard.gas,
        "counts": bool(table.counts[row]),
        "severity": SEVERITIES[severity] if severity >= 0 else None,
        "mark": int(results.mark[row]),
        "oxygen_pct": number(100.0 * float(results.oxygen[row])),
        "oxygen_kpa": number(float(results.oxygen_pressure[row]) / 1000.0),
        "gas_m3": number(float(results.gas[row])),
        "mixes_in_m3": number(float(table.volume[row])),
        "marks": _marks(tables, row),
        "recovered_s": number(float(results.recovered[row])),
        "alarm_s": number(float(guards.alarm[row])),
        "margin_s": number(float(guards.margin[row])),
        "safeguards": _held(tables, row),
        "records": [
            as_record(record)
            for record in (*tables.records.vessels[row], *tables.records.lines[row])
        ],
        **_of_release(tables, row),
    }
    if hazard.slug in (TOXIC, FLAMMABLE):
        told["peak_pct"] = number(percent * float(results.level[row]))
        told["mean_15min_pct"] = number(percent * float(results.means[row, 0]))
        told["mean_8h_pct"] = number(percent * float(results.means[row, 1]))
    return told


def _of_release(tables: Tables, row: int) -> dict[str, Any]:
    """The numbers that a release rests on, for one from a single vessel or line."""
    table = tables.cases.table
    release = RELEASES[int(table.release[row])].slug
    source = tables.records.sources[row][0]
    vessel, line = int(table.sources.vessel[source]), int(table.sources.line[source])
    variant = int(table.variant[row])
    told: dict[str, Any] = {} if variant == NO_VARIANT else {"variant": VARIANTS[variant]}
    if release == VACUUM_LOSS:
        flux = JACKET_OPEN_FLUX if variant == JACKET_OPEN else float(table.stock.heat_flux[vessel])
        told |= {
            "cold_area_m2": number(float(table.stock.cold_area[vessel])),
            "heat_flux_kw_m2": number(flux / 1000.0),
            "relief_outdoors": "not credited: its area is not judged",
        }
    elif release == LINE_BREAK:
        rate = float(table.sources.broken[source]) * SECONDS_PER_HOUR
        told |= {"gas_m3_h": number(rate), "flows_s": _flows(tables, row)}
        if line != NO_LINE:
            told["pressure_kpa_abs"] = number(float(table.lines.pressure[line]) / 1000.0)
            told["bore_mm"] = number(1000.0 * float(table.lines.bore[line]))
            told["rupture_kg_h"] = number(float(table.lines.rupture[line]) * SECONDS_PER_HOUR)
            told["flow_kg_h"] = number(float(table.lines.broken[line]) * SECONDS_PER_HOUR)
            told["shut_off_holds"] = bool(table.lines.shut_off_holds[line])
    elif release == QUENCH:
        duration = known_duration(float(table.given.vessels.quench_duration[vessel]))
        rate = float(table.instant[row]) / duration
        told |= {
            "duration_s": duration,
            "mean_rate_m3_s": number(rate),
            "peak_rate_m3_s": number(PEAK_OVER_MEAN * rate),
            "share_to_room": number(
                float(table.instant[row]) / float(table.sources.quench[source])
            ),
        }
    return told


def known_duration(recorded: float) -> float:
    """How long a quench lasts, also where nobody recorded it."""
    return QUENCH_DURATION if np.isnan(recorded) else recorded


def _flows(tables: Tables, row: int) -> float | None:
    """How long a broken line flows."""
    table = tables.cases.table
    return number(float(table.durations[row][table.rates[row] > 0.0].sum()))


def _pool(tables: Tables, row: int) -> dict[str, Any]:
    """How large the pool of a spill is, and how soon it is gone."""
    table = tables.cases.table
    if RELEASES[int(table.release[row])].slug != SPILL or not table.instant[row] > 0.0:
        return {}
    vessel = int(table.sources.vessel[tables.records.sources[row][0]])
    given, room = table.given, int(table.network[row])
    fluid = int(given.vessels.fluid[vessel])
    mass = float(table.stock.held_mass[vessel])
    spread = float(spread_area(mass / float(given.fluids.liquid_density[fluid])))
    area = float(np.fmin(spread, given.rooms.floor_area[room]))
    colder = float(table.conditions.temperature[room] - given.fluids.boiling_point[fluid])
    latent = float(given.fluids.latent_heat[fluid])
    if area <= 0.0 or colder <= 0.0:
        return {}
    gone = float(time_to_evaporate(mass, area, colder, latent))
    return {"pool_m2": number(area), "pool_gone_s": number(float(rounded(np.float64(gone))))}


def _marks(tables: Tables, row: int) -> list[dict[str, Any]]:
    table, results = tables.cases.table, tables.cases.results
    limits, values = tables.cases.limits, tables.cases.values
    return [
        {
            "measure": measure_name(int(table.hazard[row]), int(table.measured_on[row, place])),
            "limit_pct": number(float(limits[row, place])),
            "value_pct": number(float(values[row, place])),
            "at_s": number(float(results.to_marks[row, place])),
        }
        for place in range(3)
        if np.isfinite(limits[row, place])
    ]


def _held(tables: Tables, row: int) -> dict[str, bool]:
    """The safeguards that count for the release, and whether each holds."""
    guards = tables.cases.guards
    held: dict[str, Mask] = {
        DETECTION: guards.detection,
        VENTILATION: guards.ventilation,
        SHUT_OFF: guards.shut_off,
        NOBODY_INSIDE: guards.nobody_inside,
    }
    release = RELEASES[int(tables.cases.table.release[row])]
    return {
        name: bool(held[name][row])
        for name in release.safeguards
        if name != NOBODY_INSIDE or bool(guards.nobody_counts[row])
    }


def case_rules(family: str, hazard: str, gas: str, source: str) -> tuple[CaseRule, ...]:
    """One rule for each release that can take a room beyond a mark of a hazard."""
    return tuple(
        CaseRule(
            slug=f"{family}/{release.slug}",
            release=release.slug,
            hazard=hazard,
            gas=gas,
            method=_METHOD.get(release.slug, "mixing/displacement"),
            source=source,
        )
        for release in RELEASES
    )
