"""Which safeguards hold in each case, and whether people are out in time (judging 4 and 6)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, BOOSTED, LOST, PROVEN
from service.audit.cases import CaseTable
from service.audit.columns import (
    DETECTOR_STATES,
    PLACES,
    ROOM_KINDS,
    SETTLES,
    UNKNOWN,
    Columns,
    is_one_of,
    members,
)
from service.audit.conditions import Conditions, known
from service.audit.hazards import ABOUT_OXYGEN, SIGN
from service.audit.outages import out_now
from service.audit.releases import LINE_BREAK, OVERFILL, RELEASES
from service.audit.solve import Results, proven_to_hold
from service.audit.sources import NO_LINE
from service.physics.arrays import Floats, Integers, Mask, quotient, rounded, sum_by_group
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.detector import alarm_time

OXYGEN_GAS: Final = 0  # row of the gases

# Heights at which a detector gives first warning, and where it reads what people breathe. [m]
# Common practice, no source.
LOW_BAND: Final = (0.2, 1.0)
BELOW_CEILING: Final = 0.5
BREATHING_BAND: Final = (0.9, 1.6)

# Response of a detector of which none is recorded. [s]  Common practice, no source.
UNKNOWN_T90: Final = 30.0

_IN_SERVICE = DETECTOR_STATES.index("in-service")
_ENTRANCE = PLACES.index("entrance")
_LOW, _HIGH, _METHANE = range(len(SETTLES))
_SEALED = [ROOM_KINDS.index(kind) for kind in ("lift", "vehicle")]
_PIT = ROOM_KINDS.index("pit")
_NOTICED: Final = np.array([release.noticed for release in RELEASES])
_BOOSTED = AIRFLOWS.index(BOOSTED)
_OVERFILL = [release.slug for release in RELEASES].index(OVERFILL)
_LINE_BREAK = [release.slug for release in RELEASES].index(LINE_BREAK)

# A mark that is not there, as a level that no course reaches.
_BEYOND_ALL: Final = 1e9


@dataclass(frozen=True, slots=True)
class Detection:
    """One row a detector, whatever the case."""

    calibrated: Mask
    silenced: Mask
    works: Mask  # in service, in calibration, not silenced, inside
    warns_outside: Mask
    is_low: Mask  # hangs where cold heavy gas is met first
    is_high: Mask  # hangs where light gas is met first
    at_breathing_height: Mask


@dataclass(frozen=True, slots=True)
class Safeguards:
    """One row a case."""

    detectors: Detection
    detection: Mask
    ventilation: Mask
    shut_off: Mask
    nobody_inside: Mask
    alone_suffices: Mask  # nobody inside counts as all
    nobody_counts: Mask  # a kind of room where nobody inside is a safeguard
    alarm: Floats  # [s] to the first alarm; not-a-number where there is none
    out: Floats  # [s] until people are out; not-a-number where nothing warns them
    margin: Floats  # [s] between being out and the second mark; not-a-number where nobody is
    late: Mask  # the second mark comes before people are out
    needs_low: Mask
    needs_high: Mask
    alarms: Alarms


@dataclass(frozen=True, slots=True)
class Alarms:
    """One row a case and a detector that would warn of it."""

    case: Integers
    detector: Integers
    time: Floats  # [s]; not-a-number where it is never reached


def detection(given: Columns, room: Conditions, at: np.datetime64) -> Detection:
    """Judge each detector by its own records."""
    detectors = given.detectors
    calibrated = detectors.calibration_due > at
    silenced = detectors.silenced_since <= at
    height = detectors.height
    ceiling = room.height[detectors.room]
    return Detection(
        calibrated=calibrated,
        silenced=silenced,
        works=(detectors.state == _IN_SERVICE)
        & ~out_now(detectors.outage_begins, detectors.outage_ends, at)
        & calibrated
        & ~silenced
        & (detectors.placed != _ENTRANCE),
        warns_outside=(detectors.heard_outside == 1) | (detectors.display_outside == 1),
        is_low=(height >= LOW_BAND[0]) & (height <= LOW_BAND[1]),
        is_high=np.abs(ceiling - height) <= BELOW_CEILING,
        at_breathing_height=(height >= BREATHING_BAND[0]) & (height <= BREATHING_BAND[1]),
    )


def safeguards(table: CaseTable, results: Results, at: np.datetime64) -> Safeguards:
    """Tell which safeguards hold in each case."""
    found = detection(table.given, table.conditions, at)
    needs_low, needs_high = _heights_needed(table)
    second = _time_to_second(table, results)
    alarms = _alarms(table, results, found, needs_low, needs_high)
    case, detector, alarm = alarms.case, alarms.detector, alarms.time
    first = _first(alarm, case, table.size)
    # Boosted air is the air as measured until the alarm, so that their first alarm is one moment;
    # sought anew, at the very end of a segment, it could be missed by a rounding.
    first = np.where(table.airflow == _BOOSTED, first[table.measured], first)
    out_after = table.conditions.out_after_alarm[table.room]
    kind = table.given.rooms.kind[table.room]
    alone = table.given.rooms.unaccompanied[table.room] == 1
    in_time = np.isnan(second[case]) | (alarm + out_after[case] <= second[case])
    # One that nobody says alarms at all is no safeguard, late though it is taken to warn.
    alarms_set = ~np.isnan(table.given.detectors.alarms)
    recorded = np.logical_or.reduce(alarms_set, axis=1)[detector]
    warns = recorded & found.warns_outside[detector] & ~np.isnan(alarm)
    warns &= table.at_once[case] | in_time
    has_low = _any(warns & found.is_low[detector], case, table.size)
    has_high = _any(warns & found.is_high[detector], case, table.size)
    # What is seen and heard is a warning from the start, before any alarm.
    # In another room nobody sees what lets the gas go.
    noticed = _NOTICED[table.release] & (table.network == table.room)
    warned = np.where(noticed & ~table.at_once, 0.0, first)
    out = warned + out_after
    return Safeguards(
        detectors=found,
        detection=(has_low | ~needs_low) & (has_high | ~needs_high) & (needs_low | needs_high),
        ventilation=_ventilation(table, results),
        shut_off=_shut_off(table, results),
        nobody_inside=alone & is_one_of(kind, [*_SEALED, _PIT]),
        alone_suffices=alone & is_one_of(kind, _SEALED),
        nobody_counts=is_one_of(kind, [*_SEALED, _PIT]),
        alarm=rounded(first),
        out=rounded(out),
        margin=rounded(second - warned - out_after),
        # A comparison with not-a-number is false: without any warning people are not out.
        late=~table.at_once & ~np.isnan(second) & ~(out <= second),
        needs_low=needs_low,
        needs_high=needs_high,
        alarms=alarms,
    )


def gas_heights(given: Columns, fluid: Integers) -> tuple[Mask, Mask]:
    """Tell whether a gas must be met low, and whether at the ceiling; one unknown is heavy."""
    settles = np.full(fluid.shape, _LOW)
    named = fluid != UNKNOWN
    settles[named] = given.fluids.settles[fluid[named]]
    return is_one_of(settles, (_LOW, _METHANE)), is_one_of(settles, (_HIGH, _METHANE))


def _heights_needed(table: CaseTable) -> tuple[Mask, Mask]:
    low, high = gas_heights(table.given, table.sources.fluid[table.member_source])
    rows = table.member_row
    return _any(low, rows, table.size), _any(high, rows, table.size)


def _time_to_second(table: CaseTable, results: Results) -> Floats:
    """Time to the mark that people must be out by; on high sites between first and third."""
    second = np.where(np.isfinite(table.marks[:, 1]), table.marks[:, 1], _BEYOND_ALL)
    same = (table.marks[:, 1] == table.marks[:, 0]) & ABOUT_OXYGEN[table.hazard]
    level = np.where(same, 0.5 * (table.marks[:, 0] + table.marks[:, 2]), second)
    reached = results.course.first_time_above(level)
    crossed = np.where(same, results.level > level, results.crossed[:, 1])
    return np.where(crossed, reached, np.nan)


def _alarms(
    table: CaseTable, results: Results, found: Detection, needs_low: Mask, needs_high: Mask
) -> Alarms:
    """Time of alarm for each case and detector that works at a height where the gas goes."""
    given = table.given
    detector, case = members(given.detectors.room, table.room, given.count)
    placed = (found.is_low[detector] & needs_low[case]) | (
        found.is_high[detector] & needs_high[case]
    )
    powered = (table.airflow[case] != AIRFLOWS.index(LOST)) | (
        given.detectors.power_backed[detector] == 1
    )
    # Only a case that passes a mark has anything to be warned of.
    kept = found.works[detector] & placed & powered & (results.mark[case] > 0)
    case, detector = case[kept], detector[kept]
    level = _alarm_level(table, case, detector)
    set_to = ~np.isnan(level)
    case, detector, level = case[set_to], detector[set_to], level[set_to]
    alarm = alarm_time(
        results.course,
        case,
        level,
        t90=known(given.detectors.t90[detector], UNKNOWN_T90),
        delay=known(given.detectors.delay[detector], 0.0),
    )
    return Alarms(case, detector, alarm)


def _alarm_level(table: CaseTable, case: Integers, detector: Integers) -> Floats:
    """Lowest level at which a detector alarms for the hazard; not-a-number where it does not.

    Without any recorded alarm a detector is taken to warn late, at the second mark, and an oxygen
    detector of enrichment not at all. A detector of one gas is none for another.
    """
    alarms = table.given.detectors.alarms[detector]
    by_oxygen = SIGN[table.hazard[case]][:, np.newaxis] * (OXYGEN_IN_AIR - alarms) / OXYGEN_IN_AIR
    about_oxygen = ABOUT_OXYGEN[table.hazard[case]]
    fraction = _level_of_gas(table, case, detector)
    levels = np.where(about_oxygen[:, np.newaxis], by_oxygen, alarms * fraction[:, np.newaxis])
    counted = np.where(levels > 0.0, levels, np.inf)
    lowest = counted.min(axis=1, initial=np.inf)
    unrecorded = np.isnan(alarms).all(axis=1) & (SIGN[table.hazard[case]] >= 0.0)
    set_to = np.where(unrecorded, table.marks[case, 1], lowest)
    right = np.where(
        about_oxygen,
        table.given.detectors.gas[detector] == OXYGEN_GAS,
        fraction > 0.0,
    )
    return np.where(np.isinf(set_to) | ~right, np.nan, set_to)


def _level_of_gas(table: CaseTable, case: Integers, detector: Integers) -> Floats:
    """Level of the case's hazard for each fraction of the detector's gas; 0 where it has none.

    Where other gases raise the same hazard, the detector sees its own share alone.
    """
    gases = len(table.given.gases)
    fluid = table.sources.fluid[table.member_source]
    named = fluid != UNKNOWN
    row, amount = table.member_row[named], table.member_gas[named]
    gas = table.given.fluids.gas[fluid[named]]
    of_gas = sum_by_group(amount, row * gases + gas, table.size * gases)
    whole = sum_by_group(table.member_gas, table.member_row, table.size)
    mine = of_gas[case * gases + table.given.detectors.gas[detector]]
    share = quotient(mine, whole[case], where_zero=0.0)
    return quotient(1.0 / table.gas_by_level[case], share, where_zero=0.0)


def _first(times: Floats, case: Integers, size: int) -> Floats:
    first = np.full(size, np.inf)
    np.minimum.at(first, case, known(times, np.inf))
    return np.where(np.isinf(first), np.nan, first)


def _any(holds: Mask, case: Integers, size: int) -> Mask:
    found = np.zeros(size, dtype=np.bool_)
    found[case[holds]] = True
    return found


def _ventilation(table: CaseTable, results: Results) -> Mask:
    """Measured in date, holds what lasts, and brings the room back in time."""
    proven = AIRFLOWS.index(PROVEN)
    flow = np.maximum(table.air.supply[proven], table.air.exhaust[proven])[table.room]
    holds: Mask = (
        proven_to_hold(table, results)[table.room] & (flow > 0.0) & (flow >= results.clearing)
    )
    return holds


def _shut_off(table: CaseTable, results: Results) -> Mask:
    """Closed by something that does not depend on what failed, tested, and in time.

    A line that its detector has to shut was shut where that alarms: else the case with it is the
    case without, and goes as far.
    """
    automatic = np.zeros(table.size, dtype=np.bool_)
    overfills = table.release[table.member_row] == _OVERFILL
    vessel = table.sources.vessel[table.member_source[overfills]]
    automatic[table.member_row[overfills]] = table.stock.shut_off_holds[vessel]
    line = table.sources.line[table.member_source]
    broken = np.flatnonzero((table.release[table.member_row] == _LINE_BREAK) & (line != NO_LINE))
    automatic[table.member_row[broken]] = table.lines.shut_off_holds[line[broken]]
    shut: Mask = automatic & ~results.crossed[:, 1] & ~results.crossed[:, 2]
    return shut
