"""Rooms -> assessments: the case table, its solution and the rules, put together."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.assessment import (
    METHOD_VERSION,
    SEVERITIES,
    Assessment,
    Assumed,
    Case,
    Judgement,
    Ventilation,
)
from service.audit.assumptions import ASSUMPTIONS, assumptions
from service.audit.cases import case_table, cases_of
from service.audit.columns import Moments, moments
from service.audit.evaluation import Evaluation, deciding, evaluate
from service.audit.hazards import HAZARDS
from service.audit.inputs import Reference, RoomValues
from service.audit.margins import without_margins
from service.audit.releases import BOIL_OFF, RELEASES
from service.audit.rules.case_records import fluids_of, vessels_of
from service.audit.rules.registry import RULES
from service.audit.rules.rule import (
    Direction,
    Judged,
    Rule,
    Tables,
    assumed_record,
    family,
    record_of,
    rooms_of,
)
from service.audit.rules.words import number
from service.audit.severity import nearest
from service.physics.arrays import Integers, Mask
from service.physics.constants import SECONDS_PER_HOUR, ZERO_CELSIUS

_EPOCH: Final = datetime(1970, 1, 1, tzinfo=UTC)
_NO_FAN: Final = "It is let go at once: no fan can hold it."
_LITRES: Final = 1000.0  # in a cubic metre


@dataclass(frozen=True, slots=True)
class _Outcome:
    """Everything that assessments of rooms are read from."""

    tables: Tables
    without: Evaluation
    judgements: Sequence[Sequence[Judgement]]  # by the rooms asked for
    leading: Integers  # row of the case of each sound room that the standing rests on
    turns: Moments  # by the rooms asked for


def assess_rooms(rooms: Sequence[RoomValues], *, at: datetime) -> tuple[Assessment, ...]:
    """Assess rooms at a moment; one that cannot be computed says so and hides no other."""
    if not rooms:
        return ()
    outcome = _outcome(rooms, at)
    places = np.full(len(rooms), -1)
    places[outcome.tables.sound] = np.arange(outcome.tables.sound.size)
    return tuple(
        _assessment(outcome, room, position, int(places[position]), at)
        for position, room in enumerate(rooms)
    )


def _outcome(rooms: Sequence[RoomValues], moment: datetime) -> _Outcome:
    table, at = case_table(rooms, moment), moments([moment])[0]
    cases = evaluate(table, at)
    assumed = assumptions(table)
    sound = np.array([n for n, why in enumerate(table.failed) if why is None], dtype=np.int64)
    tables = Tables(
        rooms=rooms,
        failed=table.failed,
        sound=sound,
        cases=cases,
        assumed=assumed,
        decides=deciding(cases, assumed, at),
    )
    judged = [(rule, rule.judge(tables, at)) for rule in RULES]
    return _Outcome(
        tables=tables,
        without=evaluate(cases_of(without_margins(table.given), at), at),
        judgements=_judgements(tables, judged),
        leading=nearest(table, cases.results, np.where(table.counts, cases.severity + 1, -1)),
        turns=_turns(tables, judged, at),
    )


def _judgements(tables: Tables, judged: Sequence[tuple[Rule, Judged]]) -> list[list[Judgement]]:
    by_room: list[list[Judgement]] = [[] for _ in tables.rooms]
    for rule, verdict in judged:
        positions = rooms_of(tables, rule.subject)
        subjects: dict[tuple[int, str], list[int]] = {}
        for row in np.flatnonzero(verdict.broken):
            record = record_of(tables, rule.subject, int(row))
            subjects.setdefault((int(positions[row]), record.id), []).append(int(row))
        for (position, _), rows in subjects.items():
            by_room[position].append(_judgement(tables, rule, verdict, rows))
    return by_room


def _judgement(tables: Tables, rule: Rule, judged: Judged, rows: Sequence[int]) -> Judgement:
    """Make one judgement of all broken rows of a subject, from the worst of them."""
    sign = 1.0 if rule.worse_is is Direction.LOWER else -1.0
    measures = np.nan_to_num(sign * judged.measure[rows], nan=-np.inf)
    order = np.lexsort((np.array(rows), measures, -judged.consequence[rows]))
    worst_first = [rows[int(place)] for place in order]
    row = worst_first[0]
    said = rule.say(tables, judged, worst_first)
    return Judgement(
        rule=rule.slug,
        family=family(rule),
        subject=record_of(tables, rule.subject, row),
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


def _turns(tables: Tables, judged: Sequence[tuple[Rule, Judged]], at: np.datetime64) -> Moments:
    """Least next moment of each room at which a rule or an ageing input changes by itself."""
    turns = np.full(len(tables.rooms), np.datetime64("NaT", "us"))
    table = tables.cases.table
    given, stock = table.given, table.stock
    # A count that falls due takes a vessel full again where the contents are relied on.
    counted = given.bases.as_recorded[given.vessels.room] | (stock.recorded_mass == 0.0)
    ageing = (
        (given.detectors.room, given.detectors.calibration_due),
        (given.detectors.room, given.detectors.silenced_since),
        (given.units.room, given.units.measurement_due),
        (given.vessels.room[counted], given.vessels.count_due[counted]),
    )
    for room, moment in ageing:
        _take_least(turns, tables.sound[room], moment, at)
    for rule, verdict in judged:
        _take_least(turns, rooms_of(tables, rule.subject), verdict.turns_at, at)
    return turns


def _take_least(turns: Moments, room: Integers, moment: Moments, at: np.datetime64) -> None:
    # Not later than now, and not-a-time, are no turns: comparisons with them are false.
    ahead = moment > at
    np.fmin.at(turns, room[ahead], moment[ahead])


def _assessment(
    outcome: _Outcome, room: RoomValues, position: int, row: int, at: datetime
) -> Assessment:
    tables = outcome.tables
    table = tables.cases.table
    rows = np.flatnonzero(table.shown & (table.room == row)) if row >= 0 else np.array([], int)
    leading = int(outcome.leading[row]) if row >= 0 else -1
    turn = outcome.turns[position]
    return Assessment(
        room=room.record,
        site=room.site,
        basis=room.basis.record,
        at=at,
        method_version=METHOD_VERSION,
        failed=tables.failed[position],
        read=tuple(sorted(set(_records_read(room)))),
        assumed=tuple(_assumed(tables, row)) if row >= 0 else (),
        cases=tuple(_case(outcome, int(case)) for case in rows),
        deciding=int(np.flatnonzero(rows == leading)[0]) if leading >= 0 else None,
        ventilation=_ventilation(tables, row) if row >= 0 else None,
        figures=_figures(tables, room, row) if row >= 0 else {},
        judgements=tuple(outcome.judgements[position]),
        turns_at=None if np.isnat(turn) else _EPOCH + timedelta(microseconds=int(turn.astype(int))),
    )


def _records_read(room: RoomValues) -> Iterator[Reference]:
    yield from (room.record, room.site, room.basis.record)
    yield from room.basis.derived_from
    if room.purge_fluid is not None:
        yield room.purge_fluid.record
    for vessel in room.vessels:
        yield from (vessel.record, vessel.fluid.record)
    yield from (unit.record for unit in room.units)
    yield from (detector.record for detector in room.detectors)


def _assumed(tables: Tables, row: int) -> Iterator[Assumed]:
    assumed = tables.assumed
    for place in np.flatnonzero(assumed.room == row):
        assumption = ASSUMPTIONS[int(assumed.code[place])]
        yield Assumed(
            record=assumed_record(tables, int(place)),
            field=assumption.field,
            value=assumed.value[place],
            reason=assumption.reason,
            source=assumption.source,
            matters=bool(assumed.matters[place]),
            decides=bool(tables.decides[place]),
        )


def _case(outcome: _Outcome, row: int) -> Case:
    tables = outcome.tables
    table, results, guards = tables.cases.table, tables.cases.results, tables.cases.guards
    release = RELEASES[int(table.release[row])]
    required = number(float(results.required[row]) * SECONDS_PER_HOUR)
    return Case(
        release=release.slug,
        airflow=AIRFLOWS[int(table.airflow[row])],
        hazard=HAZARDS[int(table.hazard[row])].slug,
        counts=bool(table.counts[row]),
        fluids=tuple(fluids_of(tables, row)),
        vessels=tuple(vessels_of(tables, row)),
        oxygen_pct=_whole(100.0 * float(results.oxygen[row])),
        oxygen_kpa=_whole(float(results.oxygen_pressure[row]) / 1000.0),
        at_s=_whole(float(results.at[row])),
        to_deficient_s=number(float(results.to_marks[row, 0])),
        to_danger_s=number(float(results.to_marks[row, 1])),
        to_critical_s=number(float(results.to_marks[row, 2])),
        recovered_s=number(float(results.recovered[row])),
        gas_m3=_whole(float(results.gas[row])),
        required_m3_h=required,
        required_reason=_NO_FAN if release.at_once else None,
        restore_m3_h=number(float(results.restore[row]) * SECONDS_PER_HOUR),
        alarm_s=number(float(guards.alarm[row])),
        margin_s=number(float(guards.margin[row])),
        mark=int(results.mark[row]),
        without_margins=_without_margins(outcome.without, row),
        method=release.method,
    )


def _without_margins(without: Evaluation, row: int) -> dict[str, float | None]:
    """Give the same case with every stacked factor set to 1; its rows are those of the cases."""
    results = without.results
    return {
        "oxygen_pct": number(100.0 * float(results.oxygen[row])),
        "oxygen_kpa": number(float(results.oxygen_pressure[row]) / 1000.0),
        "gas_m3": number(float(results.gas[row])),
        "net_volume_m3": number(float(without.table.volume[row])),
        "recovered_s": number(float(results.recovered[row])),
        "required_m3_h": number(float(results.required[row]) * SECONDS_PER_HOUR),
        "restore_m3_h": number(float(results.restore[row]) * SECONDS_PER_HOUR),
    }


def _whole(value: float) -> float:
    answered = number(value)
    if answered is None:
        raise ValueError("A number that every case has is not a number.")
    return answered


def _ventilation(tables: Tables, row: int) -> Ventilation:
    table, results = tables.cases.table, tables.cases.results
    measured = AIRFLOWS.index(AS_MEASURED)
    moved = float(table.air.moved[measured, row]) * SECONDS_PER_HOUR
    credited = SECONDS_PER_HOUR * max(
        float(table.air.supply[measured, row]), float(table.air.exhaust[measured, row])
    )
    of_room = (table.room == row) & (table.airflow == measured)
    boils = of_room & (table.release == _release(BOIL_OFF))
    required = _largest(results.required * SECONDS_PER_HOUR, boils)
    decides = _deciding_case(tables, boils, required)
    return Ventilation(
        outdoor_air_m3_h=_whole(moved),
        credited_m3_h=_whole(credited),
        air_changes_per_h=_whole(moved / float(table.conditions.volume[row])),
        sustained_release_m3_h=_whole(
            float(table.rates[boils, 0].max(initial=0.0)) * SECONDS_PER_HOUR
        ),
        required_m3_h=required,
        shortfall_m3_h=None if required is None else _whole(max(required - moved, 0.0)),
        restore_m3_h=_largest(results.restore * SECONDS_PER_HOUR, of_room & table.counts),
        deciding_case=decides,
    )


def _release(slug: str) -> int:
    return [release.slug for release in RELEASES].index(slug)


def _largest(values: np.ndarray, rows: Mask) -> float | None:
    chosen = values[rows]
    chosen = chosen[np.isfinite(chosen)]
    return number(float(chosen.max())) if chosen.size else None


def _deciding_case(tables: Tables, rows: Mask, required: float | None) -> str | None:
    if required is None:
        return None
    table = tables.cases.table
    row = int(np.flatnonzero(rows)[0])
    return f"{RELEASES[int(table.release[row])].slug}/{AIRFLOWS[int(table.airflow[row])]}"


def _figures(tables: Tables, room: RoomValues, row: int) -> dict[str, float | str | None]:
    """Give what the numbers rest on besides the records, and both readings of the contents."""
    table = tables.cases.table
    conditions, stock = table.conditions, table.stock
    here = table.given.vessels.room == row
    low, high = conditions.low_marks[row], conditions.high_marks[row]
    figures = {
        "pressure_kpa_abs": float(conditions.pressure[row]) / 1000.0,
        "temperature_c": float(conditions.temperature[row]) - ZERO_CELSIUS,
        "net_volume_m3": float(conditions.volume[row]),
        "oxygen_deficient_pct": 100.0 * float(low[0]),
        "oxygen_danger_pct": 100.0 * float(low[1]),
        "oxygen_critical_pct": 100.0 * float(low[2]),
        "oxygen_enriched_pct": 100.0 * float(high[0]),
        "way_out_m": float(conditions.way_out[row]),
        "natural_air_m3_h": float(conditions.natural_flow[row]) * SECONDS_PER_HOUR,
        "gas_at_capacity_m3": float((stock.full_mass * stock.gas_per_mass)[here].sum()),
        "gas_as_recorded_m3": float((stock.recorded_mass * stock.gas_per_mass)[here].sum()),
    }
    return {name: number(value) for name, value in figures.items()} | {
        "contents": room.basis.values["contents"]
    }
