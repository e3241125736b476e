"""Cases with what became of them, the safeguards that hold, and how bad each is."""

from dataclasses import dataclass, replace

import numpy as np

from service.audit.assumptions import ASSUMPTIONS, Assumptions
from service.audit.cases import CaseTable, cases_of
from service.audit.columns import taken
from service.audit.hazards import ABOUT_OXYGEN
from service.audit.incoming import Incoming
from service.audit.marks import mark_percent
from service.audit.safeguards import Safeguards, safeguards
from service.audit.severity import case_severity, without_safeguards, worst_by_room
from service.audit.shut_off import with_shut_off
from service.audit.solve import Results, proven_to_hold, solve
from service.physics.arrays import Floats, Integers, Mask

_ALL_TOGETHER = -1  # every assumption of a room at its mildest at once


@dataclass(frozen=True, slots=True)
class Evaluation:
    """One row a case."""

    table: CaseTable
    results: Results
    guards: Safeguards
    severity: Integers  # index in SEVERITIES; -1 where no mark is crossed
    limits: Floats  # (rows, 3) of the marks, in percent; not-a-number where there is none
    values: Floats  # (rows, 3) set against them, in percent
    bare_severity: Integers  # of each room's worst case that counts, were there no safeguard
    decisive_limit: Floats  # of the worst mark crossed, else of the first there is
    decisive_value: Floats


def evaluate(table: CaseTable, at: np.datetime64) -> Evaluation:
    """Solve a table and judge its cases."""
    results = solve(table)
    return evaluation_of(table, results, safeguards(table, results, at))


def evaluate_incoming(came: Incoming, base: Evaluation, at: np.datetime64) -> Evaluation:
    """Judge the cases that came from other rooms by what the room that they came to has."""
    guards = safeguards(came.table, came.results, at)
    # Whether its air holds what goes on in the room itself is what its own cases say.
    holds = proven_to_hold(base.table, base.results)[came.table.room]
    return evaluation_of(
        came.table, came.results, replace(guards, ventilation=guards.ventilation & holds)
    )


def evaluation_of(table: CaseTable, results: Results, guards: Safeguards) -> Evaluation:
    """Say how bad each case is."""
    severity = case_severity(table, results, guards)
    limits, values = mark_percent(table, results)
    # Oxygen is always held against its first mark: its measure is one number however low it falls.
    crossed = np.where(results.mark > 0, results.mark - 1, table.first)
    place = np.where(ABOUT_OXYGEN[table.hazard], 0, crossed)
    cases = np.arange(table.size)
    return Evaluation(
        table=table,
        results=results,
        guards=guards,
        severity=severity,
        limits=limits,
        values=values,
        bare_severity=worst_by_room(
            without_safeguards(table, results, severity), table.counts, table
        ),
        decisive_limit=limits[cases, place],
        decisive_value=values[cases, place],
    )


def deciding(base: Evaluation, assumed: Assumptions, at: np.datetime64) -> Mask:
    """Tell which assumptions decide: at the mildest bound, the worst mark or severity moves.

    Each field is set for a whole room at once, and all of its fields together last: where only
    that moves it, all of them decide. The rooms so changed are rows of one more case table.
    """
    decides = np.zeros(assumed.code.size, dtype=np.bool_)
    bounded = np.array([each.mildest is not None for each in ASSUMPTIONS])[assumed.code]
    severity, mark = _worst(base)
    asked = bounded & (mark[assumed.room] > 0)
    if not asked.any():
        return decides
    alone = np.unique(np.stack([assumed.room[asked], assumed.code[asked]]), axis=1)
    rooms = np.unique(alone[0])
    room = np.concatenate([alone[0], rooms])
    code = np.concatenate([alone[1], np.full(rooms.size, _ALL_TOGETHER)])
    changed = taken(base.table.given, room)
    for place, assumption in enumerate(ASSUMPTIONS):
        chosen = (code == place) | (code == _ALL_TOGETHER)
        if assumption.mildest is not None and chosen.any():
            changed = assumption.mildest(changed, chosen)
    milder = with_shut_off(cases_of(changed, at), at)
    milder_severity, milder_mark = _worst(evaluate(milder, at))
    moved = (milder_severity < severity[room]) | (milder_mark < mark[room])
    return asked & _moved_by(assumed, base.table.given.count, room, code, moved)


def _worst(evaluation: Evaluation) -> tuple[Integers, Integers]:
    table = evaluation.table
    return (
        worst_by_room(evaluation.severity, table.counts, table),
        worst_by_room(evaluation.results.mark, table.counts, table),
    )


def _moved_by(
    assumed: Assumptions, rooms: int, room: Integers, code: Integers, moved: Mask
) -> Mask:
    by_field = np.zeros((rooms, len(ASSUMPTIONS)), dtype=np.bool_)
    single = code != _ALL_TOGETHER
    by_field[room[single], code[single]] = moved[single]
    together = np.zeros(rooms, dtype=np.bool_)
    together[room[~single]] = moved[~single]
    only_together = together & ~by_field.any(axis=1)
    decides: Mask = by_field[assumed.room, assumed.code] | only_together[assumed.room]
    return decides
