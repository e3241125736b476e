"""Gas that stays where it goes and does not mix: a bound beside the mixed figure (methods F)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.cases import CaseTable
from service.audit.columns import PHASES
from service.audit.conditions import known
from service.audit.hazards import HAZARDS, OXYGEN_LOW
from service.audit.inventory import CYLINDER
from service.audit.safeguards import gas_heights
from service.audit.solve import Results
from service.audit.sources import NO_LINE, NO_VESSEL
from service.physics.arrays import Floats, Integers, Mask, quotient, sum_by_group
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.gas import gas_density
from service.physics.layering import (
    breathing_zone_volume,
    depth_of_cold_layer,
    depth_of_warm_layer,
    liquid_to_fill_pit,
)

NO_CASE: Final = -1
# Height of somebody who kneels or has collapsed. [m]  Methods F1.
KNEELING: Final = 0.5

_GAS: Final = PHASES.index("gas")
_OXYGEN_LOW: Final = [hazard.slug for hazard in HAZARDS].index(OXYGEN_LOW)
_AS_MEASURED: Final = AIRFLOWS.index(AS_MEASURED)


@dataclass(frozen=True, slots=True)
class Zone:
    """One row a room: what becomes of a zone in which the gas of a case all stays."""

    case: Integers  # the worst; -1 where no gas of the kind is let go
    oxygen: Floats  # bound; not-a-number where there is no case
    mixed: Floats  # lowest oxygen of the same case, mixed through the room
    volume: Floats  # [m3]


@dataclass(frozen=True, slots=True)
class Layering:
    """One row a room."""

    breathing: Zone  # up to the height that people breathe at, of gas that sinks
    kneeling: Zone
    ceiling: Zone  # above that height, of gas that rises
    cold_depth: Floats  # of the layer while it is as cold as its liquid [m]
    warm_depth: Floats  # and once it is warm [m]
    pit_volume: Floats  # [m3]; not-a-number where there is none
    pit_gas: Floats  # most gas that sinks and any counting case lets go [m3]
    pit_case: Integers
    pit_oxygen: Floats  # bound
    pit_liquid_cold: Floats  # liquid that fills it, as cold vapour [m3]
    pit_liquid_warm: Floats  # and as warm gas [m3]


def layering(table: CaseTable, results: Results) -> Layering:
    """Work out the bounds of every room, from the accidents that count towards its standing."""
    rooms, conditions = table.given.rooms, table.conditions
    count = table.given.count
    height = known(conditions.height, np.cbrt(rooms.gross_volume))
    floor = known(rooms.floor_area, rooms.gross_volume / height)
    free = quotient(conditions.volume, rooms.gross_volume, where_zero=1.0)
    low_member, high_member = gas_heights(table.given, table.sources.fluid[table.member_source])
    sinks, rises = _gas_of(table, low_member), _gas_of(table, high_member)
    accident = table.counts & ~table.sustained & (table.hazard == _OXYGEN_LOW)
    accident &= table.airflow == _AS_MEASURED
    kneeling = np.minimum(
        breathing_zone_volume(floor, height, net_share=free, zone_height=KNEELING),
        conditions.volume,
    )
    low, gas = _worst(table, accident, sinks, count)
    found = _substance(table, low, low_member)
    pit = rooms.pit_area * rooms.pit_depth
    dug = ~np.isnan(pit)
    return Layering(
        breathing=_zone(table, results, accident, sinks, conditions.floor_zone),
        kneeling=_zone(table, results, accident, sinks, kneeling),
        ceiling=_zone(table, results, accident, rises, conditions.ceiling_zone),
        cold_depth=_where_known(depth_of_cold_layer, found.mass, found.cold_density, floor),
        warm_depth=np.where(low == NO_CASE, np.nan, depth_of_warm_layer(gas, floor)),
        pit_volume=pit,
        pit_gas=gas,
        pit_case=np.where(dug, low, NO_CASE),
        pit_oxygen=OXYGEN_IN_AIR * np.clip(1.0 - gas / np.where(dug, pit, np.inf), 0.0, 1.0),
        pit_liquid_cold=_where_known(
            liquid_to_fill_pit, pit, found.liquid_density, found.cold_density
        ),
        pit_liquid_warm=_where_known(
            liquid_to_fill_pit, pit, found.liquid_density, found.warm_density
        ),
    )


def _gas_of(table: CaseTable, chosen: Mask) -> Floats:
    """Gas of the chosen members of each case."""
    return sum_by_group(np.where(chosen, table.member_gas, 0.0), table.member_row, table.size)


def _where_known(formula: Callable[..., Floats], *inputs: Floats) -> Floats:
    """What a formula gives for the rooms of which every input is known; else not-a-number."""
    unknown = np.isnan(np.stack(inputs)).any(axis=0)
    found, rows = np.full(unknown.size, np.nan), np.flatnonzero(~unknown)
    found[rows] = formula(*(values[rows] for values in inputs))
    return found


def _worst(table: CaseTable, chosen: Mask, gas: Floats, count: int) -> tuple[Integers, Floats]:
    """The chosen case of each room with the most gas, and how much that is."""
    rows = np.flatnonzero(chosen & (gas > 0.0))
    order = rows[np.lexsort((rows, -gas[rows], table.room[rows]))]
    case, most = np.full(count, NO_CASE), np.zeros(count)
    room, first = np.unique(table.room[order], return_index=True)
    case[room] = order[first]
    most[room] = gas[case[room]]
    return case, most


def _zone(table: CaseTable, results: Results, chosen: Mask, gas: Floats, volume: Floats) -> Zone:
    case, most = _worst(table, chosen, gas, volume.size)
    there = case != NO_CASE
    share = np.clip(quotient(most, volume, where_zero=0.0), 0.0, 1.0)
    mixed = np.full(volume.size, np.nan)
    mixed[there] = results.oxygen[case[there]]
    # All in the zone can never be milder than the same gas in the whole room.
    bound = np.minimum(OXYGEN_IN_AIR * (1.0 - share), known(mixed, 1.0))
    return Zone(case, np.where(there, bound, np.nan), mixed, volume)


@dataclass(frozen=True, slots=True)
class _Substance:
    """One row a room: the gas of a case that sinks, of all of its sources together."""

    mass: Floats  # [kg]
    liquid_density: Floats  # not-a-number where there is none
    cold_density: Floats  # of its vapour at the boiling point; not-a-number of what comes out warm
    warm_density: Floats


def _substance(table: CaseTable, case: Integers, chosen: Mask) -> _Substance:
    """Mass and densities of the chosen members of one case a room."""
    there = np.flatnonzero(case != NO_CASE)
    room_of = np.full(table.size, NO_CASE)
    room_of[case[there]] = there
    member = np.flatnonzero(chosen & (room_of[table.member_row] != NO_CASE))
    room, source = room_of[table.member_row[member]], table.member_source[member]
    fluid, fluids = table.sources.fluid[source], table.given.fluids
    warm = gas_density(
        fluids.molar_mass[fluid],
        pressure=table.conditions.pressure[room],
        temperature=table.conditions.temperature[room],
    )
    mass = table.member_gas[member] * warm
    vapour = np.where(_comes_warm(table, source), np.nan, fluids.vapour_density[fluid])

    def density(of_each: Floats) -> Floats:
        volume = sum_by_group(known(mass / of_each, 0.0), room, case.size)
        # One part of which nothing is known leaves the whole unknown.
        volume[room[np.isnan(of_each)]] = 0.0
        return quotient(whole, volume, where_zero=np.nan)

    whole = sum_by_group(mass, room, case.size)
    return _Substance(
        mass=whole,
        liquid_density=density(fluids.condensed_density[fluid]),
        cold_density=density(vapour),
        warm_density=density(warm),
    )


def _comes_warm(table: CaseTable, source: Integers) -> Mask:
    """Tell which sources let gas go that was never cold: cylinders, and lines of gas."""
    vessel, line = table.sources.vessel[source], table.sources.line[source]
    warm = np.zeros(source.size, dtype=np.bool_)
    bottled, piped = np.flatnonzero(vessel != NO_VESSEL), np.flatnonzero(line != NO_LINE)
    warm[bottled] = table.given.vessels.kind[vessel[bottled]] == CYLINDER
    warm[piped] = table.given.lines.phase[line[piped]] == _GAS
    return warm
