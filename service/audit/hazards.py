"""The hazards a room is judged for, each with the gases that raise it and its marks (judging 3)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import CARBON_DIOXIDE, NITROUS_OXIDE, OXYGEN, UNKNOWN, Columns
from service.audit.conditions import Conditions, fraction_of_high_mark, fraction_of_low_mark, known
from service.physics.arrays import Floats, Integers, Mask
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.ventilation import dilution_rate

OXYGEN_LOW: Final = "oxygen-low"
OXYGEN_HIGH: Final = "oxygen-high"
TOXIC: Final = "toxic"
FLAMMABLE: Final = "flammable"
FLAMMABLE_GAS: Final = "flammable-gas"

# What a mark is set against.
PEAK, MEAN_15MIN, MEAN_8H = range(3)
MEASURES: Final = ("peak", "mean-15min", "mean-8h")
WINDOWS: Final = {MEAN_15MIN: 900.0, MEAN_8H: 28_800.0}  # [s]

# A level of flammable gas is what share of this limit it is: far below every real one, so that no
# gas weighs more than itself even where a record slips by a factor of a thousand.
REFERENCE_LIMIT: Final = 1e-6
CARBON_DIOXIDE_IN_AIR: Final = 0.0005  # what a case starts from (judging 1)


@dataclass(frozen=True, slots=True)
class Gases:
    """Gases in rooms."""

    room: Integers
    fluid: Integers  # -1 where nobody said which
    oxygen: Floats  # of the gas itself [1]


@dataclass(frozen=True, slots=True)
class Weights:
    """Which gases raise a hazard, and the level of it that a fraction of one makes."""

    raises: Mask
    level: Floats  # by fraction of the gas, never negative


@dataclass(frozen=True, slots=True)
class Marks:
    """First, second and third mark of each room; infinite where there is none."""

    levels: Floats  # (rooms, 3)
    measured_on: tuple[int, int, int]


@dataclass(frozen=True, slots=True)
class Hazard:
    """A hazard; its level is that of clean air at the start, and rises as it worsens."""

    slug: str
    gas: str  # the gas judged, and that a detector must be for
    weigh: Callable[[Columns, Gases], Weights]
    marks: Callable[[Columns, Conditions, bool], Marks]  # of a release that lasts, or of none
    clean: float = 0.0  # level in clean air
    oxygen_taken: float = 0.0  # share of the oxygen in air that a level of 1 takes; 0: by its gas
    reached: tuple[bool, bool, bool] = (False, False, False)  # at the mark is beyond it
    has_means: bool = False


def _poorer(_given: Columns, gases: Gases) -> Weights:
    taken = dilution_rate(np.ones_like(gases.oxygen), gases.oxygen)
    return Weights(gases.oxygen <= OXYGEN_IN_AIR, taken)


def _richer(_given: Columns, gases: Gases) -> Weights:
    brought = -dilution_rate(np.ones_like(gases.oxygen), gases.oxygen)
    return Weights(gases.oxygen > OXYGEN_IN_AIR, brought)


def _is_carbon_dioxide(given: Columns, gases: Gases) -> Weights:
    found = of_fluid(given.fluids.carbon_dioxide, gases.fluid)
    return Weights(found, found.astype(np.float64))


def _is_nitrous_oxide(given: Columns, gases: Gases) -> Weights:
    found = of_fluid(given.fluids.nitrous_oxide, gases.fluid)
    return Weights(found, found.astype(np.float64))


def _burns(given: Columns, gases: Gases) -> Weights:
    """The rule of Le Chatelier: fractions over their limits add up, and 1 is at the limit."""
    limit = flammable_limit(given, gases.room, gases.fluid)
    found = limit > 0.0
    return Weights(found, np.where(found, REFERENCE_LIMIT / np.where(found, limit, 1.0), 0.0))


def of_fluid(which: Mask, fluid: Integers) -> Mask:
    """Look a property of fluids up; a fluid that nobody named has none."""
    found = np.zeros(fluid.shape, dtype=np.bool_)
    named = fluid != UNKNOWN
    found[named] = which[fluid[named]]
    return found


def flammable_limit(given: Columns, room: Integers, fluid: Integers) -> Floats:
    """Lower flammable limit of gases in rooms; not-a-number where there is none to go by."""
    fluids, bases = given.fluids, given.bases
    limit = np.full(fluid.shape, np.nan)
    burns = of_fluid(fluids.flammable, fluid)
    rows, which = room[burns], fluid[burns]
    column = fluids.limit_named[which]
    named = bases.flammable_limits[rows, np.maximum(column, 0)]
    limit[burns] = known(fluids.own_limit[which], np.where(column == UNKNOWN, np.nan, named))
    return limit


def _low_marks(_given: Columns, room: Conditions, _lasts: bool) -> Marks:
    return Marks(fraction_of_low_mark(room.low_marks), (PEAK, PEAK, PEAK))


def _high_marks(_given: Columns, room: Conditions, _lasts: bool) -> Marks:
    return Marks(fraction_of_high_mark(room.high_marks), (PEAK, PEAK, PEAK))


def _carbon_dioxide_marks(given: Columns, _room: Conditions, lasts: bool) -> Marks:
    """An accident is over long before 8 h: the limit of 8 h then stands for 15 min."""
    first = MEAN_8H if lasts else MEAN_15MIN
    return Marks(given.bases.carbon_dioxide, (first, MEAN_15MIN, PEAK))


def _nitrous_oxide_marks(given: Columns, room: Conditions, lasts: bool) -> Marks:
    """The mean of 8 h is for those who work there; a room nobody describes is worked in."""
    critical = fraction_of_low_mark(room.low_marks[:, 2])
    none = np.full(given.count, np.inf)
    if not lasts:
        levels = np.stack([none, given.bases.nitrous_oxide_accident, critical], axis=1)
        return Marks(levels, (PEAK, PEAK, PEAK))
    first = np.where(given.rooms.attended == 0, np.inf, given.bases.nitrous_oxide[:, 0])
    levels = np.stack([first, given.bases.nitrous_oxide[:, 1], critical], axis=1)
    return Marks(levels, (MEAN_8H, MEAN_15MIN, PEAK))


def _flammable_marks(given: Columns, _room: Conditions, _lasts: bool) -> Marks:
    return Marks(REFERENCE_LIMIT * given.bases.flammable_shares, (PEAK, PEAK, PEAK))


HAZARDS: Final = (
    Hazard(OXYGEN_LOW, OXYGEN, _poorer, _low_marks, oxygen_taken=1.0),
    Hazard(OXYGEN_HIGH, OXYGEN, _richer, _high_marks, oxygen_taken=-1.0),
    Hazard(
        TOXIC,
        CARBON_DIOXIDE,
        _is_carbon_dioxide,
        _carbon_dioxide_marks,
        clean=CARBON_DIOXIDE_IN_AIR,
        reached=(False, False, True),
        has_means=True,
    ),
    Hazard(TOXIC, NITROUS_OXIDE, _is_nitrous_oxide, _nitrous_oxide_marks, has_means=True),
    Hazard(FLAMMABLE, FLAMMABLE_GAS, _burns, _flammable_marks, reached=(False, False, True)),
)

ABOUT_OXYGEN: Final = np.array([hazard.oxygen_taken != 0.0 for hazard in HAZARDS])
SIGN: Final = np.array([hazard.oxygen_taken for hazard in HAZARDS])
CLEAN: Final = np.array([hazard.clean for hazard in HAZARDS])
HAS_MEANS: Final = np.array([hazard.has_means for hazard in HAZARDS])
REACHED: Final = np.array([hazard.reached for hazard in HAZARDS])
