"""Rules on gas that lies in a pit, on the floor or under the ceiling without mixing."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import (
    ARRANGEMENTS,
    ROOM_KINDS,
    TERMINALS,
    UNKNOWN,
)
from service.audit.layering import NO_CASE, Zone
from service.audit.releases import RELEASES
from service.audit.rules.kinds import Missing, Threshold
from service.audit.rules.rooms import any_of_room
from service.audit.rules.rule import Direction, Subject, Tables
from service.audit.rules.words import at_least, number, oxygen_text
from service.audit.safeguards import OXYGEN_GAS, gas_heights
from service.audit.severity import CRITICAL, MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Floats, Integers, Mask

_PIT: Final = ROOM_KINDS.index("pit")
_LOW: Final = TERMINALS.index("low")
_SUPPLY: Final = ARRANGEMENTS.index("supply")
# A detector of the room that stands in its pit is recorded at the floor. [m]  Ours.
IN_PIT: Final = 0.0
_LITRES: Final = 1000.0
_SINKS, _RISES = range(2)  # of what gas_heights tells
_SOURCE: Final = (
    "published investigations of gas that filled a pit, in general terms; two-zone bound of "
    "methods F, " + COMMON_PRACTICE
)


def _is_itself(tables: Tables) -> Mask:
    """Rooms that are a pit, and have no other in their floor."""
    pit: Mask = tables.cases.table.given.rooms.kind == _PIT
    return pit & np.isnan(tables.layering.pit_volume)


def _pit_fills(tables: Tables) -> Mask:
    """A pit that the gas can fill, with neither extract at its floor nor a detector in it."""
    table, layers = tables.cases.table, tables.layering
    itself = _is_itself(tables)
    volume = np.where(itself, table.conditions.volume, layers.pit_volume)
    fills = (layers.pit_gas > 0.0) & (layers.pit_gas >= volume)
    return fills & ~_extracted(tables) & ~_watched_pit(tables, itself)


def _extracted(tables: Tables) -> Mask:
    """Rooms with a running unit, measured in date, that draws its air at the floor."""
    table = tables.cases.table
    units, air = table.given.units, table.air.units
    draws = (units.arrangement != _SUPPLY) & (units.terminal == _LOW)
    draws &= air.runs & air.measurement_holds & (air.flow > 0.0)
    return any_of_room(tables, units.room, draws)


def _watched_pit(tables: Tables, itself: Mask) -> Mask:
    """Rooms with a working detector in the pit; in a room that is one, low."""
    table, found = tables.cases.table, tables.cases.guards.detectors
    detectors = table.given.detectors
    inside = np.where(itself[detectors.room], found.is_low, detectors.height <= IN_PIT)
    senses = _senses(tables, tables.layering.breathing.case, _SINKS)
    return any_of_room(tables, detectors.room, found.works & inside & senses)


def _senses(tables: Tables, case: Integers, way: int) -> Mask:
    """Detectors of oxygen, or of a gas that goes that way in the case of their room."""
    table = tables.cases.table
    given, gases = table.given, len(table.given.gases)
    in_case = case[table.room[table.member_row]] == table.member_row
    fluid = table.sources.fluid[table.member_source]
    member = np.flatnonzero(in_case & gas_heights(given, fluid)[way])
    let_go = table.room[table.member_row[member]] * gases + given.fluids.gas[fluid[member]]
    own = np.isin(given.detectors.room * gases + given.detectors.gas, let_go)
    senses: Mask = own | (given.detectors.gas == OXYGEN_GAS)
    return senses


def _recorded_entry(tables: Tables) -> Integers:
    """Whether people enter the pit: 0 no, 1 yes, else nobody says.

    Of a room that is one, that nobody usually works there does not keep people out.
    """
    rooms = tables.cases.table.given.rooms
    alone = np.where(rooms.unaccompanied < 0, UNKNOWN, 1 - rooms.unaccompanied)
    return np.where(_is_itself(tables), alone, rooms.pit_entered)


def _entered(tables: Tables) -> Integers:
    """Critical where people enter it; one that nobody says they do not is entered."""
    return np.where(_recorded_entry(tables) == 0, MAJOR, CRITICAL)


def _say_pit(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    table, layers = tables.cases.table, tables.layering
    room = tables.room(row).record
    itself = bool(_is_itself(tables)[row])
    volume = float(table.conditions.volume[row] if itself else layers.pit_volume[row])
    gas = float(layers.pit_gas[row])
    release = _release(tables, _pit_case(tables, row))
    recorded = _recorded_entry(tables)
    liquid = float(layers.pit_liquid_warm[row]) * _LITRES
    enough = "" if np.isnan(liquid) else f"; {at_least(liquid)} L of liquid are enough"
    return (
        f"{'The pit' if itself else 'The pit in'} {room.tag} of {volume:.4g} m3 can fill with gas "
        f"without oxygen: {release} lets {at_least(gas)} m3 go{enough}, and neither extract at its "
        "floor nor a detector in it is recorded to hold.",
        "Draw air off at the floor of the pit and measure it, put a detector of oxygen into it and "
        "record it at the floor (0 m), or keep away what can run into it; let "
        "nobody enter it without a measurement.",
        {
            "pit_m3": number(volume),
            "gas_m3": number(gas),
            "release": release,
            "bound": True,
            "entered": None if recorded[row] < 0 else bool(recorded[row] == 1),
        },
    )


def _pit_case(tables: Tables, row: int) -> int:
    case = int(tables.layering.pit_case[row])
    return int(tables.layering.breathing.case[row]) if case == NO_CASE else case


def _release(tables: Tables, case: int) -> str:
    return RELEASES[int(tables.cases.table.release[case])].slug


def _passes_in_zone(tables: Tables, zone: Zone) -> Mask:
    """Rooms where the bound is beyond the first mark, and the mixed figure is not."""
    first = tables.cases.table.conditions.low_marks[:, 0]
    passes: Mask = (zone.case != NO_CASE) & ~(zone.mixed < first)
    return passes


def _by_detector(tables: Tables, holds: Mask, zone: Zone, way: int) -> Integers:
    """Minor without a detector at that height of what is let go, or of oxygen."""
    table, found = tables.cases.table, tables.cases.guards.detectors
    holds = found.works & holds & _senses(tables, zone.case, way)
    watched = any_of_room(tables, table.given.detectors.room, holds)
    return np.where(watched, OBSERVATION, MINOR)


def _percent(values: Floats) -> Floats:
    return 100.0 * np.where(np.isnan(values), 1.0, values)


def _deficient(tables: Tables) -> Floats:
    return 100.0 * tables.cases.table.conditions.low_marks[:, 0]


def _words(where: str, remedy: str, zone_of: str) -> Any:
    def say(
        tables: Tables, row: int, measure: float, limit: float
    ) -> tuple[str, str, Mapping[str, Any]]:
        zone: Zone = getattr(tables.layering, zone_of)
        room, mixed = tables.room(row).record, 100.0 * float(zone.mixed[row])
        release = _release(tables, int(zone.case[row]))
        return (
            f"If the gas of {release} all stayed {where} of {room.tag}, oxygen there would be down "
            f"to {oxygen_text(measure, low=True)}, below {limit:.4g} %, although mixed through the "
            f"room it is {oxygen_text(mixed, low=True)}: a bound, not a concentration.",
            remedy,
            {
                "release": release,
                "bound": True,
                "mixed_oxygen_pct": number(mixed),
                "zone_m3": number(float(zone.volume[row])),
            },
        )

    return say


RULES: Final = (
    Missing(
        slug="layering/pit",
        subject=Subject.ROOMS,
        missing=_pit_fills,
        consequence=_entered,
        words=_say_pit,
        method="layering/two-zone-bound",
        source=_SOURCE,
        gas="oxygen",
    ),
    Threshold(
        slug="layering/floor",
        subject=Subject.ROOMS,
        worse_is=Direction.LOWER,
        applies=lambda tables: _passes_in_zone(tables, tables.layering.breathing),
        measure=lambda tables: _percent(tables.layering.breathing.oxygen),
        limit=_deficient,
        consequence=lambda tables: _by_detector(
            tables, tables.cases.guards.detectors.is_low, tables.layering.breathing, _SINKS
        ),
        words=_words(
            "below the height that people breathe at",
            "Hang a detector low, where cold gas lies first, and draw air off there.",
            "breathing",
        ),
        method="layering/two-zone-bound",
        source=_SOURCE,
        gas="oxygen",
    ),
    Threshold(
        slug="layering/ceiling",
        subject=Subject.ROOMS,
        worse_is=Direction.LOWER,
        applies=lambda tables: _passes_in_zone(tables, tables.layering.ceiling),
        measure=lambda tables: _percent(tables.layering.ceiling.oxygen),
        limit=_deficient,
        consequence=lambda tables: _by_detector(
            tables, tables.cases.guards.detectors.is_high, tables.layering.ceiling, _RISES
        ),
        words=_words(
            "under the ceiling",
            "Hang a detector under the ceiling, where light gas gathers, and draw air off there.",
            "ceiling",
        ),
        method="layering/two-zone-bound",
        source=_SOURCE,
        gas="oxygen",
    ),
)
