"""Rules on cases: one a release and hazard, judged by the mark crossed and the safeguards."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from service.audit.air import AIRFLOWS, LOST
from service.audit.assessment import SEVERITIES
from service.audit.hazards import HAZARDS, OXYGEN_LOW
from service.audit.releases import BOIL_OFF, RELEASES
from service.audit.rules.kinds import never
from service.audit.rules.remedies import boil_off_remedy, largest_vessel_remedy
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables
from service.audit.rules.words import (
    as_record,
    duration_text,
    listed,
    number,
    oxygen_text,
)
from service.audit.safeguards import Safeguards
from service.physics.arrays import Mask

LOW_MARKS: Final = ("deficient", "danger", "critical")
HIGH_MARKS: Final = ("enriched", "second", "third")


@dataclass(frozen=True, slots=True)
class CaseRule:
    """A release that takes a room beyond a mark of a hazard."""

    slug: str
    release: str
    hazard: str
    method: str
    source: str

    @property
    def subject(self) -> Subject:
        """A finding a room, from its worst case."""
        return Subject.CASES

    @property
    def gas(self) -> str | None:
        """The gas judged."""
        return HAZARDS[self._hazard].gas

    @property
    def worse_is(self) -> Direction:
        """Less oxygen is worse, or more of it."""
        return Direction.LOWER if self.hazard == OXYGEN_LOW else Direction.HIGHER

    @property
    def _hazard(self) -> int:
        return [hazard.slug for hazard in HAZARDS].index(self.hazard)

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where a case of the release is beyond its first mark."""
        table, results = tables.cases.table, tables.cases.results
        release = [release.slug for release in RELEASES].index(self.release)
        chosen = (table.release == release) & (table.hazard == self._hazard) & table.shown
        return Judged(
            broken=chosen & (results.mark > 0),
            measure=100.0 * results.oxygen,
            limit=100.0 * table.oxygen_marks[:, 0],
            consequence=tables.cases.severity,
            turns_at=never(table.size),
        )

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say how far the worst case goes, and what would keep it inside."""
        row = rows[0]
        remedy = boil_off_remedy if self.release == BOIL_OFF else largest_vessel_remedy
        return Said(
            statement=_statement(tables, row),
            remedy=remedy(tables, row),
            evidence={
                **case_evidence(tables, row),
                "cases": [case_evidence(tables, each) for each in rows[1:]],
            },
        )


def _statement(tables: Tables, row: int) -> str:
    table, results = tables.cases.table, tables.cases.results
    low = HAZARDS[int(table.hazard[row])].slug == OXYGEN_LOW
    place = int(results.mark[row]) - 1
    level = oxygen_text(100.0 * float(results.oxygen[row]), low=low)
    pressure = float(results.oxygen_pressure[row]) / 1000.0
    mark = 100.0 * float(table.oxygen_marks[row, place])
    name = (LOW_MARKS if low else HIGH_MARKS)[place]
    return (
        f"{_event(tables, row)} would bring oxygen {'down' if low else 'up'} to {level} "
        f"({pressure:.1f} kPa), {'below' if low else 'above'} the {name} mark of {mark:.4g} %; "
        f"{_times(tables, row)}{_caution(tables, row)}."
    )


def _event(tables: Tables, row: int) -> str:
    table = tables.cases.table
    vessels = [record.tag for record in tables.records.vessels[row]]
    source, gas = listed(vessels or ["the purge"]), listed(tables.records.fluids[row])
    if RELEASES[int(table.release[row])].slug != BOIL_OFF:
        return f"All {gas} of {source} let go at once"
    lost = AIRFLOWS[int(table.airflow[row])] == LOST
    air = "without power for its fans" if lost else "with the ventilation as measured"
    return f"Normal evaporation and use of {gas} from {source}, {air},"


def _times(tables: Tables, row: int) -> str:
    """When the first mark is passed, and when the room is back inside it."""
    table, results = tables.cases.table, tables.cases.results
    passed, back = float(results.to_marks[row, 0]), float(results.recovered[row])
    first = 100.0 * float(table.oxygen_marks[row, 0])
    start = (
        "" if table.at_once[row] else f"it would pass {first:.4g} % after {duration_text(passed)} "
    )
    if np.isnan(back):
        end = f"and would not be back within {duration_text(float(results.course.times[row, -1]))}"
    else:
        end = f"and would be back at {first:.4g} % after {duration_text(back)}"
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
    return {
        "release": RELEASES[int(table.release[row])].slug,
        "airflow": AIRFLOWS[int(table.airflow[row])],
        "hazard": HAZARDS[int(table.hazard[row])].slug,
        "counts": bool(table.counts[row]),
        "severity": SEVERITIES[severity] if severity >= 0 else None,
        "mark": int(results.mark[row]),
        "oxygen_pct": number(100.0 * float(results.oxygen[row])),
        "oxygen_kpa": number(float(results.oxygen_pressure[row]) / 1000.0),
        "marks_pct": [number(100.0 * float(mark)) for mark in table.oxygen_marks[row]],
        "gas_m3": number(float(results.gas[row])),
        "net_volume_m3": number(float(table.volume[row])),
        "to_marks_s": [number(float(seconds)) for seconds in results.to_marks[row]],
        "recovered_s": number(float(results.recovered[row])),
        "alarm_s": number(float(guards.alarm[row])),
        "margin_s": number(float(guards.margin[row])),
        "safeguards": _held(guards, row),
        "records": [as_record(record) for record in tables.records.vessels[row]],
    }


def _held(guards: Safeguards, row: int) -> dict[str, bool]:
    held: dict[str, Mask] = {
        "detection": guards.detection,
        "ventilation": guards.ventilation,
        "nobody_inside": guards.nobody_inside,
    }
    return {name: bool(mask[row]) for name, mask in held.items()}
