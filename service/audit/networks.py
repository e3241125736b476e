"""Which rooms a room's gas can reach, and the air that passes between them (design 8)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, LOST, Air, unknown_outdoor_share
from service.audit.columns import ARRANGEMENTS, Columns
from service.audit.conditions import Conditions, known
from service.audit.inputs import OpeningValues, Reference, RoomValues, UnitValues
from service.physics.arrays import Floats, Integers, Mask
from service.physics.networks import door_exchange

#: Rooms of a network at most, the source among them.
MOST_ROOMS: Final = 12
OUTDOORS: Final = -1
NO_ROOM: Final = -1

# Size of an opening that nobody measured: a single door leaf. [m]  Common practice, no source.
DOOR_WIDTH: Final = 0.9
DOOR_HEIGHT: Final = 2.1
# Difference of temperature that moves air through an open doorway, the worst for the neighbour.
# [K]  Methods L5.
WARMER: Final = 1.0
_AS_HIGH_AS_A_DOOR: Final = ("door", "curtain")

_EXHAUST: Final = ARRANGEMENTS.index("exhaust")


@dataclass(frozen=True, slots=True)
class Join:
    """A way that air takes from one room to another, or outdoors."""

    record: Reference
    here: int  # row of the rooms
    there: int  # row of the rooms; -1: outdoors
    exchange: float  # each way [m3/s]
    inflow: float  # net, into here [m3/s]
    area: float  # by which what is pushed out may leave [m2]
    assumed: tuple[str, ...]  # fields that nobody recorded


@dataclass(frozen=True, slots=True)
class SharedUnit:
    """A unit that blows air of its rooms back into them."""

    record: Reference
    rooms: tuple[int, ...]
    blown: tuple[float, ...]  # recirculated air into each [m3/s]
    on_standby: bool


@dataclass(frozen=True, slots=True)
class Cut:
    """Where a network ends although air passes on."""

    record: Reference
    room: Reference
    beyond: str  # id of the room that is left out


@dataclass(frozen=True, slots=True)
class Networks:
    """One row a room whose gas can reach others; rooms in the order of their steps from it."""

    source: Integers  # row of the rooms
    rooms: Integers  # (networks, most rooms) rows of the rooms, the source first; -1 where none
    exchange: Floats  # (networks, most, most) into the row from the column [m3/s]
    passing: Floats  # the same, one way, as recorded [m3/s]
    split: Floats  # share of what is pushed out of the column that goes into the row [1]
    way_out: Mask  # (networks, most) an opening stands open
    blown: Floats  # (networks, units, most) recirculated air of each shared unit [m3/s]
    on_standby: Mask  # (networks, units)
    steps: Integers  # (networks, most)
    by: tuple[tuple[Reference | None, ...], ...]  # what each room is reached through
    assumed: tuple[tuple[tuple[Reference, tuple[str, ...], float], ...], ...]
    cut: tuple[tuple[Cut, ...], ...]

    @property
    def count(self) -> int:
        """How many networks."""
        return int(self.source.size)

    def blown_in(self, network: Integers, airflow: Integers) -> Floats:
        """Recirculated air of each unit of some networks in some airflows."""
        runs = self.on_standby[network] | (airflow != AIRFLOWS.index(LOST))[:, np.newaxis]
        return np.where(runs[:, :, np.newaxis], self.blown[network], 0.0)


def networks(
    rooms: Sequence[RoomValues],
    sound: Integers,
    given: Columns,
    room: Conditions,
    flows: Air,
    sources: Integers,
) -> Networks:
    """Find the network of each room that lets gas go; one joined to no other has none.

    ``sound`` are the positions of the rooms that are rows of ``given``; ``sources`` are those of
    these rows that have a case.
    """
    joins = _joins(rooms, sound, room)
    shared = _shared_units(rooms, sound, given, flows)
    edges = _edges(joins, shared)
    names = [rooms[position].record for position in sound.tolist()]
    steps = [int(rooms[position].basis.values["neighbour_steps"]) for position in sound.tolist()]
    found = []
    for source in sources.tolist():
        if edges.get(source) and steps[source] > 0:
            reached = _reached(edges, names, source, steps[source])
            if len(reached) > 1:
                found.append(_Found(source, reached))
    in_rows = [rooms[position] for position in sound.tolist()]
    return _joined(found, joins, shared, in_rows)


def rooms_joined(room: RoomValues) -> frozenset[str]:
    """Ids of the rooms that an opening of a room leads to, through which air may pass."""
    return frozenset(
        opening.other_room_id
        for opening in room.openings
        if opening.other_room_id is not None and _passes(opening)
    )


@dataclass(frozen=True, slots=True)
class _Edge:
    """A step from one room to another."""

    there: int
    strength: float  # air that passes that way [m3/s]
    record: Reference


@dataclass(frozen=True, slots=True)
class _Found:
    """A network as it was found: its rooms, the source first, with their steps and ways."""

    source: int
    reached: Mapping[int, tuple[int, Reference | None]]


def _passes(opening: OpeningValues) -> bool:
    """Tell whether air passes: it stands open, or is not said to be shut, or has a flow."""
    return opening.normally_open is not False or bool(opening.exchange_flow or opening.inflow)


def _joins(rooms: Sequence[RoomValues], sound: Integers, room: Conditions) -> tuple[Join, ...]:
    """Every opening that air passes through, once."""
    row_of = {rooms[place].record.id: row for row, place in enumerate(sound.tolist())}
    temperatures = room.temperature.tolist()
    found: dict[str, Join] = {}
    for row, position in enumerate(sound.tolist()):
        for opening in rooms[position].openings:
            there = OUTDOORS
            if opening.other_room_id is not None:
                there = row_of.get(opening.other_room_id, NO_ROOM - 1)
            known_here = there >= OUTDOORS and opening.record.id not in found
            if known_here and _passes(opening):
                found[opening.record.id] = _join(opening, row, there, temperatures[row])
    return tuple(found[name] for name in sorted(found))


def _join(opening: OpeningValues, here: int, there: int, temperature: float) -> Join:
    width, height, assumed = _size(opening)
    stands_open = opening.normally_open is not False
    exchange = opening.exchange_flow
    if exchange is None and there != OUTDOORS and stands_open:
        exchange = float(
            door_exchange(
                width, height, temperature_difference=WARMER, temperature=max(temperature, 1.0)
            )
        )
        assumed = ("exchange_flow_m3_h", *assumed)
    if opening.normally_open is None and there != OUTDOORS:
        assumed = ("normally_open", *assumed)
    # Nobody may rest on a window that is not said to stand open.
    leads_out = opening.normally_open is True if there == OUTDOORS else stands_open
    area = width * height if opening.area is None else opening.area
    return Join(
        record=opening.record,
        here=here,
        there=there,
        exchange=(exchange or 0.0) if there != OUTDOORS else 0.0,
        inflow=(opening.inflow or 0.0) if there != OUTDOORS else 0.0,
        area=area if leads_out else 0.0,
        assumed=assumed,
    )


def _size(opening: OpeningValues) -> tuple[float, float, tuple[str, ...]]:
    """Width and height as recorded, as its area allows, or of a door."""
    if opening.width is not None and opening.height is not None:
        if opening.area is None:
            return opening.width, opening.height, ()
        return opening.area / opening.height, opening.height, ()
    if opening.area is not None:
        upright = opening.kind in _AS_HIGH_AS_A_DOOR
        height = DOOR_HEIGHT if upright else float(np.sqrt(opening.area))
        return opening.area / height, height, ()
    return DOOR_WIDTH, DOOR_HEIGHT, ("width_m", "height_m")


def _shared_units(
    rooms: Sequence[RoomValues], sound: Integers, given: Columns, flows: Air
) -> tuple[SharedUnit, ...]:
    """Units that run, serve several rooms, and blow back air that is not from outdoors."""
    units = given.units
    outdoor = known(units.outdoor_air_fraction, unknown_outdoor_share(units.arrangement))
    blown = flows.units.whole_flow * units.share * np.maximum(1.0 - outdoor, 0.0)
    recirculates = flows.units.runs & (units.arrangement != _EXHAUST) & (blown > 0.0)
    by_unit: dict[str, list[int]] = {}
    records: dict[str, Reference] = {}
    for row in np.flatnonzero(recirculates).tolist():
        unit = rooms[int(sound[units.room[row]])].units[int(units.source[row])]
        by_unit.setdefault(unit.record.id, []).append(row)
        records[unit.record.id] = unit.record
    return tuple(
        SharedUnit(
            record=records[name],
            rooms=tuple(int(units.room[row]) for row in rows),
            blown=tuple(float(blown[row]) for row in rows),
            on_standby=bool(units.standby_power[rows[0]] == 1),
        )
        for name, rows in sorted(by_unit.items())
        if len(rows) > 1
    )


def _edges(joins: Sequence[Join], shared: Sequence[SharedUnit]) -> dict[int, list[_Edge]]:
    """The steps out of each room, with the air that passes."""
    edges: dict[int, list[_Edge]] = {}
    for join in joins:
        if join.there != OUTDOORS:
            strength = join.exchange + abs(join.inflow)
            edges.setdefault(join.here, []).append(_Edge(join.there, strength, join.record))
            edges.setdefault(join.there, []).append(_Edge(join.here, strength, join.record))
    for unit in shared:
        flow = dict(zip(unit.rooms, unit.blown, strict=True))
        for here in unit.rooms:
            edges.setdefault(here, []).extend(
                _Edge(there, min(flow[here], flow[there]), unit.record)
                for there in unit.rooms
                if there != here
            )
    return edges


def _reached(
    edges: Mapping[int, Sequence[_Edge]], names: Sequence[Reference], source: int, most_steps: int
) -> dict[int, tuple[int, Reference | None]]:
    """The rooms of a network, those with the largest share first.

    The share of a room is the least flow on the way to it, where that is largest: what stands
    behind a narrow way gets little, and a room further off moves no other's place.
    """
    reached: dict[int, tuple[int, Reference | None]] = {source: (0, None)}
    share = {source: np.inf}
    while len(reached) < MOST_ROOMS:
        candidates = [
            (-min(share[here], edge.strength), reached[here][0] + 1, names[edge.there].id, edge)
            for here in reached
            if reached[here][0] < most_steps
            for edge in edges.get(here, ())
            if edge.there not in reached
        ]
        if not candidates:
            break
        least, step, _, edge = min(candidates, key=lambda each: each[:3])
        reached[edge.there] = (step, edge.record)
        share[edge.there] = -least
    in_order = sorted(reached.items(), key=lambda each: (each[1][0], -share[each[0]]))
    return dict(in_order)


def _joined(
    found: Sequence[_Found],
    joins: Sequence[Join],
    shared: Sequence[SharedUnit],
    rooms_of: Sequence[RoomValues],
) -> Networks:
    count, most = len(found), max((len(each.reached) for each in found), default=1)
    place_of = [{room: place for place, room in enumerate(each.reached)} for each in found]
    units = [_units_in(places, shared) for places in place_of]
    most_units = max((len(each) for each in units), default=0)
    rooms = np.full((count, most), NO_ROOM)
    steps = np.zeros((count, most), dtype=np.int64)
    square = (count, most, most)
    exchange, passing, split = np.zeros(square), np.zeros(square), np.zeros(square)
    way_out = np.zeros((count, most), dtype=np.bool_)
    blown = np.zeros((count, most_units, most))
    on_standby = np.zeros((count, most_units), dtype=np.bool_)
    inside = _by_room(joins)
    assumed = []
    for row, (each, places) in enumerate(zip(found, place_of, strict=True)):
        rooms[row, : len(places)] = list(places)
        steps[row, : len(places)] = [step for step, _ in each.reached.values()]
        within = _within(places, inside)
        for join in within:
            _lay(join, places, exchange[row], passing[row])
        split[row], way_out[row] = _ways(within, places, steps[row])
        for place, unit in enumerate(units[row]):
            on_standby[row, place] = unit.on_standby
            for room, flow in zip(unit.rooms, unit.blown, strict=True):
                if room in places:
                    blown[row, place, places[room]] = flow
        assumed.append(
            tuple((join.record, join.assumed, join.exchange) for join in within if join.assumed)
        )
    return Networks(
        source=np.array([each.source for each in found], dtype=np.int64),
        rooms=rooms,
        exchange=exchange,
        passing=passing,
        split=split,
        way_out=way_out,
        blown=blown,
        on_standby=on_standby,
        steps=steps,
        by=tuple(tuple(by for _, by in each.reached.values()) for each in found),
        assumed=tuple(assumed),
        cut=tuple(tuple(_cuts(places, rooms_of)) for places in place_of),
    )


def _by_room(joins: Sequence[Join]) -> dict[int, list[Join]]:
    found: dict[int, list[Join]] = {}
    for join in joins:
        found.setdefault(join.here, []).append(join)
    return found


def _within(places: Mapping[int, int], joins: Mapping[int, Sequence[Join]]) -> list[Join]:
    """Openings between rooms of a network, and those of them outdoors."""
    return [
        join
        for room in places
        for join in joins.get(room, ())
        if join.there == OUTDOORS or join.there in places
    ]


def _units_in(places: Mapping[int, int], shared: Sequence[SharedUnit]) -> list[SharedUnit]:
    return [unit for unit in shared if sum(room in places for room in unit.rooms) > 1]


def _lay(join: Join, places: Mapping[int, int], exchange: Floats, passing: Floats) -> None:
    """Add the flows of an opening to the tables of a network."""
    if join.there == OUTDOORS:
        return
    here, there = places[join.here], places[join.there]
    exchange[here, there] += join.exchange
    exchange[there, here] += join.exchange
    passing[here, there] += max(join.inflow, 0.0)
    passing[there, here] += max(-join.inflow, 0.0)


def _ways(joins: Sequence[Join], places: Mapping[int, int], steps: Integers) -> tuple[Floats, Mask]:
    """How what is pushed out of a room is shared by its open ways, further off or outdoors."""
    most = steps.size
    areas, outdoors = np.zeros((most, most)), np.zeros(most)
    for join in joins:
        here = places[join.here]
        if join.there == OUTDOORS:
            outdoors[here] += join.area
            continue
        there = places[join.there]
        # Away from the source only; between rooms equally far, to the one that stands behind.
        nearer, further = sorted((here, there))
        areas[further, nearer] += join.area
    whole = areas.sum(axis=0) + outdoors
    split = np.divide(areas, whole, out=np.zeros_like(areas), where=whole > 0.0)
    return split, whole > 0.0


def _cuts(places: Mapping[int, int], rooms: Sequence[RoomValues]) -> Iterator[Cut]:
    """Ways on which air passes out of a network that goes no further."""
    inside = {rooms[row].record.id for row in places}
    for row in places:
        room = rooms[row]
        for opening in room.openings:
            beyond = opening.other_room_id
            if beyond is not None and beyond not in inside and _passes(opening):
                yield Cut(opening.record, room.record, beyond)
        for unit in room.units:
            if _may_recirculate(unit):
                for beyond in sorted(set(unit.serves) - inside):
                    yield Cut(unit.record, room.record, beyond)


def _may_recirculate(unit: UnitValues) -> bool:
    return unit.arrangement != "exhaust" and unit.outdoor_air_fraction != 1.0
