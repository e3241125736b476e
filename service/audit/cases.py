"""Rooms become one table of cases: a row for each release, airflow and hazard of a network."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime

import numpy as np

from service.audit.air import AIRFLOWS, PROVEN, Air, air
from service.audit.columns import Columns, columns, moments, taken
from service.audit.conditions import Conditions, conditions
from service.audit.failures import failures
from service.audit.hazards import HAZARDS
from service.audit.inputs import RoomValues
from service.audit.inventory import Inventory, inventory
from service.audit.releases import BOIL_OFF, RELEASES, Release, Rows, Sources, all_rows, sources
from service.physics.arrays import Floats, Integers, Mask

CLEAN_AIR = -1


@dataclass(frozen=True, slots=True)
class CaseTable:
    """A structure of arrays, one row a case; rooms are rows of ``given``.

    A network is one room in this release. Fractions are levels of the hazard: 0 in clean air, and
    rising as it worsens.
    """

    given: Columns
    conditions: Conditions
    stock: Inventory
    sources: Sources
    air: Air
    failed: tuple[str | None, ...]  # by the rooms asked for: why one cannot be computed
    network: Integers
    room: Integers
    release: Integers  # row of RELEASES
    airflow: Integers  # row of AIRFLOWS
    hazard: Integers  # row of HAZARDS
    shown: Mask  # belongs to an answer
    counts: Mask  # towards the standing
    at_once: Mask
    starts_from: Integers  # row of the case whose worst point it starts from; -1: clean air
    volume: Floats  # [m3]
    supply: Floats  # [m3/s]
    exhaust: Floats
    instant: Floats  # [m3]
    instant_diluting: Floats
    durations: Floats  # (rows, segments) [s]
    rates: Floats  # [m3/s]
    rates_diluting: Floats
    marks: Floats  # (rows, 3) levels
    oxygen_marks: Floats  # (rows, 3) oxygen fractions
    member_start: Integers  # where the sources of each case begin; one more for the end
    member_source: Integers
    member_row: Integers  # which case each of them belongs to, never falling

    @property
    def size(self) -> int:
        """How many cases."""
        return int(self.room.size)


def case_table(rooms: Sequence[RoomValues], at: datetime) -> CaseTable:
    """Make the cases of many rooms; one with impossible numbers has none, and says why."""
    flat = columns(rooms)
    failed = failures(flat)
    sound = np.array([sentence is None for sentence in failed], dtype=np.bool_)
    return cases_of(taken(flat, np.flatnonzero(sound)), moments([at])[0], failed)


def cases_of(given: Columns, at: np.datetime64, failed: tuple[str | None, ...] = ()) -> CaseTable:
    """Make the cases of rooms already flattened and sound."""
    room = conditions(given)
    stock = inventory(given, room, at)
    flows = air(given, room, at)
    found = sources(given, stock, room)
    built = all_rows(given, found)
    blocks = [
        (release, code, airflow, rows)
        for code, release in enumerate(RELEASES)
        for of_release, rows in built
        if of_release is release
        for airflow in AIRFLOWS
        if airflow != PROVEN or not release.at_once
    ]
    return _joined(given, room, stock, found, flows, blocks, failed)


def _joined(
    given: Columns,
    room: Conditions,
    stock: Inventory,
    found: Sources,
    flows: Air,
    blocks: Sequence[tuple[Release, int, str, Rows]],
    failed: tuple[str | None, ...],
) -> CaseTable:
    sizes = [rows.room.size for *_, rows in blocks]
    width = max((rows.durations.shape[1] for *_, rows in blocks), default=1)

    def by_block(values: Sequence[int | bool]) -> Integers:
        return np.repeat(np.array(values, dtype=np.int64), sizes)

    def joined(name: str) -> Floats:
        return np.concatenate([getattr(rows, name) for *_, rows in blocks])

    def padded(name: str) -> Floats:
        return np.concatenate([_padded(getattr(rows, name), width) for *_, rows in blocks])

    rooms = joined("room").astype(np.int64)
    hazard = joined("hazard").astype(np.int64)
    release = by_block([code for _, code, _, _ in blocks])
    airflow = by_block([AIRFLOWS.index(name) for _, _, name, _ in blocks])
    offsets = np.cumsum(sizes) - sizes
    oxygen_marks = np.stack([each.marks(room) for each in HAZARDS])[hazard, rooms]
    levels = np.stack([each.level(each.marks(room)) for each in HAZARDS])[hazard, rooms]
    member_row = np.concatenate(
        [rows.member_row + offset for (*_, rows), offset in zip(blocks, offsets, strict=True)]
    ).astype(np.int64)
    by_case = np.argsort(member_row, kind="stable")
    from_boil_off = by_block([each.from_boil_off for each, *_ in blocks]) == 1
    return CaseTable(
        given=given,
        conditions=room,
        stock=stock,
        sources=found,
        air=flows,
        failed=failed or (None,) * given.count,
        network=rooms,
        room=rooms,
        release=release,
        airflow=airflow,
        hazard=hazard,
        shown=airflow != AIRFLOWS.index(PROVEN),
        counts=by_block([name in each.counts_in for each, _, name, _ in blocks]) == 1,
        at_once=by_block([each.at_once for each, *_ in blocks]) == 1,
        starts_from=_starts_from(rooms, release, airflow, hazard, from_boil_off, given.count),
        volume=room.volume[rooms],
        supply=flows.supply[airflow, rooms],
        exhaust=flows.exhaust[airflow, rooms],
        instant=joined("instant"),
        instant_diluting=joined("instant_diluting"),
        durations=padded("durations"),
        rates=padded("rates"),
        rates_diluting=padded("rates_diluting"),
        marks=levels,
        oxygen_marks=oxygen_marks,
        member_start=np.searchsorted(member_row[by_case], np.arange(rooms.size + 1)),
        member_source=joined("member_source").astype(np.int64)[by_case],
        member_row=member_row[by_case],
    )


def _padded(table: Floats, width: int) -> Floats:
    filled = np.zeros((table.shape[0], width))
    filled[:, : table.shape[1]] = table
    return filled


def _starts_from(
    room: Integers,
    release: Integers,
    airflow: Integers,
    hazard: Integers,
    from_boil_off: Mask,
    rooms: int,
) -> Integers:
    """Row of the room's boil-off in as-measured for the same hazard, where a case starts there."""
    slugs = [each.slug for each in RELEASES]
    base = (release == slugs.index(BOIL_OFF)) & (airflow == 0)
    rows = np.full((len(HAZARDS), rooms), CLEAN_AIR)
    rows[hazard[base], room[base]] = np.flatnonzero(base)
    return np.where(from_boil_off, rows[hazard, room], CLEAN_AIR)
