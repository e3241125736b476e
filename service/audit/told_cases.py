"""Solved cases become what an assessment answers of each: in its units, rounded once more."""

from collections.abc import Mapping, Sequence
from typing import Any, Final

import numpy as np

from service.audit.air import AIRFLOWS
from service.audit.assessment import Case
from service.audit.hazards import HAZARDS
from service.audit.releases import LARGEST_VESSEL, RELEASES, Release
from service.audit.rules.rule import Tables
from service.audit.solve import Results
from service.physics.arrays import Floats, rounded
from service.physics.constants import SECONDS_PER_HOUR

_AT_ONCE: Final = "It is let go at once, so that no fan can hold it."

_Fields = Mapping[str, Any]


def told_cases(tables: Tables, without: Results, volume: Floats) -> Sequence[Case]:
    """Tell every case of a table; results without margins and their net volume are row by row."""
    guards = tables.cases.guards
    found = {**_numbers(tables.cases.results), "alarm_s": guards.alarm, "margin_s": guards.margin}
    bare = {**_numbers(without), "net_volume_m3": rounded(volume)}
    return [
        Case(**what, **numbers, without_margins=plain)
        for what, numbers, plain in zip(
            _described(tables), _by_case(found), _by_case(bare), strict=True
        )
    ]


def _numbers(results: Results) -> dict[str, Floats]:
    return {
        "oxygen_pct": rounded(100.0 * results.oxygen),
        "oxygen_kpa": rounded(results.oxygen_pressure / 1000.0),
        "at_s": results.at,
        "to_deficient_s": results.to_marks[:, 0],
        "to_danger_s": results.to_marks[:, 1],
        "to_critical_s": results.to_marks[:, 2],
        "recovered_s": results.recovered,
        "gas_m3": results.gas,
        "required_m3_h": rounded(results.required * SECONDS_PER_HOUR),
        "restore_m3_h": rounded(results.restore * SECONDS_PER_HOUR),
    }


def _by_case(numbers: Mapping[str, Floats]) -> list[_Fields]:
    """Columns as one mapping a case; None where there is no such number."""
    columns = [
        [value if there else None for value, there in zip(column.tolist(), held, strict=True)]
        for column, held in ((each, np.isfinite(each).tolist()) for each in numbers.values())
    ]
    return [dict(zip(numbers, row, strict=True)) for row in zip(*columns, strict=True)]


def _described(tables: Tables) -> list[_Fields]:
    table = tables.cases.table
    pushed = table.given.bases.by_displacement[table.room]
    return [
        {
            "release": RELEASES[release].slug,
            "airflow": AIRFLOWS[airflow],
            "hazard": HAZARDS[hazard].slug,
            "counts": counts,
            "fluids": fluids,
            "vessels": vessels,
            "required_reason": _AT_ONCE if RELEASES[release].at_once else None,
            "mark": mark,
            "method": _method(RELEASES[release], by_displacement=displaces),
        }
        for release, airflow, hazard, counts, mark, displaces, fluids, vessels in zip(
            table.release.tolist(),
            table.airflow.tolist(),
            table.hazard.tolist(),
            table.counts.tolist(),
            tables.cases.results.mark.tolist(),
            pushed.tolist(),
            tables.records.fluids,
            tables.records.vessels,
            strict=True,
        )
    ]


def _method(release: Release, *, by_displacement: bool) -> tuple[str, ...]:
    if release.slug != LARGEST_VESSEL:
        return release.method
    mixing = "mixing/displacement" if by_displacement else "mixing/while-displacing"
    return (*release.method, mixing)
