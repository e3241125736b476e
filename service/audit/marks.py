"""The marks of cases and the numbers set against them, in the units of answers."""

from __future__ import annotations

from typing import Final

import numpy as np

from service.audit.cases import CaseTable
from service.audit.hazards import ABOUT_OXYGEN, FLAMMABLE, HAZARDS, MEASURES, REFERENCE_LIMIT, SIGN
from service.audit.solve import Results
from service.physics.arrays import Floats, rounded
from service.physics.constants import OXYGEN_IN_AIR

LOWER_LIMIT: Final = "lower-limit"

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


def measure_name(hazard: int, measured_on: int) -> str:
    """What a mark is set against, as it is called in answers."""
    if ABOUT_OXYGEN[hazard]:
        return "oxygen"
    return LOWER_LIMIT if hazard == _FLAMMABLE else MEASURES[measured_on]
