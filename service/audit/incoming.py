"""Gas that comes into rooms from others: each case of a source, in every room of its network."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields, replace
from typing import Any, Final, TypeAlias

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.cases import CLEAN_AIR, CaseTable, marks_of
from service.audit.hazards import CLEAN, FLAMMABLE, HAZARDS
from service.audit.networks import NO_ROOM, Networks
from service.audit.releases import BOIL_OFF, RELEASES
from service.audit.solve import Results, after_instant, clearing_flow, results_of, starts
from service.physics.arrays import Floats, Integers, Mask, quotient
from service.physics.course import Course
from service.physics.networks import network_course, outflow_of_balance, returned_air

# Of a table these are not by case.
_NOT_BY_CASE: Final = frozenset(
    {
        "given",
        "conditions",
        "stock",
        "lines",
        "sources",
        "air",
        "failed",
        "member_start",
        "member_source",
        "member_row",
        "member_gas",
    }
)
_BY_CASE: Final = tuple(each.name for each in fields(CaseTable) if each.name not in _NOT_BY_CASE)
_BOIL_OFF: Final = [release.slug for release in RELEASES].index(BOIL_OFF)
_BURNS: Final = np.array([hazard.slug == FLAMMABLE for hazard in HAZARDS])
_AS_MEASURED: Final = AIRFLOWS.index(AS_MEASURED)

# Networks followed at a time: some forty megabytes of exponentials.
_AT_A_TIME: Final = 256
# Gas that has come this part of the way to the first mark is told; less is not. Ours.
WORTH_TELLING: Final = 0.01


@dataclass(frozen=True, slots=True)
class Incoming:
    """Cases of rooms whose gas comes from another, with what became of them.

    ``table.network`` is the room that the gas comes from, and ``table.room`` the one it comes to.
    """

    table: CaseTable
    results: Results
    case: Integers  # row of the case in the table of the sources
    network: Integers  # row of the networks
    place: Integers  # of the room in its network


def incoming(table: CaseTable, found: Networks) -> Incoming:
    """Follow every case that counts through the network of its room."""
    return _followed_through(table, found, None)


def same_incoming(table: CaseTable, found: Networks, like: Incoming) -> Incoming:
    """Follow the cases of a table that has the same rows with other numbers; row by row."""
    told = np.zeros((table.size, found.rooms.shape[1]), dtype=np.bool_)
    told[like.case, like.place] = True
    return _followed_through(table, found, told)


def _followed_through(table: CaseTable, found: Networks, told_of: Mask | None) -> Incoming:
    case, network = _cases(table, found)
    with np.errstate(all="raise", under="ignore"):
        parts = [_NOTHING, *_parts(table, found, case, network, told_of)]
        told = np.concatenate([part[0] for part in parts])
        place = np.concatenate([part[1] for part in parts])
        runs = end_to_end([part[2] for part in parts])
    return _incoming(table, found, case[told], network[told], place, runs)


def _cases(table: CaseTable, found: Networks) -> tuple[Integers, Integers]:
    """Cases that count of rooms with a network, and the network of each."""
    of_room = np.full(table.given.count, NO_ROOM)
    of_room[found.source] = np.arange(found.count)
    network = of_room[table.room]
    case = np.flatnonzero(table.counts & table.shown & (network != NO_ROOM))
    return case, network[case]


_Part: TypeAlias = tuple[Integers, Integers, Course]
_NO_ROWS: Final = np.empty(0, dtype=np.int64)
_NOTHING: Final[_Part] = (
    _NO_ROWS,
    _NO_ROWS,
    Course(np.zeros((0, 2)), np.zeros((0, 2)), np.zeros((0, 1)), np.zeros((0, 1))),
)


def end_to_end(runs: Sequence[Course]) -> Course:
    """Rows of several courses as one; those with fewer segments stay as they end."""
    width = max(run.steady.shape[1] for run in runs)

    def wider(values: Floats, to: int, *, by_last: bool) -> Floats:
        spare = ((0, 0), (0, to - values.shape[1]))
        return np.pad(values, spare, mode="edge" if by_last else "constant")

    return Course(
        times=np.concatenate([wider(run.times, width + 1, by_last=True) for run in runs]),
        ends=np.concatenate([wider(run.ends, width + 1, by_last=True) for run in runs]),
        steady=np.concatenate([wider(run.steady, width, by_last=True) for run in runs]),
        rates=np.concatenate([wider(run.rates, width, by_last=False) for run in runs]),
    )


def _parts(
    table: CaseTable,
    found: Networks,
    case: Integers,
    network: Integers,
    told_of: Mask | None,
) -> Iterator[_Part]:
    """Follow cases a few at a time; what is worth telling of them, by case and place.

    What goes on without any accident comes first: the others start from its worst in every room.
    """
    calm = (table.release[case] == _BOIL_OFF) & (table.airflow[case] == _AS_MEASURED)
    before = np.repeat(CLEAN[table.hazard[case]][:, np.newaxis], found.rooms.shape[1], axis=1)
    row_of = np.full(table.size, CLEAN_AIR)
    row_of[case] = np.arange(case.size)
    for first in (True, False):
        chosen = np.flatnonzero(calm == first)
        for begin in range(0, chosen.size, _AT_A_TIME):
            some = chosen[begin : begin + _AT_A_TIME]
            base = table.starts_from[case[some]]
            # A case without a boil-off of its own starts from clean air.
            starts_there = np.flatnonzero(base != CLEAN_AIR)
            before[some[starts_there]] = before[row_of[base[starts_there]]]
            part, highest = _followed(
                table, found, case[some], network[some], before[some], told_of
            )
            before[some] = np.maximum(before[some], highest)
            yield some[part[0]], part[1], part[2]


def _followed(
    table: CaseTable,
    found: Networks,
    case: Integers,
    network: Integers,
    before: Floats,
    told_of: Mask | None,
) -> tuple[_Part, Floats]:
    rooms = found.rooms[network]
    there = rooms != NO_ROOM
    place = np.where(there, rooms, 0)
    volume = _volumes(table, case, place, there)
    passed, outflow = _flows(table, found, case, network, place, there)
    release = np.zeros(outflow.shape)
    release[:, :, 0] = table.rates_level[case]
    run = network_course(
        table.durations[case],
        volume=volume,
        passed=passed,
        outflow=outflow,
        release=release,
        start=_starts(table, found, case, network, volume, before),
    )
    highest = run.levels.max(axis=2)
    told = _worth_telling(table, case, place, highest) if told_of is None else told_of[case]
    row, target = np.nonzero(there & told)
    neighbour = target > 0
    row, target = row[neighbour], target[neighbour]
    return (row, target, run.of_rooms(row, target)), highest


def _volumes(table: CaseTable, case: Integers, place: Integers, there: Mask) -> Floats:
    """Volume that gas mixes in, by case and place; the source's as in its own case."""
    most = place.shape[1]
    volume = _volume_beside(table, np.repeat(case, most), place.reshape(-1)).reshape(place.shape)
    volume[:, 0] = table.volume[case]
    return np.where(there, volume, 1.0)


