"""What is let go in many rooms: one block of rows for each kind of release (judging 1)."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import Columns
from service.audit.conditions import Conditions, known
from service.audit.hazards import HAZARDS, Hazard
from service.audit.inventory import ICE, Inventory, purge_gas
from service.physics.arrays import Floats, Integers, sum_by_group
from service.physics.ventilation import dilution_rate

BOIL_OFF: Final = "boil-off"
LARGEST_VESSEL: Final = "largest-vessel"

NO_VESSEL: Final = -1


@dataclass(frozen=True, slots=True)
class Sources:
    """What gives off gas in a room: its vessels in record order, then its purge gas."""

    room: Integers
    vessel: Integers  # row of the vessels; -1 for purge gas
    fluid: Integers
    oxygen: Floats
    rate: Floats  # [m3/s]
    lasts: Floats  # [s]
    at_once: Floats  # gas let go when it fails [m3]
    group: Integers  # vessels of one manifold share one


@dataclass(frozen=True, slots=True)
class Rows:
    """One row a release of a room for a hazard, before any air is counted.

    ``instant`` is gas let go at time zero; segments follow. ``diluting`` is the part of each
    that counts against the hazard, never negative.
    """

    room: Integers
    hazard: Integers
    instant: Floats  # [m3]
    instant_diluting: Floats
    durations: Floats  # (rows, segments) [s]
    rates: Floats  # [m3/s]
    rates_diluting: Floats
    # Sources of each row, in order of rows.
    member_row: Integers
    member_source: Integers


Build = Callable[[Columns, Sources, int, Hazard], Rows]


@dataclass(frozen=True, slots=True)
class Release:
    """A kind of release, and how it stands to others."""

    slug: str
    build: Build
    at_once: bool  # no fan can hold it
    from_boil_off: bool  # starts from the worst point of boil-off, and not from clean air
    counts_in: frozenset[str]  # airflows in which it counts towards the standing
    safeguards: tuple[str, ...]  # those that count, besides nobody inside
    method: tuple[str, ...]


def sources(given: Columns, stock: Inventory, room: Conditions) -> Sources:
    """List what gives off gas, room by room."""
    purged, oxygen = purge_gas(given)
    rooms = np.flatnonzero(purged)
    none = np.full(rooms.size, NO_VESSEL)
    fluid = given.rooms.purge_fluid[rooms]
    return Sources(
        room=np.concatenate([given.vessels.room, rooms]),
        vessel=np.concatenate([np.arange(given.vessels.room.size), none]),
        fluid=np.concatenate([given.vessels.fluid, fluid]),
        oxygen=np.concatenate([stock.oxygen, oxygen[rooms]]),
        rate=np.concatenate([stock.rate, known(given.rooms.purge_flow, 0.0)[rooms]]),
        lasts=np.concatenate([stock.lasts, np.full(rooms.size, np.inf)]),
        at_once=np.concatenate(
            [np.where(given.vessels.kind == ICE, 0.0, stock.at_once), np.zeros(rooms.size)]
        ),
        group=np.concatenate([given.vessels.group, none]),
    )


def _none(code: int) -> Rows:
    """No rows: nothing of the kind raises the hazard in any room."""
    no_rows, no_numbers = np.empty(0, dtype=np.int64), np.empty(0)
    table = np.empty((0, 1))
    return Rows(
        room=no_rows,
        hazard=np.full(0, code),
        instant=no_numbers,
        instant_diluting=no_numbers,
        durations=table,
        rates=table,
        rates_diluting=table,
        member_row=no_rows,
        member_source=no_rows,
    )


def boil_off(given: Columns, found: Sources, code: int, hazard: Hazard) -> Rows:
    """Normal evaporation, use and purge gas, each until it is gone, for the sustained time."""
    member = np.flatnonzero(hazard.raised_by(found.oxygen) & (found.rate > 0.0))
    if not member.size:
        return _none(code)
    rooms, row = np.unique(found.room[member], return_inverse=True)
    row = row.reshape(-1)
    sustained = given.bases.sustained[rooms]
    ends, rank = _distinct_ends(row, np.minimum(found.lasts[member], sustained[row]), sustained)
    rate = found.rate[member]
    diluting = hazard.sign * dilution_rate(rate, found.oxygen[member])
    return Rows(
        room=rooms,
        hazard=np.full(rooms.size, code),
        instant=np.zeros(rooms.size),
        instant_diluting=np.zeros(rooms.size),
        durations=np.diff(ends, axis=1, prepend=0.0),
        rates=_by_segment(rate, row, rank, ends.shape),
        rates_diluting=_by_segment(diluting, row, rank, ends.shape),
        member_row=row,
        member_source=member,
    )


def _distinct_ends(row: Integers, ends: Floats, longest: Floats) -> tuple[Floats, Integers]:
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


def _by_segment(values: Floats, row: Integers, rank: Integers, shape: tuple[int, ...]) -> Floats:
    """Sum of values by row and segment; each counts in all segments up to its rank."""
    rows, width = shape
    counts = rank + 1
    repeated = np.repeat(np.arange(row.size), counts)
    segment = np.arange(repeated.size) - np.repeat(np.cumsum(counts) - counts, counts)
    cell = row[repeated] * width + segment
    return sum_by_group(values[repeated], cell, rows * width).reshape(rows, width)


def largest_vessel(given: Columns, found: Sources, code: int, hazard: Hazard) -> Rows:
    """The vessel or manifold group with the most gas, of each fluid, all at once.

    One vessel of each fluid is enough: with less of the same gas every number is milder, and the
    same safeguards count. A group of several fluids is a case of its own.
    """
    member = np.flatnonzero(hazard.raised_by(found.oxygen) & (found.at_once > 0.0))
    if not member.size:
        return _none(code)
    groups, group = np.unique(found.group[member], return_inverse=True)
    group = group.reshape(-1)
    volume = sum_by_group(found.at_once[member], group, groups.size)
    part = hazard.sign * dilution_rate(found.at_once[member], found.oxygen[member])
    diluting = sum_by_group(part, group, groups.size)
    first = np.full(groups.size, member.size)
    np.minimum.at(first, group, np.arange(member.size))
    room = found.room[member][first]
    fluid = _only_fluid(found.fluid[member], group, groups.size)
    chosen = _leaders(room, fluid, diluting, first)
    row_of_group = np.full(groups.size, -1)
    row_of_group[chosen] = np.arange(chosen.size)
    kept = np.flatnonzero(row_of_group[group] >= 0)
    return Rows(
        room=room[chosen],
        hazard=np.full(chosen.size, code),
        instant=volume[chosen],
        instant_diluting=diluting[chosen],
        durations=given.bases.sustained[room[chosen]][:, np.newaxis],
        rates=np.zeros((chosen.size, 1)),
        rates_diluting=np.zeros((chosen.size, 1)),
        member_row=row_of_group[group[kept]],
        member_source=member[kept],
    )


def _leaders(room: Integers, fluid: Integers, diluting: Floats, first: Integers) -> Integers:
    """The group of each room and fluid with the most gas, by room and then as first recorded.

    The order goes by the first vessel of the fluid and not of the group, so that no amount can
    change it, and rooms with other amounts line up row by row.
    """
    order = np.lexsort((first, -diluting, fluid, room))
    leading = np.ones(order.size, dtype=np.bool_)
    leading[1:] = (np.diff(room[order]) != 0) | (np.diff(fluid[order]) != 0)
    starts = np.flatnonzero(leading)
    earliest = np.minimum.reduceat(first[order], starts) if starts.size else starts
    chosen = order[starts]
    return chosen[np.lexsort((earliest, room[chosen]))]


def _only_fluid(fluid: Integers, group: Integers, count: int) -> Integers:
    """The fluid of each group, or a negative number of its own where it has several."""
    lowest = np.full(count, np.iinfo(np.int64).max)
    highest = np.full(count, -1)
    np.minimum.at(lowest, group, fluid)
    np.maximum.at(highest, group, fluid)
    return np.where(lowest == highest, lowest, -1 - np.arange(count))


RELEASES: Final = (
    Release(
        slug=BOIL_OFF,
        build=boil_off,
        at_once=False,
        from_boil_off=False,
        counts_in=frozenset({"as-measured", "lost"}),
        safeguards=("detection",),
        method=(
            "gas/ideal-at-site",
            "marks/oxygen-by-pressure",
            "boil-off/normal-evaporation",
            "ventilation/piecewise-constant",
            "ventilation/hold",
        ),
    ),
    Release(
        slug=LARGEST_VESSEL,
        build=largest_vessel,
        at_once=True,
        from_boil_off=True,
        counts_in=frozenset({"as-measured"}),
        safeguards=("detection", "ventilation"),
        method=(
            "gas/ideal-at-site",
            "marks/oxygen-by-pressure",
            "ventilation/piecewise-constant",
            "ventilation/restore",
        ),
    ),
)


def all_rows(given: Columns, found: Sources) -> tuple[tuple[Release, Rows], ...]:
    """Build every release for every hazard."""
    return tuple(
        (release, release.build(given, found, code, hazard))
        for release in RELEASES
        for code, hazard in enumerate(HAZARDS)
    )
