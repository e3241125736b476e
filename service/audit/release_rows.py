"""What a release lets go: rows of segments, before any air is counted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np

from service.audit.columns import Columns
from service.audit.conditions import Conditions
from service.audit.inventory import Inventory
from service.audit.sources import Sources
from service.physics.arrays import Floats, Integers, Mask, sum_by_group

#: Forms of a release that differ in severity, or in whether they count.
VARIANTS: Final = ("expected", "pipe-failed", "jacket-open")
EXPECTED, PIPE_FAILED, JACKET_OPEN = range(len(VARIANTS))
NO_VARIANT: Final = -1


@dataclass(frozen=True, slots=True)
class Rows:
    """One row a release of a room for a hazard, before any air is counted.

    ``instant`` is gas let go at time zero; segments follow. What is ``level`` is the same gas by
    the level of the hazard that it makes, never negative.
    """

    room: Integers
    hazard: Integers
    instant: Floats  # [m3]
    instant_level: Floats
    durations: Floats  # (rows, segments) [s]
    rates: Floats  # [m3/s]
    rates_level: Floats
    # Sources of each row, in order of rows, and how much gas of each is let go.
    member_row: Integers
    member_source: Integers
    member_gas: Floats  # [m3]
    variant: Integers  # row of VARIANTS; -1 where a release has but one form


@dataclass(frozen=True, slots=True)
class Raising:
    """Sources as one hazard sees them."""

    given: Columns
    found: Sources
    stock: Inventory
    conditions: Conditions
    hazard: int

    @property
    def raises(self) -> Mask:
        """Which sources raise the hazard."""
        raises: Mask = self.found.raises[self.hazard]
        return raises

    @property
    def weight(self) -> Floats:
        """Level made by a fraction of each source's gas."""
        weight: Floats = self.found.weight[self.hazard]
        return weight


def no_rows(hazard: int) -> Rows:
    """No rows: nothing of the kind raises the hazard in any room."""
    none, no_numbers = np.empty(0, dtype=np.int64), np.empty(0)
    table = np.empty((0, 1))
    return Rows(
        room=none,
        hazard=np.full(0, hazard),
        instant=no_numbers,
        instant_level=no_numbers,
        durations=table,
        rates=table,
        rates_level=table,
        member_row=none,
        member_source=none,
        member_gas=no_numbers,
        variant=none,
    )


def lasting_rows(
    seen: Raising,
    room: Integers,
    durations: Floats,
    rates: Floats,
    rates_level: Floats,
    members: tuple[Integers, Integers, Floats],
) -> Rows:
    """Rows of a release that develops in time."""
    row, source, gas = members
    return Rows(
        room=room,
        hazard=np.full(room.size, seen.hazard),
        instant=np.zeros(room.size),
        instant_level=np.zeros(room.size),
        durations=durations,
        rates=rates,
        rates_level=rates_level,
        member_row=row,
        member_source=source,
        member_gas=gas,
        variant=np.full(room.size, NO_VARIANT),
    )


def in_variant(rows: Rows, variant: int) -> Rows:
    """The same rows in a form of their release."""
    return replace(rows, variant=np.full(rows.room.size, variant))


def stacked(hazard: int, parts: Sequence[Rows]) -> Rows:
    """Rows of several kinds of one release, one after another."""
    width = max(part.durations.shape[1] for part in parts)

    def padded(values: Floats) -> Floats:
        return np.pad(values, ((0, 0), (0, width - values.shape[1])))

    def joined(name: str) -> Any:
        return np.concatenate([getattr(part, name) for part in parts])

    firsts = np.cumsum([0, *(part.room.size for part in parts[:-1])])
    return Rows(
        room=joined("room"),
        hazard=np.full(sum(part.room.size for part in parts), hazard),
        instant=joined("instant"),
        instant_level=joined("instant_level"),
        durations=np.concatenate([padded(part.durations) for part in parts]),
        rates=np.concatenate([padded(part.rates) for part in parts]),
        rates_level=np.concatenate([padded(part.rates_level) for part in parts]),
        member_row=np.concatenate(
            [part.member_row + first for part, first in zip(parts, firsts, strict=True)]
        ),
        member_source=joined("member_source"),
        member_gas=joined("member_gas"),
        variant=joined("variant"),
    )