def _volume_beside(table: CaseTable, case: Integers, room: Integers) -> Floats:
    """Volume that gas of a case mixes in elsewhere: of flammable gas the smallest zone."""
    rooms = table.conditions
    zone = np.minimum(np.minimum(rooms.floor_zone, rooms.ceiling_zone), rooms.volume)
    return np.where(_BURNS[table.hazard[case]], zone[room], rooms.volume[room])


def _flows(
    table: CaseTable,
    found: Networks,
    case: Integers,
    network: Integers,
    place: Integers,
    there: Mask,
) -> tuple[Floats, Floats]:
    """Air from room to room in each segment, and all that leaves each room.

    What comes into a room beyond what is drawn out is pushed on through its open ways, the gas
    let go in the source above all; without an open way it leaves with the air that a shared unit
    takes back, or by leaks.
    """
    airflow = table.airflow[case]
    supply = np.where(there, table.air.supply[airflow[:, np.newaxis], place], 0.0)
    exhaust = np.where(there, table.air.exhaust[airflow[:, np.newaxis], place], 0.0)
    blown = found.blown_in(network, airflow)
    turned = blown.sum(axis=1)
    steady = found.exchange[network] + found.passing[network]
    split, way_out = found.split[network], found.way_out[network]
    segments = table.durations.shape[1]
    release = np.zeros((case.size, segments, place.shape[1]))
    release[:, :, 0] = table.rates[case]
    passed = np.repeat(steady[:, np.newaxis], segments, axis=1)
    comes_in = (supply + steady.sum(axis=2) + turned)[:, np.newaxis] + release
    drawn = (exhaust + steady.sum(axis=1) + turned)[:, np.newaxis]
    kept = np.zeros_like(release)
    for room in range(place.shape[1]):
        surplus = np.maximum(comes_in[:, :, room] - drawn[:, :, room], 0.0)
        pushed = surplus[:, :, np.newaxis] * split[:, np.newaxis, :, room]
        passed[:, :, :, room] += pushed
        comes_in += pushed
        kept[:, :, room] = np.where(way_out[:, np.newaxis, room], 0.0, surplus)
    if blown.shape[1]:
        share = 1.0 + quotient(kept, turned[:, np.newaxis], where_zero=0.0)
        to_return = blown[:, np.newaxis] * share[:, :, np.newaxis]
        round_again = returned_air(
            np.broadcast_to(blown[:, np.newaxis], to_return.shape), to_return
        )
        passed = passed + round_again.sum(axis=2)
    return passed, outflow_of_balance(
        passed, supply[:, np.newaxis], exhaust[:, np.newaxis], release
    )


