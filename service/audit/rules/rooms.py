"""What rules ask of rooms: whether there is gas, and whether it can go beyond a mark."""

from __future__ import annotations

import numpy as np

from service.audit.rules.rule import Tables
from service.physics.arrays import Integers, Mask


def any_of_room(tables: Tables, room: Integers, holds: Mask) -> Mask:
    """Tell which rooms have a row of a table for which something holds."""
    found = np.zeros(tables.cases.table.given.count, dtype=np.bool_)
    found[room[holds]] = True
    return found


def sources_there(tables: Tables) -> Mask:
    """Tell which sources of gas are there; a withdrawn vessel is not, purge gas is."""
    stock, found = tables.cases.table.stock, tables.cases.table.sources
    there = np.ones(found.room.size, dtype=np.bool_)
    there[: stock.present.size] = stock.present
    return there


def sources_of(tables: Tables, room: int) -> Integers:
    """Rows of the sources that are there in one room, without a look at those of others."""
    table = tables.cases.table
    vessels = table.given.vessels.room
    first, end = np.searchsorted(vessels, [room, room + 1])
    rows = np.arange(first, end)
    parts = [rows[table.stock.present[rows]]]
    lines = table.sources.room.size - table.given.lines.room.size
    for begin, stop in ((vessels.size, lines), (lines, table.sources.room.size)):
        # The purge of rooms, and then their lines, each in the order of rooms.
        first, end = np.searchsorted(table.sources.room[begin:stop], [room, room + 1])
        parts.append(begin + np.arange(first, end))
    return np.concatenate(parts)


def holding_gas(tables: Tables) -> Mask:
    """Tell which rooms have anything that gives off gas."""
    return any_of_room(tables, tables.cases.table.sources.room, sources_there(tables))


def beyond_a_mark(tables: Tables, chosen: Mask) -> Mask:
    """Tell which rooms have a case of those chosen that is beyond a mark."""
    return any_of_room(tables, tables.cases.table.room, chosen & (tables.cases.results.mark > 0))
