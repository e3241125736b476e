"""Rooms become one table of cases: a row for each release, airflow and hazard of a network."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, BOOSTED, PROVEN, Air, air
from service.audit.columns import SETTLES, Columns, columns, is_one_of, moments, taken
from service.audit.conditions import Conditions, conditions
from service.audit.failures import failures
from service.audit.hazards import ABOUT_OXYGEN, FLAMMABLE, HAZARDS, SIGN
from service.audit.inputs import RoomValues
from service.audit.inventory import Inventory, inventory
from service.audit.lines import Flows, line_flows
from service.audit.release_rows import JACKET_OPEN, Rows
from service.audit.releases import BOIL_OFF, RELEASES, all_rows
from service.audit.sources import Sources, sources
from service.physics.arrays import Floats, Integers, Mask, quotient, sum_by_group

CLEAN_AIR: Final = -1

_LOW, _HIGH, _METHANE = range(len(SETTLES))
_SUSTAINED: Final = np.array([release.sustained for release in RELEASES])
_FLAMMABLE: Final = [hazard.slug for hazard in HAZARDS].index(FLAMMABLE)


@dataclass(frozen=True, slots=True)
class CaseTable:
    """A structure of arrays, one row a case; rooms are rows of ``given``.

    A network is one room in this release. Fractions are levels of the hazard: that of clean air at
    the start, and rising as it worsens.
    """

    given: Columns
    conditions: Conditions
    stock: Inventory
    lines: Flows
    sources: Sources
    air: Air
    failed: tuple[str | None, ...]  # by the rooms asked for: why one cannot be computed
    network: Integers
    room: Integers
    release: Integers  # row of RELEASES
    airflow: Integers  # row of AIRFLOWS
    hazard: Integers  # row of HAZARDS
    variant: Integers  # row of VARIANTS; -1 where the release has but one form
    shown: Mask  # belongs to an answer
    counts: Mask  # towards the standing
    at_once: Mask
    starts_from: Integers  # row of the case whose worst point it starts from; -1: clean air
    measured: Integers  # row of the same release in as-measured
    volume: Floats  # that the gas mixes in [m3]
    supply: Floats  # (rows, 1 or segments) [m3/s]
    exhaust: Floats
    instant: Floats  # [m3]
    instant_level: Floats
    durations: Floats  # (rows, segments) [s]
    rates: Floats  # [m3/s]
    rates_level: Floats
    marks: Floats  # (rows, 3) levels; infinite where there is none
    measured_on: Integers  # (rows, 3) row of MEASURES
    first: Integers  # place of the first mark that there is
    first_mark: Floats  # and its level
    gas_by_level: Floats  # fraction of the gas that a level of 1 is
    oxygen_taken: Floats  # share of the oxygen in air that a level of 1 takes
    member_start: Integers  # where the sources of each case begin; one more for the end
    member_source: Integers
    member_row: Integers  # which case each of them belongs to, never falling
    member_gas: Floats  # let go by each [m3]

    @property
    def size(self) -> int:
        """How many cases."""
        return int(self.room.size)

    @property
    def sustained(self) -> Mask:
        """Which cases go on without any accident."""
        sustained: Mask = _SUSTAINED[self.release]
        return sustained


def case_table(rooms: Sequence[RoomValues], at: datetime) -> CaseTable:
    """Make the cases of many rooms; one with impossible numbers has none, and says why."""
    flat = columns(rooms)
    failed = failures(flat)
    sound = np.array([sentence is None for sentence in failed], dtype=np.bool_)
    return cases_of(taken(flat, np.flatnonzero(sound)), moments([at])[0], failed)


def cases_of(given: Columns, at: np.datetime64, failed: tuple[str | None, ...] = ()) -> CaseTable:
    """Make the cases of rooms already flattened and sound; those of a boost come later."""
    room = conditions(given)
    lines = line_flows(given, room, at)
    stock = inventory(given, room, lines, at)
    flows = air(given, room, at)
    found = sources(given, room, stock, lines)
    blocks = [
        _Block(release, AIRFLOWS.index(airflow), rows)
        for release, rows in all_rows(given, room, stock, found)
        for airflow in AIRFLOWS
        if airflow != BOOSTED and (airflow != PROVEN or RELEASES[release].sustained)
    ]
    return _joined(given, room, stock, lines, found, flows, blocks, failed or (None,) * given.count)


@dataclass(frozen=True, slots=True)
class _Block:
    """A release of one hazard in one airflow."""

    release: int
    airflow: int
    rows: Rows


def _joined(
    given: Columns,
    room: Conditions,
    stock: Inventory,
    lines: Flows,
    found: Sources,
    flows: Air,
    blocks: Sequence[_Block],
    failed: tuple[str | None, ...],
) -> CaseTable:
    sizes = [block.rows.room.size for block in blocks]
    width = max((block.rows.durations.shape[1] for block in blocks), default=1)

    def by_block(values: Sequence[int | bool]) -> Integers:
        return np.repeat(np.array(values, dtype=np.int64), sizes)

    def joined(name: str) -> Floats:
        return np.concatenate([np.empty(0), *(getattr(block.rows, name) for block in blocks)])

    def codes(name: str) -> Integers:
        parts = [getattr(block.rows, name) for block in blocks]
        return np.concatenate([np.empty(0, dtype=np.int64), *parts])

    def padded(name: str) -> Floats:
        parts = [_padded(getattr(block.rows, name), width) for block in blocks]
        return np.concatenate([np.empty((0, width)), *parts])

    rooms, hazard = codes("room"), codes("hazard")
    release = by_block([block.release for block in blocks])
    airflow = by_block([block.airflow for block in blocks])
    offsets = np.cumsum(sizes, dtype=np.int64) - np.array(sizes, dtype=np.int64)
    member_row = np.concatenate(
        [np.empty(0, dtype=np.int64)]
        + [block.rows.member_row + start for block, start in zip(blocks, offsets, strict=True)]
    )
    by_case = np.argsort(member_row, kind="stable")
    member_row = member_row[by_case]
    member_source = codes("member_source")[by_case]
    member_gas = joined("member_gas")[by_case]
    marks, measured_on = marks_of(given, room, release, hazard, rooms)
    first = np.argmax(np.isfinite(marks), axis=1)
    weight = found.weight[hazard[member_row], member_source]
    gas_by_level = quotient(
        sum_by_group(member_gas, member_row, rooms.size),
        sum_by_group(member_gas * weight, member_row, rooms.size),
        where_zero=1.0,
    )
    instant = joined("instant")
    counts = [AIRFLOWS[block.airflow] in RELEASES[block.release].counts_in for block in blocks]
    variant = codes("variant")
    return CaseTable(
        given=given,
        conditions=room,
        stock=stock,
        lines=lines,
        sources=found,
        air=flows,
        failed=failed,
        network=rooms,
        room=rooms,
        release=release,
        airflow=airflow,
        hazard=hazard,
        variant=variant,
        shown=airflow != AIRFLOWS.index(PROVEN),
        # One end of a bracket is shown beside the other, which counts.
        counts=(by_block(counts) == 1) & (variant != JACKET_OPEN),
        at_once=instant > 0.0,
        starts_from=_starts_from(rooms, release, airflow, hazard, given.count),
        measured=_same_as_measured(blocks, offsets),
        volume=_volume(given, room, found, hazard, rooms, member_row, member_source),
        supply=flows.supply[airflow, rooms][:, np.newaxis],
        exhaust=flows.exhaust[airflow, rooms][:, np.newaxis],
        instant=instant,
        instant_level=joined("instant_level"),
        durations=padded("durations"),
        rates=padded("rates"),
        rates_level=padded("rates_level"),
        marks=marks,
        measured_on=measured_on,
        first=first,
        first_mark=marks[np.arange(rooms.size), first],
        gas_by_level=gas_by_level,
        oxygen_taken=np.where(ABOUT_OXYGEN[hazard], SIGN[hazard], gas_by_level),
        member_start=np.searchsorted(member_row, np.arange(rooms.size + 1)),
        member_source=member_source,
        member_row=member_row,
        member_gas=member_gas,
    )


def _padded(table: Floats, width: int) -> Floats:
    filled = np.zeros((table.shape[0], width))
    filled[:, : table.shape[1]] = table
    return filled


def marks_of(
    given: Columns, room: Conditions, release: Integers, hazard: Integers, rooms: Integers
) -> tuple[Floats, Integers]:
    """Levels of the marks of each case, and what each is measured on."""
    levels = np.empty((rooms.size, 3))
    measured_on = np.empty((rooms.size, 3), dtype=np.int64)
    lasts = _SUSTAINED[release]
    for code in np.unique(hazard).tolist():
        for sustained in (False, True):
            rows = np.flatnonzero((hazard == code) & (lasts == sustained))
            if rows.size:
                marks = HAZARDS[code].marks(given, room, sustained)
                levels[rows] = marks.levels[rooms[rows]]
                measured_on[rows] = marks.measured_on
    return levels, measured_on


def _volume(
    given: Columns,
    room: Conditions,
    found: Sources,
    hazard: Integers,
    rooms: Integers,
    member_row: Integers,
    member_source: Integers,
) -> Floats:
    """Volume that the gas of each case mixes in.

    A flammable gas is judged by the highest of room, floor and ceiling figure: it may all stay in
    the zone where it goes, with the same air passing through.
    """
    volume = room.volume[rooms]
    burns = np.flatnonzero(hazard[member_row] == _FLAMMABLE)
    if burns.size:
        settles = given.fluids.settles[found.fluid[member_source[burns]]]
        rows = member_row[burns]
        for kinds, zone in (
            ((_LOW, _METHANE), room.floor_zone),
            ((_HIGH, _METHANE), room.ceiling_zone),
        ):
            goes = rows[is_one_of(settles, kinds)]
            np.minimum.at(volume, goes, zone[rooms[goes]])
    return volume


def _same_as_measured(blocks: Sequence[_Block], offsets: Integers) -> Integers:
    """Row of the same release in as-measured; the first airflow of each release is that one."""
    rows: list[Integers] = [np.empty(0, dtype=np.int64)]
    first: Integers = rows[0]
    for block, start in zip(blocks, offsets, strict=True):
        if AIRFLOWS[block.airflow] == AS_MEASURED:
            first = np.arange(start, start + block.rows.room.size)
        rows.append(first)
    return np.concatenate(rows)


def _starts_from(
    room: Integers, release: Integers, airflow: Integers, hazard: Integers, rooms: int
) -> Integers:
    """Row of the room's boil-off in as-measured for the same hazard, where a case starts there."""
    slugs = [each.slug for each in RELEASES]
    base = (release == slugs.index(BOIL_OFF)) & (airflow == AIRFLOWS.index(AS_MEASURED))
    rows = np.full((len(HAZARDS), rooms), CLEAN_AIR)
    rows[hazard[base], room[base]] = np.flatnonzero(base)
    return np.where(_SUSTAINED[release], CLEAN_AIR, rows[hazard, room])
