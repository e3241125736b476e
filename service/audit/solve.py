"""A table of cases becomes numbers: by way of physics, rounded once."""

from dataclasses import dataclass

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, PROVEN
from service.audit.cases import CLEAN_AIR, CaseTable
from service.audit.hazards import HAZARDS
from service.audit.releases import BOIL_OFF, RELEASES
from service.physics.ambient import oxygen_partial_pressure
from service.physics.arrays import Floats, Integers, Mask, rounded
from service.physics.course import Course
from service.physics.mixing import (
    released_fraction_after_displacement,
    released_fraction_after_mixing,
)
from service.physics.ventilation import (
    course,
    flow_to_restore,
    oxygen_from_fraction,
    smallest_exhaust_to_hold_course,
    smallest_supply_to_hold_course,
)

_SIGNS = np.array([hazard.sign for hazard in HAZARDS])


@dataclass(frozen=True, slots=True)
class Results:
    """What became of each case; not-a-number where there is no such number."""

    level: Floats  # worst level of the hazard, 0 in clean air [1]
    oxygen: Floats  # lowest or highest, as a fraction [1]
    oxygen_pressure: Floats  # [Pa]
    at: Floats  # [s]
    to_marks: Floats  # (rows, 3) [s]
    recovered: Floats  # back inside the first mark [s]
    gas: Floats  # released over the case [m3]
    mark: Integers  # worst mark crossed, 0 to 3
    nearness: Floats  # way from clean air to the first mark that was gone [1]
    required: Floats  # outdoor air that a fan must move to hold the room's boil-off [m3/s]
    restore: Floats  # outdoor air that a fan must move to bring the room back in time [m3/s]
    course: Course  # of the level, unrounded


def solve(table: CaseTable) -> Results:
    """Solve every case at once."""
    with np.errstate(all="raise", under="ignore"):
        runs, start = _courses(table)
        level = np.maximum(runs.highest, start)
        oxygen = rounded(oxygen_from_fraction(_SIGNS[table.hazard] * level))
        pressure = table.conditions.pressure[table.room]
        mark = _worst_mark(table, oxygen)
        required = _required(table)
        limit = table.marks[:, 0]
        return Results(
            level=rounded(level),
            oxygen=oxygen,
            oxygen_pressure=rounded(oxygen_partial_pressure(oxygen, pressure)),
            at=rounded(np.where(level > runs.highest, 0.0, runs.at)),
            to_marks=_times_to_marks(table, runs, start, mark),
            recovered=rounded(np.where(mark > 0, runs.back_below(limit), np.nan)),
            gas=rounded(table.instant + (table.rates * table.durations).sum(axis=1)),
            mark=mark,
            nearness=rounded(level / limit),
            required=rounded(np.where(table.at_once, np.nan, required[table.room])),
            restore=rounded(_restore(table, level)),
            course=runs,
        )


def _courses(table: CaseTable) -> tuple[Course, Floats]:
    """Solve what starts from clean air first, and then what starts from there."""
    start = np.zeros(table.size)
    waits = table.starts_from != CLEAN_AIR
    if waits.any():
        bases = np.unique(table.starts_from[waits])
        highest = np.zeros(table.size)
        highest[bases] = _run(table, bases, start[bases]).highest
        start[waits] = highest[table.starts_from[waits]]
    return _run(table, np.arange(table.size), start), start


def _run(table: CaseTable, rows: Integers, start: Floats) -> Course:
    return course(
        table.durations[rows],
        release=table.rates[rows],
        dilution=table.rates_diluting[rows],
        supply=table.supply[rows, np.newaxis],
        exhaust=table.exhaust[rows, np.newaxis],
        volume=table.volume[rows],
        start=_after_instant(table, rows, start),
    )


def _after_instant(table: CaseTable, rows: Integers, start: Floats) -> Floats:
    gas, diluting, volume = table.instant[rows], table.instant_diluting[rows], table.volume[rows]
    pushed = released_fraction_after_displacement(
        gas, volume, fraction_before=start, dilution_volume=diluting
    )
    mixed = released_fraction_after_mixing(
        gas, volume, fraction_before=start, dilution_volume=diluting
    )
    displaces = table.given.bases.by_displacement[table.room[rows]]
    after = np.where(displaces, pushed, mixed)
    return np.where(gas > 0.0, after, start)


def _worst_mark(table: CaseTable, oxygen: Floats) -> Integers:
    """Number of marks crossed; not-a-number crosses all."""
    sign = _SIGNS[table.hazard][:, np.newaxis]
    inside = sign * oxygen[:, np.newaxis] >= sign * rounded(table.oxygen_marks)
    crossed: Integers = (~inside).sum(axis=1)
    return crossed


def _times_to_marks(table: CaseTable, runs: Course, start: Floats, mark: Integers) -> Floats:
    times = []
    for place in range(3):
        level = table.marks[:, place]
        reached = np.where(start >= level, 0.0, runs.first_time_above(level))
        times.append(np.where(mark > place, reached, np.nan))
    return rounded(np.stack(times, axis=1))


def _restore(table: CaseTable, level: Floats) -> Floats:
    factor = table.air.mixing_factor[AIRFLOWS.index(AS_MEASURED), table.room]
    within = table.given.bases.restore[table.room]
    counted = flow_to_restore(level, table.marks[:, 0], volume=table.volume, within=within)
    moved: Floats = counted * factor
    return moved


def _required(table: CaseTable) -> Floats:
    """Smallest flow of a fan that holds a room's boil-off, for every hazard; 0 without any.

    Where a room has both supply and exhaust, the larger is the one that is asked for, as if the
    other were not there: the cautious side.
    """
    boils = RELEASES[0].slug == BOIL_OFF and table.release == 0
    rows = np.flatnonzero(boils & (table.airflow == AIRFLOWS.index(AS_MEASURED)))
    blows = table.supply[rows] >= table.exhaust[rows]
    blows &= table.supply[rows] > 0.0
    counted = np.zeros(rows.size)
    for chosen, smallest in (
        (blows, smallest_supply_to_hold_course),
        (~blows, smallest_exhaust_to_hold_course),
    ):
        some = rows[chosen]
        counted[chosen] = smallest(
            table.marks[some, 0],
            durations=table.durations[some],
            release=table.rates[some],
            dilution=table.rates_diluting[some],
            volume=table.volume[some],
        )
    moved = counted * table.air.mixing_factor[AIRFLOWS.index(AS_MEASURED), table.room[rows]]
    required = np.zeros(table.given.count)
    np.maximum.at(required, table.room[rows], moved)
    return required


def proven_to_hold(table: CaseTable, results: Results) -> Mask:
    """Tell which rooms' boil-off stays inside every first mark with the air that is proven."""
    proven = table.airflow == AIRFLOWS.index(PROVEN)
    holds = np.ones(table.given.count, dtype=np.bool_)
    holds[table.room[proven & (results.mark > 0)]] = False
    return holds
