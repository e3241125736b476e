"""Rules on gas detectors: in date, there at all, at a height that meets the gas, heard."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import DETECTOR_STATES, PLACES, UNKNOWN, Moments, all_of
from service.audit.rules.kinds import Missing, Overdue, Threshold
from service.audit.rules.rule import Direction, Subject, Tables, detector_record
from service.audit.rules.words import as_record
from service.audit.safeguards import (
    BELOW_CEILING,
    BREATHING_BAND,
    LOW_BAND,
    OXYGEN_GAS,
    gas_heights,
)
from service.audit.severity import MAJOR, MINOR, worst_by_room
from service.physics.arrays import Floats, Mask

_IN_SERVICE = DETECTOR_STATES.index("in-service")
_OFF = DETECTOR_STATES.index("off")
_ENTRANCE = PLACES.index("entrance")
_SILENCE_ALLOWED: Final = np.timedelta64(3600, "s")  # common practice, no source


def _not_off(tables: Tables) -> Mask:
    off: Mask = tables.cases.table.given.detectors.state != _OFF
    return off


def _calibration_due(tables: Tables) -> Moments:
    return tables.cases.table.given.detectors.calibration_due


def _is_silenced(tables: Tables) -> Mask:
    return all_of(~np.isnat(tables.cases.table.given.detectors.silenced_since), _not_off(tables))


def _silence_ends(tables: Tables) -> Moments:
    ends: Moments = tables.cases.table.given.detectors.silenced_since + _SILENCE_ALLOWED
    return ends


def _no_oxygen_detector(tables: Tables) -> Mask:
    """Rooms where a case that counts crosses a mark of oxygen, with no detector that works."""
    table = tables.cases.table
    detectors = table.given.detectors
    there = all_of(
        detectors.gas == OXYGEN_GAS,
        detectors.state == _IN_SERVICE,
        detectors.placed != _ENTRANCE,
    )
    watched = np.zeros(table.given.count, dtype=np.bool_)
    watched[detectors.room[there]] = True
    return all_of(worst_by_room(tables.cases.results.mark, table.counts, table) > 0, ~watched)


def _say_missing(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    room = tables.room(row)
    detectors = [as_record(detector.record) for detector in room.detectors]
    return (
        f"{room.record.tag} can go beyond a mark of oxygen and has no oxygen detector in service.",
        "Put an oxygen detector where the gas goes first, with an alarm outside every entrance.",
        {"detectors": detectors},
    )


def _watches(tables: Tables) -> Mask:
    """Detectors in service inside a room, for a gas whose height is known."""
    detectors = tables.cases.table.given.detectors
    low, high = _heights_wanted(tables)
    return all_of(
        detectors.state == _IN_SERVICE, detectors.placed != _ENTRANCE, np.logical_or(low, high)
    )


def _heights_wanted(tables: Tables) -> tuple[Mask, Mask]:
    """Whether each detector may hang low, and whether at the ceiling, for the gas it is for.

    An oxygen detector watches every gas of its room, another one that gas where the room has it.
    """
    table = tables.cases.table
    given, found = table.given, table.sources
    there = np.ones(found.room.size, dtype=np.bool_)
    there[: table.stock.present.size] = table.stock.present
    low, high = (part & there for part in gas_heights(given, found.fluid))
    named = found.fluid != UNKNOWN
    gas = np.full(found.fluid.size, OXYGEN_GAS)
    gas[named] = given.fluids.gas[found.fluid[named]]
    detectors = given.detectors

    def wanted(part: Mask) -> Mask:
        of_gas = np.zeros((given.count, len(given.gases)), dtype=np.bool_)
        of_gas[found.room[part], gas[part]] = True
        of_gas[found.room[part], OXYGEN_GAS] = True
        met: Mask = of_gas[detectors.room, detectors.gas]
        return met

    return wanted(low), wanted(high)


def _metres_off(tables: Tables) -> Floats:
    """Distance from the nearest height that counts; not-a-number where no height is recorded."""
    table = tables.cases.table
    height = table.given.detectors.height
    low, high = _heights_wanted(tables)
    ceiling = table.conditions.height[table.given.detectors.room]
    off = _outside(height, *BREATHING_BAND)
    off = np.where(low, np.minimum(off, _outside(height, *LOW_BAND)), off)
    below = np.clip(np.abs(ceiling - height) - BELOW_CEILING, 0.0, None)
    off = np.where(high, np.fmin(off, below), off)
    return np.where(np.isnan(height), np.nan, off)


def _outside(height: Floats, low: float, high: float) -> Floats:
    outside: Floats = np.clip(np.maximum(low - height, height - high), 0.0, None)
    return outside


def _nothing(tables: Tables) -> Floats:
    return np.zeros(tables.cases.table.given.detectors.room.size)


def _say_misplaced(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    record = detector_record(tables, row)
    height = float(table.given.detectors.height[row])
    low, high = (bool(part[row]) for part in _heights_wanted(tables))
    wanted = _wanted_text(low, high)
    if np.isnan(height):
        statement = f"The height of {record.tag} is not recorded; the gas here is met {wanted}."
    else:
        statement = f"{record.tag} hangs at {height:.2f} m; the gas here is met {wanted}."
    heights = {"height_m": None if np.isnan(height) else height, "wanted": wanted}
    return statement, f"Hang it {wanted}, and record the height.", heights


def _wanted_text(low: bool, high: bool) -> str:
    places = [f"{LOW_BAND[0]:g} to {LOW_BAND[1]:g} m above the floor"] if low else []
    places += [f"within {BELOW_CEILING:g} m of the ceiling"] if high else []
    return " or ".join(places)


RULES: Final = (
    Overdue(
        slug="detectors/calibration-overdue",
        subject=Subject.DETECTORS,
        applies=_not_off,
        due=_calibration_due,
        overdue="Calibration of {tag} has been overdue since {due}.",
        never_done="No calibration of {tag} is recorded, with the interval it holds for.",
        remedy="Calibrate it and record the date, or withdraw it and rely on another.",
        consequence=MINOR,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
    Overdue(
        slug="detectors/silenced",
        subject=Subject.DETECTORS,
        applies=_is_silenced,
        due=_silence_ends,
        overdue="{tag} is still silenced after the hour allowed, which ended {due}.",
        never_done="{tag} is silenced.",
        remedy="Put its alarm back, or keep people out until it is.",
        consequence=MAJOR,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="detectors/missing",
        subject=Subject.ROOMS,
        missing=_no_oxygen_detector,
        consequence=MINOR,
        words=_say_missing,
        method="records/present",
        source=COMMON_PRACTICE,
        gas="oxygen",
    ),
    Threshold(
        slug="detectors/misplaced",
        subject=Subject.DETECTORS,
        worse_is=Direction.HIGHER,
        applies=_watches,
        measure=_metres_off,
        limit=_nothing,
        consequence=MINOR,
        words=_say_misplaced,
        method="detectors/heights",
        source=COMMON_PRACTICE,
    ),
)