def _starts(
    table: CaseTable,
    found: Networks,
    case: Integers,
    network: Integers,
    volume: Floats,
    before: Floats,
) -> Floats:
    """Level in each room once what is let go at once has pushed its way.

    What the source cannot hold goes on through its open ways, and fills each room on its way as
    it filled the source; the air that it pushes before it holds no gas.
    """
    start = before.copy()
    begins = starts(table, case)
    start[:, 0] = after_instant(table, case, begins)
    # How far a room can be filled: with the gas alone.
    full = quotient(table.instant_level[case], table.instant[case], where_zero=0.0)
    goes_on = np.zeros_like(start)
    had = begins * volume[:, 0] + table.instant_level[case]
    goes_on[:, 0] = np.maximum(had - start[:, 0] * volume[:, 0], 0.0)
    split = found.split[network]
    for room in range(start.shape[1]):
        if room:
            free = np.maximum(full - start[:, room], 0.0) * volume[:, room]
            stays = np.minimum(goes_on[:, room], free)
            start[:, room] += stays / volume[:, room]
            goes_on[:, room] -= stays
        goes_on += goes_on[:, room, np.newaxis] * split[:, :, room]
    return start


def _worth_telling(table: CaseTable, case: Integers, place: Integers, highest: Floats) -> Mask:
    most = place.shape[1]
    hazard = np.repeat(table.hazard[case], most)
    release, room = np.repeat(table.release[case], most), place.reshape(-1)
    marks, _ = marks_of(table.given, table.conditions, release, hazard, room)
    first = marks.min(axis=1).reshape(place.shape)
    clean = CLEAN[table.hazard[case]][:, np.newaxis]
    near: Mask = highest - clean >= WORTH_TELLING * (first - clean)
    return near


def _incoming(
    table: CaseTable,
    found: Networks,
    case: Integers,
    network: Integers,
    place: Integers,
    runs: Course,
) -> Incoming:
    order = np.lexsort((place, case))
    case, network, place = case[order], network[order], place[order]
    runs = Course(runs.times[order], runs.ends[order], runs.steady[order], runs.rates[order])
    rows = _rows(table, found, case, network, place)
    level = runs.highest
    gas = table.instant[case] + (table.rates[case] * table.durations[case]).sum(axis=1)
    results = results_of(
        rows,
        runs,
        runs.ends[:, 0],
        gas=gas,
        recovered=runs.back_below(rows.first_mark),
        clearing=clearing_flow(rows, np.arange(rows.size), level),
        required=np.full(rows.size, np.nan),
    )
    return Incoming(rows, results, case, network, place)


def _rows(
    table: CaseTable, found: Networks, case: Integers, network: Integers, place: Integers
) -> CaseTable:
    """The cases as the rooms see them that gas comes into."""
    room = found.rooms[network, place]
    marks, measured_on = marks_of(
        table.given, table.conditions, table.release[case], table.hazard[case], room
    )
    first = np.argmax(np.isfinite(marks), axis=1)
    airflow = table.airflow[case]
    sizes = np.diff(table.member_start)[case]
    copies = np.repeat(np.arange(case.size), sizes)
    within = np.arange(copies.size) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    member = table.member_start[case][copies] + within
    by_case: dict[str, Any] = {name: getattr(table, name)[case] for name in _BY_CASE}
    by_case |= {
        "room": room,
        "at_once": np.zeros(case.size, dtype=np.bool_),
        "starts_from": np.full(case.size, CLEAN_AIR),
        "measured": np.arange(case.size),
        "volume": _volume_beside(table, case, room),
        "supply": table.air.supply[airflow, room][:, np.newaxis],
        "exhaust": table.air.exhaust[airflow, room][:, np.newaxis],
        "marks": marks,
        "measured_on": measured_on,
        "first": first,
        "first_mark": marks[np.arange(case.size), first],
    }
    return replace(
        table,
        **by_case,
        member_row=copies,
        member_source=table.member_source[member],
        member_gas=table.member_gas[member],
        member_start=np.searchsorted(copies, np.arange(case.size + 1)),
    )
