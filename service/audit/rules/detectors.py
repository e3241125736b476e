"""Rules on gas detectors: in date, at a height that meets the gas, set, zeroed and heard."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import (
    DETECTOR_STATES,
    KILOPASCAL,
    PLACES,
    UNKNOWN,
    Moments,
    all_of,
)
from service.audit.inventory import poorer
from service.audit.rules import watched
from service.audit.rules.kinds import Missing, Overdue, Threshold
from service.audit.rules.rooms import any_of_room, holding_gas, sources_of, sources_there
from service.audit.rules.rule import Direction, Subject, Tables, detector_record
from service.audit.rules.words import number, oxygen_text
from service.audit.safeguards import (
    BELOW_CEILING,
    BREATHING_BAND,
    LOW_BAND,
    OXYGEN_GAS,
    gas_heights,
)
from service.audit.severity import MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Floats, Mask, rounded
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.monitors import reading_of_cell_zeroed_elsewhere

_IN_SERVICE = DETECTOR_STATES.index("in-service")
_FAULT = DETECTOR_STATES.index("fault")
_OFF = DETECTOR_STATES.index("off")
_ENTRANCE = PLACES.index("entrance")
_SILENCE_ALLOWED: Final = np.timedelta64(3600, "s")  # common practice, no source
_CLEAN_AIR: Final = 100.0 * OXYGEN_IN_AIR  # [%]

# Pressure at which a cell was zeroed may differ this much from the site's. [%]  Weather moves it
# by as much; common practice, no source.
ZEROED_WITHIN: Final = 2.0


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
    there = sources_there(tables)
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


def _heights_of(tables: Tables, row: int) -> tuple[bool, bool]:
    """The same for one detector."""
    table = tables.cases.table
    mine = sources_of(tables, int(table.given.detectors.room[row]))
    fluid = table.sources.fluid[mine]
    if table.given.detectors.gas[row] != OXYGEN_GAS:
        named = fluid[fluid != UNKNOWN]
        fluid = named[table.given.fluids.gas[named] == table.given.detectors.gas[row]]
    low, high = gas_heights(table.given, fluid)
    return bool(low.any()), bool(high.any())


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


def _is_in_fault(tables: Tables) -> Mask:
    fault: Mask = tables.cases.table.given.detectors.state == _FAULT
    return fault


def _say_fault(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = detector_record(tables, row)
    given = tables.cases.table.given
    gas = given.gases[int(given.detectors.gas[row])].replace("-", " ")
    return (
        f"{record.tag} is in fault: it watches no {gas}.",
        f"Repair {record.tag} or replace it, and keep people out meanwhile where it is the only "
        "one.",
        {"gas": gas},
    )


def _in_service_inside(tables: Tables) -> Mask:
    """Detectors in service inside a room that holds gas."""
    detectors = tables.cases.table.given.detectors
    return all_of(
        detectors.state == _IN_SERVICE,
        detectors.placed != _ENTRANCE,
        holding_gas(tables)[detectors.room],
    )


def _silent_outside(tables: Tables) -> Mask:
    return ~tables.cases.guards.detectors.warns_outside & _in_service_inside(tables)


def _say_silent_outside(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = detector_record(tables, row)
    detectors = tables.cases.table.given.detectors
    return (
        f"{record.tag} is recorded as neither heard nor shown outside: whoever comes to the door "
        "is not warned.",
        f"Bring the alarm or the reading of {record.tag} outside every entrance, and record it.",
        {
            "heard_outside": _yes_no(int(detectors.heard_outside[row])),
            "display_outside": _yes_no(int(detectors.display_outside[row])),
        },
    )


def _yes_no(flag: int) -> bool | None:
    return None if flag == UNKNOWN else bool(flag)


def _nobody_hears(tables: Tables) -> Mask:
    """Detectors that report to nobody, in a room where nobody usually is; both as recorded."""
    given = tables.cases.table.given
    empty = given.rooms.attended[given.detectors.room] == 0
    return all_of(given.detectors.monitored == 0, empty, _in_service_inside(tables))


def _say_nobody_hears(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = detector_record(tables, row)
    room = tables.room(int(tables.cases.table.given.detectors.room[row])).record
    return (
        f"Nobody is usually in {room.tag}, and {record.tag} reports to nobody elsewhere: its alarm "
        "may go unanswered.",
        f"Bring the alarm of {record.tag} to a place that is always staffed.",
        {"monitored": False, "attended": False},
    )


def _warns_of_too_little(tables: Tables) -> Mask:
    """Oxygen detectors with recorded alarms, where a gas poorer in oxygen than air is held."""
    table = tables.cases.table
    detectors, found = table.given.detectors, table.sources
    poor = any_of_room(tables, found.room, sources_there(tables) & poorer(found.oxygen))
    recorded = ~np.logical_and.reduce(np.isnan(detectors.alarms), axis=1)
    return all_of(
        detectors.gas == OXYGEN_GAS,
        recorded,
        poor[detectors.room],
        _in_service_inside(tables),
    )


def _highest_low_alarm(tables: Tables) -> Floats:
    """Highest alarm of falling oxygen [%]; not-a-number where there is none."""
    percent = 100.0 * tables.cases.table.given.detectors.alarms
    falling = np.where(percent < _CLEAN_AIR, percent, -np.inf)
    highest = falling.max(axis=1, initial=-np.inf)
    return rounded(np.where(np.isfinite(highest), highest, np.nan))


def _danger(tables: Tables) -> Floats:
    """Oxygen at which a room is dangerous [%]."""
    table = tables.cases.table
    return rounded(100.0 * table.conditions.low_marks[table.given.detectors.room, 1])


def _say_alarm_late(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    record = detector_record(tables, row)
    first = 100.0 * float(table.conditions.low_marks[table.given.detectors.room[row], 0])
    danger = oxygen_text(limit, low=False)
    if np.isnan(measure):
        statement = f"{record.tag} has no alarm for falling oxygen; it is dangerous at {danger}."
    else:
        statement = (
            f"The first alarm of {record.tag} for falling oxygen is at "
            f"{oxygen_text(measure, low=True)}, when the air is dangerous already ({danger})."
        )
    alarms = [number(100.0 * float(each)) for each in table.given.detectors.alarms[row]]
    return (
        statement,
        f"Set an alarm at {oxygen_text(first, low=False)}, and one no lower than {danger}.",
        {"alarms_pct": [alarm for alarm in alarms if alarm is not None]},
    )


def _is_zeroed(tables: Tables) -> Mask:
    """Oxygen detectors in use whose pressure of zeroing is recorded."""
    detectors = tables.cases.table.given.detectors
    return all_of(detectors.gas == OXYGEN_GAS, detectors.zeroed_at > 0.0, _not_off(tables))


def _zeroed_off(tables: Tables) -> Floats:
    """By how much of it each reading is off in clean air [%]; not-a-number where unknown."""
    table = tables.cases.table
    detectors = table.given.detectors
    off = np.full(detectors.room.size, np.nan)
    zeroed = np.flatnonzero(_is_zeroed(tables))
    reading = reading_of_cell_zeroed_elsewhere(
        OXYGEN_IN_AIR,
        table.conditions.pressure[detectors.room[zeroed]],
        detectors.zeroed_at[zeroed],
    )
    off[zeroed] = np.abs(reading / OXYGEN_IN_AIR - 1.0) * 100.0
    return rounded(off)


def _zeroed_limit(tables: Tables) -> Floats:
    return np.full(tables.cases.table.given.detectors.room.size, ZEROED_WITHIN)


def _say_zeroed_elsewhere(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    record = detector_record(tables, row)
    site = float(table.conditions.pressure[table.given.detectors.room[row]]) / KILOPASCAL
    zeroed = float(table.given.detectors.zeroed_at[row]) / KILOPASCAL
    reading = 100.0 * float(reading_of_cell_zeroed_elsewhere(OXYGEN_IN_AIR, site, zeroed))
    high = reading > _CLEAN_AIR
    danger = "too high, so it alarms late" if high else "too low, so it alarms early"
    return (
        f"{record.tag} was zeroed at {zeroed:.1f} kPa and hangs at {site:.1f} kPa: in clean air a "
        f"cell that follows partial pressure reads {reading:.1f} %, {danger}.",
        f"Zero {record.tag} in clean air where it hangs, and record the pressure there.",
        {
            "zeroed_at_kpa_abs": number(zeroed),
            "pressure_kpa_abs": number(site),
            "reads_in_clean_air_pct": number(reading),
        },
    )


def _nothing(tables: Tables) -> Floats:
    return np.zeros(tables.cases.table.given.detectors.room.size)


def _say_misplaced(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    record = detector_record(tables, row)
    height = float(table.given.detectors.height[row])
    wanted = _wanted_text(*_heights_of(tables, row))
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
        slug="detectors/fault",
        subject=Subject.DETECTORS,
        missing=_is_in_fault,
        consequence=MINOR,
        words=_say_fault,
        method="records/present",
        source=COMMON_PRACTICE,
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
    Threshold(
        slug="detectors/alarm-set-late",
        subject=Subject.DETECTORS,
        worse_is=Direction.LOWER,
        applies=_warns_of_too_little,
        measure=_highest_low_alarm,
        limit=_danger,
        consequence=OBSERVATION,
        words=_say_alarm_late,
        method="marks/oxygen-by-pressure",
        source="set points of the trade, 19.5 and 18 % (from memory)",
    ),
    Threshold(
        slug="detectors/zeroed-elsewhere",
        subject=Subject.DETECTORS,
        worse_is=Direction.HIGHER,
        applies=_is_zeroed,
        measure=_zeroed_off,
        limit=_zeroed_limit,
        consequence=OBSERVATION,
        words=_say_zeroed_elsewhere,
        method="detectors/zeroed-elsewhere",
        source="cells of that kind follow partial pressure (from memory); 2 %: " + COMMON_PRACTICE,
    ),
    Missing(
        slug="detectors/not-warning-outside",
        subject=Subject.DETECTORS,
        missing=_silent_outside,
        consequence=OBSERVATION,
        words=_say_silent_outside,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="detectors/not-monitored",
        subject=Subject.DETECTORS,
        missing=_nobody_hears,
        consequence=OBSERVATION,
        words=_say_nobody_hears,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    *watched.RULES,
)
