"""Rooms become assessments: the case table, its solution and the rules, put together."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from typing import Final

import numpy as np

from service.audit.assessment import METHOD_VERSION, SEVERITIES, Assessment, Judgement
from service.audit.assumptions import assumptions
from service.audit.boost import with_boost
from service.audit.cases import CaseTable, case_table, cases_of
from service.audit.columns import UNKNOWN, Moments, moments
from service.audit.evaluation import Evaluation, deciding, evaluate, evaluate_incoming
from service.audit.incoming import incoming, same_incoming
from service.audit.inputs import Reference, RoomValues
from service.audit.layering import layering
from service.audit.margins import without_margins
from service.audit.networks import NO_ROOM, Networks, networks
from service.audit.rules.case_records import case_records
from service.audit.rules.registry import RULES
from service.audit.rules.rule import (
    Came,
    Direction,
    Judged,
    Rule,
    Subject,
    Tables,
    family,
    record_of,
    rooms_of,
)
from service.audit.rules.words import number
from service.audit.severity import nearest
from service.audit.shut_off import with_shut_off
from service.audit.told import Leading, Told
from service.audit.told_layering import told_layering
from service.audit.turns import next_turns
from service.physics.arrays import Floats, Integers, Mask

_EPOCH: Final = datetime(1970, 1, 1, tzinfo=UTC)


def assess_rooms(
    rooms: Sequence[RoomValues], *, at: datetime, beside: Sequence[RoomValues] = ()
) -> tuple[Assessment, ...]:
    """Assess rooms at a moment; one that cannot be computed says so and hides no other.

    Those ``beside`` are there for the gas that comes from them, or goes on into them, alone.
    """
    asked, rooms = rooms, (*rooms, *beside)
    moment = moments([at])[0]
    tables, judged = _judged(rooms, at, moment)
    judgements = _judgements(tables, judged, len(asked))
    told = _told(tables, judged, moment)
    turns = next_turns(tables, [(rule.subject, answer) for rule, answer in judged], moment)
    turns = _with_networks(turns, tables)
    read = _read_of_networks(tables)
    row_of = np.full(len(rooms), UNKNOWN)
    row_of[tables.sound] = np.arange(tables.sound.size)
    return tuple(
        _assessment(
            told,
            room,
            position,
            int(row),
            judgements[position],
            turns[position],
            read.get(int(row), set()),
            at,
        )
        for position, (room, row) in enumerate(zip(asked, row_of[: len(asked)], strict=True))
    )


def told_of(rooms: Sequence[RoomValues], *, at: datetime) -> Told:
    """Solve rooms at a moment and lay out what there is to tell of them."""
    moment = moments([at])[0]
    return _told(*_judged(rooms, at, moment), moment)


def _judged(
    rooms: Sequence[RoomValues], at: datetime, moment: np.datetime64
) -> tuple[Tables, list[tuple[Rule, Judged]]]:
    tables = _tables(rooms, at, moment)
    return tables, [(rule, rule.judge(tables, moment)) for rule in RULES]


def _told(tables: Tables, judged: Sequence[tuple[Rule, Judged]], moment: np.datetime64) -> Told:
    bare = _with_alarms(cases_of(without_margins(tables.cases.table.given), moment), moment)
    return Told(
        tables=tables,
        without=bare,
        incoming_without=None
        if tables.came is None
        else same_incoming(bare, tables.networks, tables.came.rows),
        leading=_leading(tables, judged),
    )


def _tables(rooms: Sequence[RoomValues], at: datetime, moment: np.datetime64) -> Tables:
    table = _with_alarms(case_table(rooms, at), moment)
    cases = evaluate(table, moment)
    assumed = assumptions(table)
    sound = _sound(table)
    found = networks(rooms, sound, table.given, table.conditions, table.air, np.unique(table.room))
    return Tables(
        rooms=rooms,
        failed=table.failed,
        sound=sound,
        cases=cases,
        assumed=assumed,
        decides=deciding(cases, assumed, moment),
        records=case_records(rooms, sound, table),
        layering=layering(table, cases.results),
        networks=found,
        came=_came(rooms, sound, cases, found, moment),
    )


def _came(
    rooms: Sequence[RoomValues],
    sound: Integers,
    cases: Evaluation,
    found: Networks,
    moment: np.datetime64,
) -> Came | None:
    """What comes into rooms from others; most rooms are joined to none."""
    if not found.count:
        return None
    rows = incoming(cases.table, found)
    return Came(
        rows=rows,
        cases=evaluate_incoming(rows, cases, moment),
        records=case_records(rooms, sound, rows.table),
    )


def _with_alarms(table: CaseTable, moment: np.datetime64) -> CaseTable:
    """Cases with what a detector starts or ends in them."""
    return with_boost(with_shut_off(table, moment), moment)


def _sound(table: CaseTable) -> Integers:
    sound = [position for position, why in enumerate(table.failed) if why is None]
    return np.array(sound, dtype=np.int64)


def _leading(tables: Tables, judged: Sequence[tuple[Rule, Judged]]) -> Leading:
    """The case that each room's standing rests on, by judging 5.

    It is the case of the worst judgement; where that is about no case, the one nearest to a mark.
    One of the room itself goes before one of another room that is as bad.
    """
    worst = np.full(len(tables.rooms), UNKNOWN)
    for rule, answer in judged:
        np.maximum.at(
            worst,
            rooms_of(tables, rule.subject)[answer.broken],
            answer.consequence[answer.broken],
        )
    own, own_rank = _nearest(tables.cases, worst[tables.sound], _broken(judged, Subject.CASES))
    if tables.came is None:
        return Leading(own=own, incoming=np.full(own.size, UNKNOWN))
    came, came_rank = _nearest(
        tables.came.cases, worst[tables.sound], _broken(judged, Subject.INCOMING)
    )
    return Leading(own=own, incoming=np.where(came_rank > own_rank, came, UNKNOWN))


def _broken(judged: Sequence[tuple[Rule, Judged]], subject: Subject) -> Mask:
    """Cases that any rule finds beyond a mark."""
    found = [answer.broken for rule, answer in judged if rule.subject is subject]
    broken: Mask = np.logical_or.reduce(found)
    return broken


def _nearest(cases: Evaluation, worst: Integers, broken: Mask) -> tuple[Integers, Floats]:
    """Row of the case that leads in each room, and how it ranks; -1 where there is none."""
    table, near = cases.table, cases.results.nearness
    sets_it = broken & (cases.severity == worst[table.room])
    rank = np.where(table.counts, np.where(sets_it, 1, 0), UNKNOWN)
    found = nearest(table, cases.results, rank)
    there = found != UNKNOWN
    ranks = np.full(found.size, -np.inf)
    # A case that sets the standing goes before all that do not, however near these are.
    beyond = float(np.abs(near).max(initial=0.0)) + 1.0
    ranks[there] = np.where(rank[found[there]] == 1, beyond, near[found[there]])
    return found, ranks


def _judgements(
    tables: Tables, judged: Sequence[tuple[Rule, Judged]], asked: int
) -> tuple[tuple[Judgement, ...], ...]:
    by_room: list[list[Judgement]] = [[] for _ in range(asked)]
    for rule, answer in judged:
        positions = rooms_of(tables, rule.subject)
        subjects: dict[tuple[int, Reference], list[int]] = {}
        for row in np.flatnonzero(answer.broken & (positions < asked)):
            subject = record_of(tables, rule.subject, int(row))
            subjects.setdefault((int(positions[row]), subject), []).append(int(row))
        for (position, subject), rows in subjects.items():
            by_room[position].append(_judgement(tables, rule, answer, subject, rows))
    return tuple(tuple(found) for found in by_room)


def _judgement(
    tables: Tables, rule: Rule, judged: Judged, subject: Reference, rows: list[int]
) -> Judgement:
    """One judgement of all broken rows of a subject, from the worst of them."""
    worst_first = _worst_first(tables, rule, judged, rows)
    row = worst_first[0]
    said = rule.say(tables, judged, worst_first)
    return Judgement(
        rule=rule.slug,
        family=family(rule),
        subject=subject,
        gas=rule.gas,
        severity=SEVERITIES[int(judged.consequence[row])],
        measure=number(float(judged.measure[row])),
        limit=number(float(judged.limit[row])),
        worse_is=str(rule.worse_is),
        statement=said.statement,
        evidence=said.evidence,
        remedy=said.remedy,
        method=rule.method,
        source=rule.source,
    )


def _worst_first(tables: Tables, rule: Rule, judged: Judged, rows: list[int]) -> list[int]:
    if len(rows) == 1:
        return rows
    table = tables.cases.table
    sign = 1.0 if rule.worse_is is Direction.LOWER else -1.0

    def key(row: int) -> tuple[int, bool, float, int]:
        measure = sign * float(judged.measure[row])
        shown_only = rule.subject is Subject.CASES and not bool(table.counts[row])
        # Not-a-number compares with nothing, so it stands before every number.
        return (
            -int(judged.consequence[row]),
            shown_only,
            -np.inf if np.isnan(measure) else measure,
            row,
        )

    return sorted(rows, key=key)


def _assessment(
    told: Told,
    room: RoomValues,
    position: int,
    row: int,
    judgements: tuple[Judgement, ...],
    turn: np.datetime64,
    read: set[Reference],
    at: datetime,
) -> Assessment:
    sound = row != UNKNOWN
    return Assessment(
        room=room.record,
        site=room.site,
        basis=room.basis.record,
        at=at,
        method_version=METHOD_VERSION,
        failed=told.tables.failed[position],
        read=tuple(sorted(records_read(room) | read)),
        assumed=told.assumed(row) if sound else (),
        cases=told.cases(row) if sound else (),
        incoming=told.incoming(row) if sound else (),
        network=told.network(row) if sound else None,
        layering=told_layering(told.tables, row) if sound else None,
        deciding=told.deciding(row) if sound else None,
        ventilation=told.ventilation(row) if sound else None,
        figures=told.figures(row) if sound else {},
        judgements=judgements,
        turns_at=_aware(turn),
    )


def records_read(room: RoomValues) -> frozenset[Reference]:
    """Every record, in its revision, that is read of a room and what stands in it."""
    read = {room.record, room.site, room.basis.record, *room.basis.derived_from}
    if room.purge_fluid is not None:
        read.add(room.purge_fluid.record)
    for vessel in room.vessels:
        read |= {vessel.record, vessel.fluid.record}
    read |= {unit.record for unit in room.units}
    read |= {detector.record for detector in room.detectors}
    read |= {control.record for control in room.controls}
    read |= {opening.record for opening in room.openings}
    for line in room.lines:
        read |= {line.record, line.fluid.record}
        if line.source is not None:
            read |= {line.source.record, line.source.fluid.record}
    return frozenset(read)


def _read_of_networks(tables: Tables) -> dict[int, set[Reference]]:
    """What is read of other rooms, by row: of those that gas comes from, and on its way."""
    read: dict[int, set[Reference]] = {}
    for network in range(tables.networks.count):
        rows = [row for row in tables.networks.rooms[network].tolist() if row != NO_ROOM]
        on_the_way = set(records_read(tables.room(rows[0])))
        for row in rows:
            room = tables.room(row)
            on_the_way |= {room.record, *(unit.record for unit in room.units)}
            on_the_way |= {opening.record for opening in room.openings}
        for row in rows:
            read.setdefault(row, set()).update(on_the_way)
    return read


def _with_networks(turns: Moments, tables: Tables) -> Moments:
    """Moments at which anything of the networks that a room stands in can change by itself."""
    earliest = turns.copy()
    for network in range(tables.networks.count):
        rows = tables.networks.rooms[network]
        positions = tables.sound[rows[rows != NO_ROOM]]
        earliest[positions] = np.fmin(earliest[positions], np.fmin.reduce(turns[positions]))
    return earliest


def _aware(moment: np.datetime64) -> datetime | None:
    if np.isnat(moment):
        return None
    return _EPOCH + timedelta(microseconds=int(moment.astype(np.int64)))
