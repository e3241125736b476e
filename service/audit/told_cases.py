"""Solved cases become what an assessment answers of each: in its units, rounded once more."""

from collections.abc import Mapping, Sequence
from typing import Any, Final

import numpy as np

from service.audit.air import AIRFLOWS
from service.audit.assessment import Case, Mark
from service.audit.cases import CaseTable
from service.audit.hazards import (
    ABOUT_OXYGEN,
    FLAMMABLE,
    HAZARDS,
    OXYGEN_HIGH,
    OXYGEN_LOW,
    REFERENCE_LIMIT,
    TOXIC,
)
from service.audit.marks import limit_name, measure_name
from service.audit.release_rows import NO_VARIANT, VARIANTS
from service.audit.releases import RELEASES, Release
from service.audit.rules.rule import Tables
from service.audit.solve import Results
from service.physics.arrays import Floats, rounded
from service.physics.constants import SECONDS_PER_HOUR

_AT_ONCE: Final = "It is let go at once, so that no fan can hold it."
_BEYOND: Final = "It starts beyond the mark, from what evaporates before."
_HAZARD_SLUGS: Final = [hazard.slug for hazard in HAZARDS]
_OXYGEN_LOW: Final = _HAZARD_SLUGS.index(OXYGEN_LOW)
_FLAMMABLE: Final = _HAZARD_SLUGS.index(FLAMMABLE)
_OF_HAZARD: Final = {
    OXYGEN_LOW: ("marks/oxygen-by-pressure",),
    OXYGEN_HIGH: ("marks/oxygen-by-pressure",),
    TOXIC: ("toxic/time-weighted-means",),
    FLAMMABLE: ("flammable/le-chatelier", "layering/two-zone-bound"),
}

_Fields = Mapping[str, Any]


def told_cases(tables: Tables, bare: CaseTable, without: Results) -> Sequence[Case]:
    """Tell every case of a table; the cases without margins are row by row."""
    table, results, guards = tables.cases.table, tables.cases.results, tables.cases.guards
    found = {
        **_numbers(table, results),
        **_oxygen_times(table, results),
        "alarm_s": guards.alarm,
        "margin_s": guards.margin,
    }
    plain = {**_numbers(bare, without), "net_volume_m3": rounded(bare.volume)}
    return [
        Case(**what, **numbers, marks=marks, without_margins=of_bare)
        for what, numbers, marks, of_bare in zip(
            _described(tables), _by_case(found), _marks(tables), _by_case(plain), strict=True
        )
    ]


def _numbers(table: CaseTable, results: Results) -> dict[str, Floats]:
    about_gas = ~ABOUT_OXYGEN[table.hazard]
    percent = 100.0 * np.where(about_gas, table.gas_by_level, np.nan)
    flammable = table.hazard == _FLAMMABLE
    return {
        "oxygen_pct": rounded(100.0 * results.oxygen),
        "oxygen_kpa": rounded(results.oxygen_pressure / 1000.0),
        "peak_pct": rounded(percent * results.level),
        "mean_15min_pct": rounded(percent * results.means[:, 0]),
        "mean_8h_pct": rounded(percent * results.means[:, 1]),
        "lower_limit_pct": rounded(
            np.where(flammable, 100.0 * results.level / REFERENCE_LIMIT, np.nan)
        ),
        "at_s": results.at,
        "recovered_s": results.recovered,
        "gas_m3": results.gas,
        "required_m3_h": rounded(results.required * SECONDS_PER_HOUR),
        "restore_m3_h": rounded(results.restore * SECONDS_PER_HOUR),
    }


def _oxygen_times(table: CaseTable, results: Results) -> dict[str, Floats]:
    falls = (table.hazard == _OXYGEN_LOW)[:, np.newaxis]
    times = np.where(falls, results.to_marks, np.nan)
    return {
        "to_deficient_s": times[:, 0],
        "to_danger_s": times[:, 1],
        "to_critical_s": times[:, 2],
    }


def _by_case(numbers: Mapping[str, Floats]) -> list[_Fields]:
    """Columns as one mapping a case; None where there is no such number."""
    columns = [
        [value if there else None for value, there in zip(column.tolist(), held, strict=True)]
        for column, held in ((each, np.isfinite(each).tolist()) for each in numbers.values())
    ]
    return [dict(zip(numbers, row, strict=True)) for row in zip(*columns, strict=True)]


def _marks(tables: Tables) -> list[tuple[Mark, ...]]:
    table, results = tables.cases.table, tables.cases.results
    limits, values = tables.cases.limits, tables.cases.values
    return [
        tuple(
            Mark(
                place=place + 1,
                measure=measure_name(hazard, on[place]),
                limit=limit_name(hazard, place, sustained=sustained),
                limit_pct=limit[place],
                value_pct=value[place],
                crossed=crossed[place],
                at_s=None if times[place] != times[place] else times[place],
            )
            for place in range(3)
            if limit[place] == limit[place]
        )
        for hazard, sustained, on, limit, value, crossed, times in zip(
            table.hazard.tolist(),
            table.sustained.tolist(),
            table.measured_on.tolist(),
            limits.tolist(),
            values.tolist(),
            results.crossed.tolist(),
            results.to_marks.tolist(),
            strict=True,
        )
    ]


def _described(tables: Tables) -> list[_Fields]:
    table = tables.cases.table
    pushed = table.given.bases.by_displacement[table.room]
    return [
        {
            "release": RELEASES[release].slug,
            "airflow": AIRFLOWS[airflow],
            "hazard": HAZARDS[hazard].slug,
            "gas": HAZARDS[hazard].gas,
            "counts": counts,
            "fluids": fluids,
            "vessels": vessels,
            "lines": lines,
            "variant": None if variant == NO_VARIANT else VARIANTS[variant],
            "required_reason": _why_none(at_once=at_once, held=held),
            "mark": mark,
            "method": methods(RELEASES[release], hazard, at_once=at_once, pushes=pushes),
        }
        for (
            release,
            airflow,
            hazard,
            variant,
            counts,
            mark,
            at_once,
            held,
            pushes,
            fluids,
            vessels,
            lines,
        ) in zip(
            table.release.tolist(),
            table.airflow.tolist(),
            table.hazard.tolist(),
            table.variant.tolist(),
            table.counts.tolist(),
            tables.cases.results.mark.tolist(),
            table.at_once.tolist(),
            np.isfinite(tables.cases.results.required).tolist(),
            pushed.tolist(),
            tables.records.fluids,
            tables.records.vessels,
            tables.records.lines,
            strict=True,
        )
    ]


def _why_none(*, at_once: bool, held: bool) -> str | None:
    if at_once:
        return _AT_ONCE
    return None if held else _BEYOND


_POOL: Final = "spill/pool-on-floor"
_ICE: Final = "dry-ice/share-per-hour"


def methods(release: Release, hazard: int, *, at_once: bool, pushes: bool) -> tuple[str, ...]:
    """Methods that a case rests on, by their slugs."""
    mixing = "mixing/displacement" if pushes else "mixing/while-displacing"
    return (
        "gas/ideal-at-site",
        "ventilation/piecewise-constant",
        *(slug for slug in release.method if slug != (_ICE if at_once else _POOL)),
        *((mixing,) if at_once else ()),
        *_OF_HAZARD[HAZARDS[hazard].slug],
    )
