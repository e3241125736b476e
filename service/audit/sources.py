"""What gives off gas in many rooms: vessels in record order, then the purge."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import Columns
from service.audit.conditions import Conditions, known
from service.audit.hazards import HAZARDS, Gases
from service.audit.inventory import ICE, Inventory, purge_gas
from service.audit.lines import Flows, shut_by_excess_flow
from service.physics.arrays import Floats, Integers, Mask
from service.physics.gas import gas_volume_of_mass

NO_VESSEL: Final = -1
NO_LINE: Final = -1


@dataclass(frozen=True, slots=True)
class Sources:
    """What gives off gas in a room: vessels in record order, then purge gas, then its lines."""

    room: Integers
    vessel: Integers  # row of the vessels; -1 for purge gas and lines
    line: Integers  # row of the lines; -1 for vessels and purge gas
    fluid: Integers
    oxygen: Floats
    rate: Floats  # by evaporation, use and purge [m3/s]
    lasts: Floats  # [s]
    at_once: Floats  # gas let go when it fails [m3]
    spilt: Floats  # gas a second from ice emptied on the floor [m3/s]
    filling: Floats  # gas a second lost while it is filled [m3/s]
    filled_in: Floats  # [s]
    overfill: Floats  # gas a second when filling does not stop [m3/s]
    overfill_lasts: Floats  # [s]
    tipped: Floats  # gas of liquid spilt on the floor, at once [m3]
    broken: Floats  # gas a second out of a broken line or hose [m3/s]
    broken_lasts: Floats  # [s]
    leak: Floats  # gas a second once the vacuum is lost [m3/s]
    leak_lasts: Floats  # [s]
    torn: Floats  # the same with the jacket open to the room [m3/s]
    torn_lasts: Floats  # [s]
    quench: Floats  # gas of a magnet that quenches [m3]
    quench_share: Floats  # of it into the room, as expected [1]
    group: Integers  # vessels of one manifold share one
    raises: Mask  # (hazards, sources)
    weight: Floats  # (hazards, sources) level made by a fraction of the gas


def sources(given: Columns, room: Conditions, stock: Inventory, flows: Flows) -> Sources:
    """List what gives off gas, room by room."""
    purged, purge_oxygen = purge_gas(given)
    rooms, lines = np.flatnonzero(purged), given.lines
    none, zero = np.full(rooms.size, NO_VESSEL), np.zeros(rooms.size)
    no_vessel, no_flow = np.full(lines.room.size, NO_VESSEL), np.zeros(lines.room.size)

    def with_purge(
        of_vessels: Floats, of_purge: Floats = zero, of_lines: Floats = no_flow
    ) -> Floats:
        return np.concatenate([of_vessels, of_purge, of_lines])

    gases = Gases(
        room=np.concatenate([given.vessels.room, rooms, lines.room]),
        fluid=np.concatenate([given.vessels.fluid, given.rooms.purge_fluid[rooms], lines.fluid]),
        oxygen=with_purge(
            stock.oxygen, purge_oxygen[rooms], given.fluids.oxygen_fraction[lines.fluid]
        ),
    )
    line_gas = flows.broken * gas_volume_of_mass(
        1.0,
        given.fluids.molar_mass[lines.fluid],
        pressure=room.pressure[lines.room],
        temperature=room.temperature[lines.room],
    )
    weights = [hazard.weigh(given, gases) for hazard in HAZARDS]
    return Sources(
        room=gases.room,
        vessel=np.concatenate([np.arange(given.vessels.room.size), none, no_vessel]),
        line=np.concatenate(
            [np.full(given.vessels.room.size, NO_LINE), none, np.arange(lines.room.size)]
        ),
        fluid=gases.fluid,
        oxygen=gases.oxygen,
        rate=with_purge(stock.rate, known(given.rooms.purge_flow, 0.0)[rooms]),
        lasts=with_purge(stock.lasts, zero + np.inf),
        at_once=with_purge(np.where(given.vessels.kind == ICE, 0.0, stock.at_once)),
        spilt=with_purge(stock.spilt),
        filling=with_purge(stock.filling),
        filled_in=with_purge(stock.filled_in),
        overfill=with_purge(stock.overfill),
        overfill_lasts=with_purge(stock.overfill_lasts),
        tipped=with_purge(stock.tipped),
        broken=with_purge(stock.hose, zero, line_gas),
        broken_lasts=with_purge(stock.hose_lasts, zero, _line_lasts(given, flows)),
        leak=with_purge(stock.leak),
        leak_lasts=with_purge(stock.leak_lasts),
        torn=with_purge(stock.torn),
        torn_lasts=with_purge(stock.torn_lasts),
        quench=with_purge(stock.quench),
        quench_share=with_purge(stock.quench_share),
        group=np.concatenate([given.vessels.group, none, no_vessel]),
        raises=np.stack([each.raises for each in weights]),
        weight=np.stack([each.level for each in weights]),
    )


def _line_lasts(given: Columns, flows: Flows) -> Floats:
    """How long a broken line flows: until its source is empty, or an excess flow has shut it."""
    lasts = np.full(flows.broken.shape, np.inf)
    np.divide(flows.held, flows.broken, out=lasts, where=flows.broken > 0.0)
    shut = shut_by_excess_flow(given, flows)
    return np.where(shut, np.minimum(lasts, flows.closes_in), lasts)
