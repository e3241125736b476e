"""The marks of cases and the numbers set against them, in the units of answers."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np

from service.audit.cases import CaseTable
from service.audit.columns import CARBON_DIOXIDE, NITROUS_OXIDE, OXYGEN
from service.audit.hazards import (
    ABOUT_OXYGEN,
    FLAMMABLE,
    FLAMMABLE_GAS,
    HAZARDS,
    MEASURES,
    OXYGEN_HIGH,
    OXYGEN_LOW,
    REFERENCE_LIMIT,
    SIGN,
    TOXIC,
)
from service.audit.solve import Results
from service.physics.arrays import Floats, rounded
from service.physics.constants import OXYGEN_IN_AIR

LOWER_LIMIT: Final = "lower-limit"

# Values of the basis that set the three marks, of accidents and of what is sustained.
_LIMITS: Final[Mapping[tuple[str, str], tuple[tuple[str, str, str], tuple[str, str, str]]]] = {
    (OXYGEN_LOW, OXYGEN): (("oxygen_deficient_pct", "oxygen_danger_pct", "oxygen_critical_pct"),)
    * 2,
    (OXYGEN_HIGH, OXYGEN): (
        ("oxygen_enriched_pct", "oxygen_rich_marks_pct/0", "oxygen_rich_marks_pct/1"),
    )
    * 2,
    (TOXIC, CARBON_DIOXIDE): (
        (
            "carbon_dioxide_pct/mean_8h",
            "carbon_dioxide_pct/mean_15min",
            "carbon_dioxide_pct/peak",
        ),
    )
    * 2,
    (TOXIC, NITROUS_OXIDE): (
        ("", "nitrous_oxide_accident_pct", "oxygen_critical_pct"),
        ("nitrous_oxide_pct/mean_8h", "nitrous_oxide_pct/mean_15min", "oxygen_critical_pct"),
    ),
    (FLAMMABLE, FLAMMABLE_GAS): (("lfl_shares/0", "lfl_shares/1", "lfl_shares/2"),) * 2,
}
_FLAMMABLE: Final = [hazard.slug for hazard in HAZARDS].index(FLAMMABLE)


def mark_percent(table: CaseTable, results: Results) -> tuple[Floats, Floats]:
    """Limits of the marks of each case and the values set against them, (rows, 3), in percent."""
    sign = SIGN[table.hazard][:, np.newaxis]
    oxygen = ABOUT_OXYGEN[table.hazard][:, np.newaxis]
    finite = np.where(np.isfinite(table.marks), table.marks, np.nan)
    there = np.where(oxygen, finite, 0.0)
    in_oxygen = 100.0 * OXYGEN_IN_AIR * (1.0 - sign * there)
    scale = np.where(table.hazard == _FLAMMABLE, 100.0 / REFERENCE_LIMIT, 100.0)[:, np.newaxis]
    limits = np.where(oxygen, in_oxygen, finite * scale)
    values = np.where(
        oxygen,
        100.0 * results.oxygen[:, np.newaxis],
        results.measured(table.measured_on) * scale,
    )
    return rounded(limits), rounded(values)


def limit_name(hazard: int, place: int, *, sustained: bool) -> str:
    """The value of the basis that sets a mark."""
    found = HAZARDS[hazard]
    return _LIMITS[found.slug, found.gas][int(sustained)][place]


def measure_name(hazard: int, measured_on: int) -> str:
    """What a mark is set against, as it is called in answers."""
    if ABOUT_OXYGEN[hazard]:
        return "oxygen"
    return LOWER_LIMIT if hazard == _FLAMMABLE else MEASURES[measured_on]
