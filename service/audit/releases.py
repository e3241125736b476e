"""What is let go in many rooms: one block of rows for each kind of release (judging 1)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from service.audit.columns import CONTROL_KINDS, UNKNOWN, Columns
from service.audit.conditions import Conditions
from service.audit.hazards import HAZARDS
from service.audit.inventory import Inventory
from service.audit.release_rows import (
    EXPECTED,
    JACKET_OPEN,
    PIPE_FAILED,
    Raising,
    Rows,
    at_once_rows,
    by_segment,
    distinct_ends,
    in_variant,
    lasting_rows,
    leaders,
    no_rows,
    stacked,
    steady_rows,
)
from service.audit.sources import NO_LINE, Sources
from service.physics.arrays import Floats, Integers, sum_by_group
from service.physics.pool import bund_segments

BOIL_OFF: Final = "boil-off"
FILLING: Final = "filling"
OVERFILL: Final = "overfill"
LARGEST_VESSEL: Final = "largest-vessel"
ALL_VESSELS: Final = "all-vessels"
SPILL: Final = "spill"
VACUUM_LOSS: Final = "vacuum-loss"
LINE_BREAK: Final = "line-break"
QUENCH: Final = "quench"

_BUND: Final = CONTROL_KINDS.index("bund")

DETECTION: Final = "detection"
VENTILATION: Final = "ventilation"
SHUT_OFF: Final = "shut-off"
NOBODY_INSIDE: Final = "nobody-inside"

_AS_MEASURED: Final = frozenset({"as-measured"})
_ACCIDENT: Final = (DETECTION, VENTILATION, NOBODY_INSIDE)


@dataclass(frozen=True, slots=True)
class Release:
    """A kind of release, and how it stands to others."""

    slug: str
    build: Callable[[Raising], Rows]
    sustained: bool  # goes on without any accident, and starts from clean air
    noticed: bool  # seen and heard from its start, so that people leave without an alarm
    counts_in: frozenset[str]  # airflows in which it counts towards the standing
    safeguards: tuple[str, ...]  # those that count
    method: tuple[str, ...]


def boil_off(seen: Raising) -> Rows:
    """Normal evaporation, use and purge gas, each until it is gone, for the sustained time."""
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.rate > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    rooms, row = np.unique(found.room[member], return_inverse=True)
    row = row.reshape(-1)
    sustained = seen.given.bases.sustained[rooms]
    lasts = np.minimum(found.lasts[member], sustained[row])
    ends, rank = distinct_ends(row, lasts, sustained)
    rate = found.rate[member]
    return lasting_rows(
        seen,
        rooms,
        np.diff(ends, axis=1, prepend=0.0),
        by_segment(rate, row, rank, ends.shape),
        by_segment(rate * seen.weight[member], row, rank, ends.shape),
        (row, member, rate * lasts),
    )


def filling(seen: Raising) -> Rows:
    """Transfer loss of everything filled in the room, one vessel after another; by line together.

    The order of a session is nobody's record: the smallest rates go first, so that the highest
    fraction comes out, and vessels of one rate are one segment. A session longer than the
    sustained time keeps its end.
    """
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.filling > 0.0) & (found.filled_in > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    # Vessels of one line fill together, and as long as one another: they are one of the session.
    line = seen.given.vessels.line[found.vessel[member]]
    apart = np.where(line == UNKNOWN, seen.given.lines.room.size + member, line)
    _, leads, together = np.unique(apart, return_index=True, return_inverse=True)
    together, first_of = together.reshape(-1), member[leads]
    by_unit = sum_by_group(found.filling[member], together, leads.size)
    by_level = sum_by_group(found.filling[member] * seen.weight[member], together, leads.size)
    order = np.lexsort((first_of, by_unit, by_level, found.room[first_of]))
    room, rate, level = found.room[first_of[order]], by_unit[order], by_level[order]
    new_room = np.diff(room, prepend=-1) != 0
    new_segment = new_room | (np.diff(rate, prepend=0.0) != 0.0)
    new_segment |= np.diff(level, prepend=0.0) != 0.0
    row = np.cumsum(new_room) - 1
    segment = np.cumsum(new_segment) - 1
    first = np.flatnonzero(new_segment)
    place = segment - segment[np.flatnonzero(new_room)][row]
    rooms, width = room[new_room], int(place.max()) + 1
    cell = (row[first], place[first])
    lengths = np.zeros((rooms.size, width + 1))
    lengths[cell] = sum_by_group(found.filled_in[first_of[order]], segment, first.size)
    rates, rates_level = np.zeros_like(lengths), np.zeros_like(lengths)
    rates[cell], rates_level[cell] = rate[first], level[first]
    sustained = seen.given.bases.sustained[rooms]
    lengths = _last_of(lengths, sustained)
    lengths[:, -1] = np.maximum(sustained - lengths.sum(axis=1), 0.0)
    row_of = np.empty(order.size, dtype=np.int64)
    row_of[order] = row
    members = (row_of[together], member, found.filling[member] * found.filled_in[member])
    return lasting_rows(seen, rooms, lengths, rates, rates_level, members)


def _last_of(lengths: Floats, longest: Floats) -> Floats:
    """Segments cut from the front, so that they come to the longest time at most."""
    after = np.cumsum(lengths[:, ::-1], axis=1)[:, ::-1] - lengths
    return np.clip(longest[:, np.newaxis] - after, 0.0, lengths)


def overfill(seen: Raising) -> Rows:
    """Automatic filling that does not stop: its full flow, until a shut-off closes.

    Vessels that would do alike are one case, for any one of them.
    """
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.overfill > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    # By the flow of liquid and not of gas, which alone no margin can change.
    flow = seen.given.vessels.fill_flow[found.vessel[member]]
    keys = np.stack(
        [
            found.room[member].astype(np.float64),
            found.fluid[member].astype(np.float64),
            np.where(np.isnan(flow), -1.0, flow),
            found.overfill_lasts[member],
        ],
        axis=1,
    )
    keys = np.column_stack([keys, _bund_area(seen, member)])
    _, first, alike = np.unique(keys, axis=0, return_index=True, return_inverse=True)
    in_record_order = np.argsort(first)
    row_of = np.empty_like(in_record_order)
    row_of[in_record_order] = np.arange(first.size)
    source = member[first[in_record_order]]
    members = (row_of[alike.reshape(-1)], member)
    rows = steady_rows(seen, source, found.overfill[source], found.overfill_lasts[source], members)
    return _slowed_by_bund(seen, rows, source)


def _bund_area(seen: Raising, source: Integers) -> Floats:
    """Floor inside the bund of the vessel of a source, or of its room; 0 where there is none."""
    controls = seen.given.controls
    held = np.flatnonzero((controls.kind == _BUND) & (controls.area > 0.0))
    # The largest wets the most floor.
    of_vessel = np.zeros(seen.given.vessels.room.size)
    of_room = np.zeros(seen.given.count)
    named = controls.vessel[held] != UNKNOWN
    np.maximum.at(of_vessel, controls.vessel[held[named]], controls.area[held[named]])
    np.maximum.at(of_room, controls.room[held[~named]], controls.area[held[~named]])
    own = of_vessel[seen.found.vessel[source]]
    return np.where(own > 0.0, own, of_room[seen.found.room[source]])


def _slowed_by_bund(seen: Raising, rows: Rows, source: Integers) -> Rows:
    """The same rows, with what runs into a bund evaporating no faster than its floor allows."""
    area = _bund_area(seen, source)
    held = np.flatnonzero(area > 0.0)
    if not held.size:
        return rows
    found, fluids = seen.found, seen.given.fluids
    vessel, room = found.vessel[source[held]], found.room[source[held]]
    feed = seen.stock.overfill_liquid[vessel]
    sustained = seen.given.bases.sustained[room]
    floor = seen.conditions.temperature[room] - fluids.boiling_point[found.fluid[source[held]]]
    durations, masses = bund_segments(
        feed,
        np.minimum(found.overfill_lasts[source[held]], sustained),
        area[held],
        np.maximum(floor, 1.0),
        fluids.latent_heat[found.fluid[source[held]]],
        longest=sustained,
    )
    width = durations.shape[1] + 1
    lengths, rates = (
        np.pad(table, ((0, 0), (0, width - table.shape[1])))
        for table in (rows.durations, rows.rates)
    )
    lengths[held, : width - 1] = durations
    lengths[held, -1] = np.maximum(sustained - durations.sum(axis=1), 0.0)
    rates[held] = 0.0
    rates[held, : width - 1] = masses * seen.stock.gas_per_mass[vessel][:, np.newaxis]
    weight = seen.weight[source][:, np.newaxis]
    gas = (lengths * rates).sum(axis=1)
    return replace(
        rows,
        durations=lengths,
        rates=rates,
        rates_level=rates * weight,
        member_gas=gas[rows.member_row],
    )


def vacuum_loss(seen: Raising) -> Rows:
    """The vessel whose lost vacuum lets most gas out, of each fluid; and with its jacket open."""
    return stacked(
        seen.hazard,
        [
            _leaking(seen, seen.found.leak, seen.found.leak_lasts),
            in_variant(_leaking(seen, seen.found.torn, seen.found.torn_lasts), JACKET_OPEN),
        ],
    )


def _leaking(seen: Raising, rate: Floats, lasts: Floats) -> Rows:
    found = seen.found
    member = np.flatnonzero(seen.raises & (rate > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    amount = rate[member] * seen.weight[member]
    source = member[leaders(found.room[member], found.fluid[member], amount, member)]
    return steady_rows(seen, source, rate[source], lasts[source], (np.arange(source.size), source))


def line_break(seen: Raising) -> Rows:
    """Each line that brings gas into the room, and the hose of each dewar that is drawn from."""
    found = seen.found
    source = np.flatnonzero(seen.raises & (found.broken > 0.0))
    if not source.size:
        return no_rows(seen.hazard)
    # Of hoses the one that lets most out, of each fluid; each line by itself.
    hoses = source[found.line[source] == NO_LINE]
    amount = found.broken[hoses] * seen.weight[hoses]
    worst = hoses[leaders(found.room[hoses], found.fluid[hoses], amount, hoses)]
    source = np.concatenate([worst, source[found.line[source] != NO_LINE]])
    source = source[np.lexsort((source, found.room[source]))]
    return steady_rows(
        seen,
        source,
        found.broken[source],
        found.broken_lasts[source],
        (np.arange(source.size), source),
    )


def quench(seen: Raising) -> Rows:
    """Each magnet's helium, as its pipe is expected to leave it to the room, and with that failed.

    Without a pipe all of it comes into the room, and there is nothing that could fail.
    """
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.quench > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    piped = member[seen.given.vessels.has_pipe[found.vessel[member]]]
    expected = _quenched(seen, member, found.quench_share[member])
    failed = _quenched(seen, piped, np.ones(piped.size))
    return stacked(seen.hazard, [in_variant(expected, EXPECTED), in_variant(failed, PIPE_FAILED)])


def _quenched(seen: Raising, source: Integers, share: Floats) -> Rows:
    gas = seen.found.quench[source] * share
    members = (np.arange(source.size), source, gas)
    return at_once_rows(seen, seen.found.room[source], gas, gas * seen.weight[source], members)


def spill(seen: Raising) -> Rows:
    """The largest vessel that can tip, of each fluid: liquid at once, ice in time."""
    return stacked(seen.hazard, [_spilt_liquid(seen), _spilt_ice(seen)])


def _spilt_liquid(seen: Raising) -> Rows:
    """Liquid on the floor, gone within seconds, so that all of it counts at once."""
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.tipped > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    gas = found.tipped[member]
    amount = gas * seen.weight[member]
    chosen = leaders(found.room[member], found.fluid[member], amount, member)
    source = member[chosen]
    members = (np.arange(source.size), source, gas[chosen])
    return at_once_rows(seen, found.room[source], gas[chosen], amount[chosen], members)


def _spilt_ice(seen: Raising) -> Rows:
    """The largest box of ice that can be emptied on the floor, of each fluid."""
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.spilt > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    amount = found.spilt[member] * seen.weight[member]
    source = member[leaders(found.room[member], found.fluid[member], amount, member)]
    # A share of the whole each hour, until that is gone.
    lasts = 3600.0 / seen.given.bases.loose_ice_share[found.room[source]]
    return steady_rows(seen, source, found.spilt[source], lasts, (np.arange(source.size), source))


def largest_vessel(seen: Raising) -> Rows:
    """The vessel or manifold group with the most gas, of each fluid, all at once.

    One vessel of each fluid is enough: with less of the same gas every number is milder, and the
    same safeguards count. A group of several fluids is a case of its own.
    """
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.at_once > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    groups, group = np.unique(found.group[member], return_inverse=True)
    group = group.reshape(-1)
    gas = found.at_once[member]
    level = sum_by_group(gas * seen.weight[member], group, groups.size)
    first = np.full(groups.size, member.size)
    np.minimum.at(first, group, np.arange(member.size))
    room = found.room[member][first]
    fluid = _only_fluid(found.fluid[member], group, groups.size)
    chosen = leaders(room, fluid, level, first)
    row_of_group = np.full(groups.size, -1)
    row_of_group[chosen] = np.arange(chosen.size)
    kept = np.flatnonzero(row_of_group[group] >= 0)
    volume = sum_by_group(gas, group, groups.size)
    members = (row_of_group[group[kept]], member[kept], gas[kept])
    return at_once_rows(seen, room[chosen], volume[chosen], level[chosen], members)


def _only_fluid(fluid: Integers, group: Integers, count: int) -> Integers:
    """The fluid of each group, or a negative number of its own where it has several."""
    lowest = np.full(count, np.iinfo(np.int64).max)
    highest = np.full(count, -1)
    np.minimum.at(lowest, group, fluid)
    np.maximum.at(highest, group, fluid)
    return np.where(lowest == highest, lowest, -1 - np.arange(count))


def all_vessels(seen: Raising) -> Rows:
    """Everything in the room at once."""
    found = seen.found
    member = np.flatnonzero(seen.raises & (found.at_once > 0.0))
    if not member.size:
        return no_rows(seen.hazard)
    rooms, row = np.unique(found.room[member], return_inverse=True)
    row, gas = row.reshape(-1), found.at_once[member]
    volume = sum_by_group(gas, row, rooms.size)
    level = sum_by_group(gas * seen.weight[member], row, rooms.size)
    return at_once_rows(seen, rooms, volume, level, (row, member, gas))


RELEASES: Final = (
    Release(
        slug=BOIL_OFF,
        build=boil_off,
        sustained=True,
        noticed=False,
        counts_in=frozenset({"as-measured", "lost"}),
        safeguards=(DETECTION,),
        method=("boil-off/normal-evaporation", "ventilation/hold"),
    ),
    Release(
        slug=FILLING,
        build=filling,
        sustained=True,
        noticed=False,
        counts_in=_AS_MEASURED,
        safeguards=(),
        method=("filling/transfer-loss", "ventilation/hold"),
    ),
    Release(
        slug=OVERFILL,
        build=overfill,
        sustained=False,
        noticed=False,
        counts_in=_AS_MEASURED,
        safeguards=(*_ACCIDENT, SHUT_OFF),
        method=("filling/overfill", "ventilation/hold", "ventilation/restore"),
    ),
    Release(
        slug=VACUUM_LOSS,
        build=vacuum_loss,
        sustained=False,
        noticed=True,
        counts_in=_AS_MEASURED,
        safeguards=_ACCIDENT,
        method=("vacuum-loss/heat-flux", "ventilation/hold", "ventilation/restore"),
    ),
    Release(
        slug=LARGEST_VESSEL,
        build=largest_vessel,
        sustained=False,
        noticed=True,
        counts_in=_AS_MEASURED,
        safeguards=_ACCIDENT,
        method=("ventilation/restore",),
    ),
    Release(
        slug=ALL_VESSELS,
        build=all_vessels,
        sustained=False,
        noticed=True,
        counts_in=_AS_MEASURED,
        safeguards=_ACCIDENT,
        method=("ventilation/restore",),
    ),
    Release(
        slug=SPILL,
        build=spill,
        sustained=False,
        noticed=True,
        counts_in=_AS_MEASURED,
        safeguards=_ACCIDENT,
        method=(
            "spill/pool-on-floor",
            "dry-ice/share-per-hour",
            "ventilation/hold",
            "ventilation/restore",
        ),
    ),
    Release(
        slug=LINE_BREAK,
        build=line_break,
        sustained=False,
        noticed=True,
        counts_in=_AS_MEASURED,
        safeguards=(*_ACCIDENT, SHUT_OFF),
        method=(
            "line-break/liquid",
            "line-break/gas",
            "ventilation/hold",
            "ventilation/restore",
        ),
    ),
    Release(
        slug=QUENCH,
        build=quench,
        sustained=False,
        noticed=True,
        counts_in=_AS_MEASURED,
        safeguards=_ACCIDENT,
        method=("quench/mean-and-peak", "ventilation/restore"),
    ),
)


def all_rows(
    given: Columns, room: Conditions, stock: Inventory, found: Sources
) -> tuple[tuple[int, Rows], ...]:
    """Build every release for every hazard that anything in the rooms raises; none is left out."""
    raised = [Raising(given, found, stock, room, code) for code in range(len(HAZARDS))]
    built = [
        (code, release.build(seen))
        for code, release in enumerate(RELEASES)
        for seen in raised
        if seen.raises.any()
    ]
    return tuple((code, rows) for code, rows in built if rows.room.size)
