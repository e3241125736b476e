"""The hazards a room is judged for, each with the gases that raise it and its marks (judging 3)."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

from service.audit.conditions import Conditions, fraction_of_high_mark, fraction_of_low_mark
from service.physics.arrays import Floats, Mask
from service.physics.constants import OXYGEN_IN_AIR

OXYGEN_LOW: Final = "oxygen-low"
OXYGEN_HIGH: Final = "oxygen-high"


@dataclass(frozen=True, slots=True)
class Hazard:
    """A hazard; its level G is 0 in clean air and rises as it worsens."""

    slug: str
    gas: str  # the gas judged, and that a detector must be for
    sign: float  # of the oxygen taken by a gas, counted as level
    raised_by: Callable[[Floats], Mask]  # gases, by their own oxygen
    marks: Callable[[Conditions], Floats]  # oxygen fractions, (rooms, 3)
    level: Callable[[Floats], Floats]  # of an oxygen fraction


def _poorer(oxygen: Floats) -> Mask:
    return oxygen <= OXYGEN_IN_AIR


def _richer(oxygen: Floats) -> Mask:
    return oxygen > OXYGEN_IN_AIR


def _low_marks(room: Conditions) -> Floats:
    return room.low_marks


def _high_marks(room: Conditions) -> Floats:
    return room.high_marks


HAZARDS: Final = (
    Hazard(OXYGEN_LOW, "oxygen", 1.0, _poorer, _low_marks, fraction_of_low_mark),
    Hazard(OXYGEN_HIGH, "oxygen", -1.0, _richer, _high_marks, fraction_of_high_mark),
)
