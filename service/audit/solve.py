"""A table of cases becomes numbers: by way of physics, rounded once."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, PROVEN
from service.audit.cases import CLEAN_AIR, CaseTable
from service.audit.columns import NITROUS_OXIDE
from service.audit.hazards import (
    ABOUT_OXYGEN,
    CLEAN,
    HAS_MEANS,
    HAZARDS,
    MEAN_8H,
    MEAN_15MIN,
    REACHED,
    SIGN,
    WINDOWS,
)
from service.physics.ambient import oxygen_partial_pressure
from service.physics.arrays import Floats, Integers, Mask, rounded
from service.physics.averages import highest_mean
from service.physics.course import Course
from service.physics.mixing import (
    released_fraction_after_displacement,
    released_fraction_after_mixing,
)
from service.physics.roots import smallest_enough
from service.physics.ventilation import (
    course,
    flow_to_restore,
    oxygen_from_fraction,
    smallest_exhaust_to_hold_course,
    smallest_supply_to_hold_course,
)

_AS_MEASURED: Final = AIRFLOWS.index(AS_MEASURED)
_NITROUS_OXIDE: Final = [hazard.gas for hazard in HAZARDS].index(NITROUS_OXIDE)

# A mark that is not there, as a level that no course reaches.
_BEYOND_ALL: Final = 1e9


@dataclass(frozen=True, slots=True)
class Results:
    """What became of each case; not-a-number where there is no such number."""

    level: Floats  # worst level of the hazard [1]
    means: Floats  # (rows, 2) highest mean level of 15 min and of 8 h [1]
    oxygen: Floats  # lowest or highest, as a fraction [1]
    oxygen_pressure: Floats  # [Pa]
    at: Floats  # [s]
    crossed: Mask  # (rows, 3)
    to_marks: Floats  # (rows, 3) [s]
    recovered: Floats  # back inside the first mark [s]
    gas: Floats  # released over the case [m3]
    mark: Integers  # worst mark crossed, 0 to 3
    nearness: Floats  # way from clean air to the first mark that was gone [1]
    required: Floats  # outdoor air that a fan must move to hold the case [m3/s]
    clearing: Floats  # air that must count to bring the room back in time [m3/s]
    restore: Floats  # outdoor air that a fan must move to bring the room back in time [m3/s]
    course: Course  # of the level, unrounded

    def measured(self, on: Integers) -> Floats:
        """The number that each mark is set against, (rows, marks)."""
        all_three = np.column_stack([self.level, self.means])
        found: Floats = np.take_along_axis(all_three, on, axis=1)
        return found


def solve(table: CaseTable) -> Results:
    """Solve every case at once."""
    with np.errstate(all="raise", under="ignore"):
        runs, start = courses(table)
        recovered, clearing = _back(table, runs, np.maximum(runs.highest, start))
        return results_of(
            table,
            runs,
            start,
            gas=table.instant + (table.rates * table.durations).sum(axis=1),
            recovered=recovered,
            clearing=clearing,
            required=_required(table, start),
        )


def results_of(
    table: CaseTable,
    runs: Course,
    start: Floats,
    *,
    gas: Floats,
    recovered: Floats,
    clearing: Floats,
    required: Floats,
) -> Results:
    """Set the courses of cases against their marks."""
    with np.errstate(all="raise", under="ignore"):
        level = np.maximum(runs.highest, start)
        means = _means(table, runs)
        # A room full of gas may be so by a rounding more; not-a-number passes.
        oxygen = rounded(np.clip(oxygen_from_fraction(table.oxygen_taken * level), 0.0, 1.0))
        measured = np.take_along_axis(np.column_stack([level, means]), table.measured_on, axis=1)
        crossed = _crossed(table, measured, oxygen)
        mark = np.where(crossed.any(axis=1), 3 - np.argmax(crossed[:, ::-1], axis=1), 0)
        limit = table.first_mark
        pressure = table.conditions.pressure[table.room]
        clean = CLEAN[table.hazard]
        return Results(
            level=rounded(level),
            means=rounded(means),
            oxygen=oxygen,
            oxygen_pressure=rounded(oxygen_partial_pressure(oxygen, pressure)),
            at=rounded(np.where(level > runs.highest, 0.0, runs.at)),
            crossed=crossed,
            to_marks=_times_to_marks(table, runs, start, crossed),
            recovered=rounded(np.where(mark > 0, recovered, np.nan)),
            gas=rounded(gas),
            mark=mark,
            nearness=rounded((_of_first(table, measured) - clean) / (limit - clean)),
            required=required,
            clearing=rounded(clearing),
            restore=rounded(clearing * table.air.mixing_factor[_AS_MEASURED, table.room]),
            course=runs,
        )


def courses(table: CaseTable) -> tuple[Course, Floats]:
    """Solve what starts from clean air first, and then what starts from there."""
    every = np.arange(table.size)
    start = starts(table, every)
    return _run(table, every, start), start


def starts(table: CaseTable, rows: Integers) -> Floats:
    """Level that some cases start from: of clean air, or the worst of what goes on before."""
    start: Floats = CLEAN[table.hazard[rows]]
    base = table.starts_from[rows]
    waits = base != CLEAN_AIR
    if waits.any():
        bases, place = np.unique(base[waits], return_inverse=True)
        highest = _run(table, bases, CLEAN[table.hazard[bases]]).highest
        start[waits] = highest[place.reshape(-1)]
    return start


def _run(table: CaseTable, rows: Integers, start: Floats) -> Course:
    return course(
        table.durations[rows],
        release=table.rates[rows],
        dilution=table.rates_level[rows],
        supply=table.supply[rows],
        exhaust=table.exhaust[rows],
        volume=table.volume[rows],
        start=after_instant(table, rows, start),
    )


def after_instant(table: CaseTable, rows: Integers, start: Floats) -> Floats:
    """Level of some cases once what they let go at once is out."""
    gas, level, volume = table.instant[rows], table.instant_level[rows], table.volume[rows]
    pushed = released_fraction_after_displacement(
        gas, volume, fraction_before=start, dilution_volume=level
    )
    mixed = released_fraction_after_mixing(
        gas, volume, fraction_before=start, dilution_volume=level
    )
    displaces = table.given.bases.by_displacement[table.room[rows]]
    after = np.where(displaces, pushed, mixed)
    return np.where(gas > 0.0, after, start)


def some_rows(run: Course, rows: Integers) -> Course:
    """The course of some rows alone."""
    return Course(run.times[rows], run.ends[rows], run.steady[rows], run.rates[rows])


def _means(table: CaseTable, runs: Course) -> Floats:
    """Highest means of 15 min and of 8 h, for the hazards that have such limits."""
    means = np.full((table.size, 2), np.nan)
    rows = np.flatnonzero(HAS_MEANS[table.hazard])
    if rows.size:
        run = some_rows(runs, rows)
        for place, measure in enumerate((MEAN_15MIN, MEAN_8H)):
            means[rows, place] = highest_mean(run, WINDOWS[measure])
    return means


def _crossed(table: CaseTable, measured: Floats, oxygen: Floats) -> Mask:
    """Marks that each case is beyond; not-a-number is beyond all."""
    sign = SIGN[table.hazard][:, np.newaxis]
    there = np.where(np.isfinite(table.marks), table.marks, 0.0)
    limits = rounded(oxygen_from_fraction(sign * there))
    by_oxygen = sign * oxygen[:, np.newaxis] >= sign * limits
    value, mark = rounded(measured), table.marks
    by_gas = np.where(REACHED[table.hazard], value < mark, value <= mark)
    inside = np.where(ABOUT_OXYGEN[table.hazard][:, np.newaxis], by_oxygen, by_gas)
    return ~inside


def _times_to_marks(table: CaseTable, runs: Course, start: Floats, crossed: Mask) -> Floats:
    """Time to each mark that is crossed.

    A mean comes to its limit some time after the fraction has passed it: that earlier moment is
    told, the cautious side.
    """
    times = []
    for place in range(3):
        level = np.minimum(table.marks[:, place], _BEYOND_ALL)
        reached = np.where(start >= level, 0.0, runs.first_time_above(level))
        times.append(np.where(crossed[:, place], reached, np.nan))
    return rounded(np.stack(times, axis=1))


def _of_first(table: CaseTable, measured: Floats) -> Floats:
    """The number that the first mark there is of each case is set against."""
    first: Floats = measured[np.arange(table.size), table.first]
    return first


def _back(table: CaseTable, runs: Course, level: Floats) -> tuple[Floats, Floats]:
    """When each case is back inside its first mark, and the flow that brings it back in time.

    Gas that gathers in a zone is worst there, but the same air has more to clear once it is mixed
    through the room: whichever takes longer.
    """
    back = runs.back_below(table.first_mark)
    clearing = clearing_flow(table, np.arange(table.size), level)
    whole = table.conditions.volume[table.room]
    rows = np.flatnonzero(table.volume < whole)
    if rows.size:
        mixed = replace(table, volume=whole)
        start = starts(mixed, rows)
        run = _run(mixed, rows, start)
        highest = np.maximum(run.highest, start)
        back[rows] = np.maximum(back[rows], run.back_below(table.first_mark[rows]))
        clearing[rows] = np.maximum(clearing[rows], clearing_flow(mixed, rows, highest))
    return back, clearing


def clearing_flow(table: CaseTable, rows: Integers, level: Floats) -> Floats:
    """Air that must count to bring some cases back inside their first mark in time."""
    within = table.given.bases.restore[table.room[rows]]
    return flow_to_restore(level, table.first_mark[rows], volume=table.volume[rows], within=within)


def _required(table: CaseTable, start: Floats) -> Floats:
    """Smallest flow of a fan that holds each case that lasts inside its first mark.

    Where a room has both supply and exhaust, the larger is the one that is asked for, as if the
    other were not there: the cautious side. Not-a-number for a case at once, and for one that
    starts beyond its mark.
    """
    asked = (table.measured == np.arange(table.size)) & ~table.at_once
    required = _to_hold(table, start, np.flatnonzero(asked))
    # A short burst may pass a later mark, of a shorter mean, and not the first.
    for place in (1, 2):
        further = HAS_MEANS[table.hazard] & np.isfinite(table.marks[:, place])
        rows = np.flatnonzero(asked & further & (table.first < place))
        if rows.size:
            mark = np.where(further, table.marks[:, place], table.first_mark)
            moved = replace(table, first=np.where(further, place, table.first), first_mark=mark)
            required[rows] = np.maximum(required[rows], _to_hold(moved, start, rows)[rows])
    moved_air = required * table.air.mixing_factor[_AS_MEASURED, table.room]
    return rounded(moved_air[table.measured])


def _to_hold(table: CaseTable, start: Floats, rows: Integers) -> Floats:
    """Smallest flow that counts and keeps some cases inside the mark that is their first."""
    required = np.full(table.size, np.nan)
    on = table.measured_on[rows, table.first[rows]]
    supply, exhaust = table.supply[rows, 0], table.exhaust[rows, 0]
    blows = (supply >= exhaust) & (supply > 0.0)
    for by_supply in (True, False):
        some = rows[blows == by_supply]
        if some.size:
            required[some] = _smallest(table, some, start[some], by_supply=by_supply)
    for window in WINDOWS:
        for by_supply in (True, False):
            some = rows[(on == window) & (blows == by_supply)]
            some = some[np.isfinite(required[some])]
            if some.size:
                required[some] = _smallest_for_mean(
                    table, some, start[some], required[some], WINDOWS[window], by_supply=by_supply
                )
    return required


def _smallest(table: CaseTable, rows: Integers, start: Floats, *, by_supply: bool) -> Floats:
    """Smallest flow that keeps the fraction itself at the first mark or below."""
    smallest = smallest_supply_to_hold_course if by_supply else smallest_exhaust_to_hold_course
    return smallest(
        table.first_mark[rows],
        durations=table.durations[rows],
        release=table.rates[rows],
        dilution=table.rates_level[rows],
        volume=table.volume[rows],
        start=start,
    )


def _smallest_for_mean(
    table: CaseTable,
    rows: Integers,
    start: Floats,
    enough: Floats,
    window: float,
    *,
    by_supply: bool,
) -> Floats:
    """Smallest flow that keeps the highest mean of a window at the first mark or below."""
    limit = table.first_mark[rows]

    def excess(chosen: Integers, flow: Floats) -> Floats:
        some = rows[chosen]
        blown = flow[:, np.newaxis] if by_supply else np.zeros((some.size, 1))
        drawn = np.zeros((some.size, 1)) if by_supply else flow[:, np.newaxis]
        run = course(
            table.durations[some],
            release=table.rates[some],
            dilution=table.rates_level[some],
            supply=blown,
            exhaust=drawn,
            volume=table.volume[some],
            start=start[chosen],
        )
        above: Floats = highest_mean(run, window) - limit[chosen]
        return above

    return smallest_enough(excess, enough)


def proven_to_hold(table: CaseTable, results: Results) -> Mask:
    """Tell which rooms' sustained releases stay inside every first mark with proven air.

    The mean of a working day is asked of it whether or not anybody works there: that a room is
    recorded empty must not make another release milder.
    """
    proven = table.airflow == AIRFLOWS.index(PROVEN)
    beyond = results.mark > 0
    narcotic = table.hazard == _NITROUS_OXIDE
    beyond |= narcotic & (results.means[:, 1] > table.given.bases.nitrous_oxide[table.room, 0])
    holds = np.ones(table.given.count, dtype=np.bool_)
    holds[table.room[proven & beyond]] = False
    return holds
