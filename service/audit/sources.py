"""What gives off gas in many rooms: vessels in record order, then the purge."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import Columns
from service.audit.conditions import known
from service.audit.hazards import HAZARDS, Gases
from service.audit.inventory import ICE, Inventory, purge_gas
from service.physics.arrays import Floats, Integers, Mask

NO_VESSEL: Final = -1


@dataclass(frozen=True, slots=True)
class Sources:
    """What gives off gas in a room: its vessels in record order, then its purge gas."""

    room: Integers
    vessel: Integers  # row of the vessels; -1 for purge gas
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
    group: Integers  # vessels of one manifold share one
    raises: Mask  # (hazards, sources)
    weight: Floats  # (hazards, sources) level made by a fraction of the gas


def sources(given: Columns, stock: Inventory) -> Sources:
    """List what gives off gas, room by room."""
    purged, purge_oxygen = purge_gas(given)
    rooms = np.flatnonzero(purged)
    none, zero = np.full(rooms.size, NO_VESSEL), np.zeros(rooms.size)

    def with_purge(of_vessels: Floats, of_purge: Floats = zero) -> Floats:
        return np.concatenate([of_vessels, of_purge])

    gases = Gases(
        room=np.concatenate([given.vessels.room, rooms]),
        fluid=np.concatenate([given.vessels.fluid, given.rooms.purge_fluid[rooms]]),
        oxygen=with_purge(stock.oxygen, purge_oxygen[rooms]),
    )
    weights = [hazard.weigh(given, gases) for hazard in HAZARDS]
    return Sources(
        room=gases.room,
        vessel=np.concatenate([np.arange(given.vessels.room.size), none]),
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
        group=np.concatenate([given.vessels.group, none]),
        raises=np.stack([each.raises for each in weights]),
        weight=np.stack([each.level for each in weights]),
    )