def at_once_rows(
    seen: Raising,
    room: Integers,
    volume: Floats,
    level: Floats,
    members: tuple[Integers, Integers, Floats],
) -> Rows:
    """Rows of a release that is all out at time zero."""
    row, source, gas = members
    return Rows(
        room=room,
        hazard=np.full(room.size, seen.hazard),
        instant=volume,
        instant_level=level,
        durations=seen.given.bases.sustained[room][:, np.newaxis],
        rates=np.zeros((room.size, 1)),
        rates_level=np.zeros((room.size, 1)),
        member_row=row,
        member_source=source,
        member_gas=gas,
        variant=np.full(room.size, NO_VARIANT),
    )


def steady_rows(
    seen: Raising, source: Integers, rate: Floats, lasts: Floats, members: tuple[Integers, Integers]
) -> Rows:
    """One source a row at a steady rate for a time, and what follows until the sustained time."""
    room = seen.found.room[source]
    sustained = seen.given.bases.sustained[room]
    ends = np.minimum(lasts, sustained)
    durations = np.stack([ends, sustained - ends], axis=1)
    rates = np.stack([rate, np.zeros_like(rate)], axis=1)
    row, member = members
    return lasting_rows(
        seen,
        room,
        durations,
        rates,
        rates * seen.weight[source][:, np.newaxis],
        (row, member, (rate * ends)[row]),
    )


def distinct_ends(row: Integers, ends: Floats, longest: Floats) -> tuple[Floats, Integers]:
    """Times at which anything ends, by row, padded with the last; and which of them each is."""
    all_rows = np.concatenate([row, np.arange(longest.size)])
    all_ends = np.concatenate([ends, longest])
    order = np.lexsort((all_ends, all_rows))
    sorted_rows, sorted_ends = all_rows[order], all_ends[order]
    new_row = np.diff(sorted_rows, prepend=-1) != 0
    new_end = new_row.copy()
    new_end[1:] |= np.diff(sorted_ends) != 0.0
    running = np.cumsum(new_end) - 1
    position = running - running[np.flatnonzero(new_row)][sorted_rows]
    width = int(position.max(initial=-1)) + 1
    table = np.repeat(longest[:, np.newaxis], width, axis=1)
    table[sorted_rows, position] = sorted_ends
    rank = np.empty(order.size, dtype=np.int64)
    rank[order] = position
    return table, rank[: row.size]


def by_segment(values: Floats, row: Integers, rank: Integers, shape: tuple[int, ...]) -> Floats:
    """Sum of values by row and segment; each counts in all segments up to its rank."""
    rows, width = shape
    counts = rank + 1
    repeated = np.repeat(np.arange(row.size), counts)
    segment = np.arange(repeated.size) - np.repeat(np.cumsum(counts) - counts, counts)
    cell = row[repeated] * width + segment
    return sum_by_group(values[repeated], cell, rows * width).reshape(rows, width)


def leaders(room: Integers, fluid: Integers, amount: Floats, first: Integers) -> Integers:
    """The row of each room and fluid with the most, by room and then as first recorded.

    The order goes by the first vessel of the fluid and not of the row, so that no amount can
    change it, and rooms with other amounts line up row by row.
    """
    order = np.lexsort((first, -amount, fluid, room))
    leading = np.ones(order.size, dtype=np.bool_)
    leading[1:] = (np.diff(room[order]) != 0) | (np.diff(fluid[order]) != 0)
    starts = np.flatnonzero(leading)
    earliest = np.minimum.reduceat(first[order], starts) if starts.size else starts
    chosen = order[starts]
    return chosen[np.lexsort((earliest, room[chosen]))]
