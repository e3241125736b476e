"""Gas that stays where it goes and does not mix: a bound beside the mixed figure (methods F)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.cases import CaseTable
from service.audit.columns import SETTLES, UNKNOWN, is_one_of
from service.audit.conditions import known
from service.audit.hazards import HAZARDS, OXYGEN_LOW
from service.audit.solve import Results
from service.physics.arrays import Floats, Integers, Mask, quotient, sum_by_group
from service.physics.constants import GAS_CONSTANT, OXYGEN_IN_AIR
from service.physics.layering import (
    breathing_zone_volume,
    depth_of_cold_layer,
    depth_of_warm_layer,
    liquid_to_fill_pit,
)

NO_CASE: Final = -1
# Height of somebody who kneels or has collapsed. [m]  Methods F1.
KNEELING: Final = 0.5

_LOW, _HIGH, _METHANE = range(len(SETTLES))
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
    sinks, rises = _gas_by_way(table)
    accident = table.counts & ~table.sustained & (table.hazard == _OXYGEN_LOW)
    accident &= table.airflow == _AS_MEASURED
    kneeling = np.minimum(
        breathing_zone_volume(floor, height, net_share=free, zone_height=KNEELING),
        conditions.volume,
    )
    low, gas = _worst(table, accident, sinks, count)
    mass, vapour, liquid = _of_worst(table, low)
    pit = rooms.pit_area * rooms.pit_depth
    dug = ~np.isnan(pit)
    cold = depth_of_cold_layer(mass, known(vapour, 1.0), floor)
    to_fill = [
        np.where(
            dug & (low != NO_CASE) & (density > 0.0),
            liquid_to_fill_pit(known(pit, 0.0), liquid, np.where(density > 0.0, density, 1.0)),
            np.nan,
        )
        for density in (vapour, quotient(mass, gas, where_zero=np.nan))
    ]
    return Layering(
        breathing=_zone(table, results, accident, sinks, conditions.floor_zone),
        kneeling=_zone(table, results, accident, sinks, kneeling),
        ceiling=_zone(table, results, accident, rises, conditions.ceiling_zone),
        cold_depth=np.where((low != NO_CASE) & ~np.isnan(vapour), cold, np.nan),
        warm_depth=np.where(low == NO_CASE, np.nan, depth_of_warm_layer(gas, floor)),
        pit_volume=pit,
        pit_gas=gas,
        pit_case=np.where(dug, low, NO_CASE),
        pit_oxygen=OXYGEN_IN_AIR * np.clip(1.0 - gas / np.where(dug, pit, np.inf), 0.0, 1.0),
        pit_liquid_cold=to_fill[0],
        pit_liquid_warm=to_fill[1],
    )


def _gas_by_way(table: CaseTable) -> tuple[Floats, Floats]:
    """Gas of each case that sinks, and that rises; methane does either, by how cold it is."""
    fluid = table.sources.fluid[table.member_source]
    settles = np.full(fluid.shape, _LOW)
    named = fluid != UNKNOWN
    settles[named] = table.given.fluids.settles[fluid[named]]

    def total(kinds: tuple[int, ...]) -> Floats:
        gas = np.where(is_one_of(settles, kinds), table.member_gas, 0.0)
        return sum_by_group(gas, table.member_row, table.size)

    return total((_LOW, _METHANE)), total((_HIGH, _METHANE))


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


def _of_worst(table: CaseTable, case: Integers) -> tuple[Floats, Floats, Floats]:
    """Mass that sinks, densities of its cold vapour and its liquid: by the first of its sources."""
    there = np.flatnonzero(case != NO_CASE)
    source = table.member_source[table.member_start[case[there]]]
    fluid, fluids = table.sources.fluid[source], table.given.fluids
    gas = sum_by_group(table.member_gas, table.member_row, table.size)[case[there]]
    molar = fluids.molar_mass[fluid]
    density = (
        molar
        * table.conditions.pressure[there]
        / (GAS_CONSTANT * table.conditions.temperature[there])
    )
    mass, vapour = np.zeros(case.size), np.full(case.size, np.nan)
    liquid = np.ones(case.size)
    mass[there], vapour[there] = gas * density, fluids.vapour_density[fluid]
    liquid[there] = fluids.condensed_density[fluid]
    return mass, vapour, liquid
