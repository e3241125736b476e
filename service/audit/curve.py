"""The course of one case of a room: what it is at each moment, and when something happens."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from datetime import datetime
from typing import Final

import numpy as np

from service.audit.assessment import Case
from service.audit.cases import CaseTable
from service.audit.curve_times import times_of
from service.audit.hazards import ABOUT_OXYGEN, CLEAN, FLAMMABLE, OXYGEN_LOW, REFERENCE_LIMIT
from service.audit.inputs import Reference, RoomValues
from service.audit.judge import told_of
from service.audit.rules.rule import Tables, detector_record
from service.audit.rules.words import number
from service.audit.solve import courses, some_rows
from service.audit.told import Told
from service.physics.ambient import oxygen_partial_pressure
from service.physics.arrays import Floats, rounded
from service.physics.averages import fraction_at
from service.physics.course import Course
from service.physics.ventilation import oxygen_from_fraction

START: Final = "start"
LOWEST: Final = "lowest"
HIGHEST: Final = "highest"
MARKS: Final = ("first-mark", "second-mark", "third-mark")
ALARM: Final = "alarm"
OUT: Final = "out"
BACK: Final = "back"
FLOW: Final = "flow-changes"
END: Final = "end"

# An accident that crosses no mark is followed until so much of its way from clean air is left.
_LEFT: Final = 0.01
_THE_ROOM: Final = 0


class NoCase(LookupError):
    """A room has no case like the one asked for."""

    def __init__(self, part: str | None, there: Sequence[str]) -> None:
        super().__init__(part)
        self.part = part  # of the choice, the first that leaves nothing; None: no case at all
        self.there = tuple(there)  # what the room has of it


class NotComputed(ValueError):
    """A room has numbers that nothing can be computed from; its text says why."""


@dataclass(frozen=True, slots=True)
class Choice:
    """Which case is asked for; what is None is left open."""

    release: str | None = None
    airflow: str | None = None
    hazard: str | None = None
    gas: str | None = None
    vessel_id: str | None = None  # or that of a line
    variant: str | None = None


@dataclass(frozen=True, slots=True)
class Point:
    """The air at a moment of the course. None: no such number for this hazard."""

    at_s: float
    oxygen_pct: float
    oxygen_kpa: float
    released_pct: float | None  # the gas let go that counts, where oxygen is judged
    gas_pct: float | None  # the gas judged, where it is not oxygen
    lower_limit_pct: float | None  # share of the lower flammable limit
    events: tuple[str, ...]  # what happens at this very moment


@dataclass(frozen=True, slots=True)
class Alarm:
    """The first alarm of a case, and the detector that gives it."""

    at_s: float
    detector: Reference


@dataclass(frozen=True, slots=True)
class Curve:
    """The course of a case."""

    case: Case
    matching: int  # how many cases of the room are like the one asked for
    before: Point  # the air as the release begins
    extreme: Point  # the worst of the course, by which the case is judged
    points: tuple[Point, ...]
    alarm: Alarm | None
    out_s: float | None  # when people are out
    ends_s: float

    @property
    def extreme_name(self) -> str:
        """What the worst of the course is called."""
        return _extreme_name(self.case)


def curve_of(room: RoomValues, *, at: datetime, choice: Choice, points: int) -> Curve:
    """Compute the course of a case of a room at a moment.

    Parameters
    ----------
    room : RoomValues
        The room and what stands in it.
    at : datetime
        The moment it is assessed at.
    choice : Choice
        What is asked for. Of several cases like it, the one that the standing rests on is taken,
        else the nearest to a mark of those that count, else of those that are shown.
    points : int
        How many points at most; 2 or more.

    Raises
    ------
    NoCase
        The room has no such case.
    NotComputed
        The room cannot be computed.
    """
    told = told_of([room], at=at)
    why = told.tables.failed[_THE_ROOM]
    if why is not None:
        raise NotComputed(why)
    cases = told.cases(_THE_ROOM)
    matching = _matching(cases, choice)
    place = _preferred(told, matching, cases)
    row = int(told.rows(_THE_ROOM)[place])
    return _followed(_Traced.of(told, row, cases[place]), len(matching), points)


def _matching(cases: Sequence[Case], choice: Choice) -> list[int]:
    """Places of the cases that are like the one asked for."""
    left = list(range(len(cases)))
    if not left:
        raise NoCase(None, ())
    for part in fields(choice):
        wanted = getattr(choice, part.name)
        if wanted is None:
            continue
        there = dict.fromkeys(word for place in left for word in _words(cases[place], part.name))
        left = [place for place in left if wanted in _words(cases[place], part.name)]
        if not left:
            raise NoCase(part.name, tuple(there))
    return left


def _words(case: Case, part: str) -> tuple[str, ...]:
    if part == "vessel_id":
        return tuple(record.id for record in (*case.vessels, *case.lines))
    return (getattr(case, part),)


def _preferred(told: Told, matching: Sequence[int], cases: Sequence[Case]) -> int:
    near = told.tables.cases.results.nearness[told.rows(_THE_ROOM)]
    deciding = told.deciding(_THE_ROOM)
    return max(
        matching,
        key=lambda place: (place == deciding, cases[place].counts, float(near[place]), -place),
    )


@dataclass(frozen=True, slots=True)
class _Traced:
    """One row of the solved table, to be followed through time."""

    tables: Tables
    row: int
    case: Case
    run: Course  # of this row alone, unrounded
    before: float  # level that the release begins at

    @classmethod
    def of(cls, told: Told, row: int, case: Case) -> _Traced:
        """Take a row out of what is told."""
        solved = told.tables.cases
        run = some_rows(solved.results.course, np.array([row]))
        return cls(told.tables, row, case, run, float(courses(solved.table)[1][row]))

    @property
    def table(self) -> CaseTable:
        """The table that it is a row of."""
        return self.tables.cases.table

    @property
    def hazard(self) -> int:
        """Row of HAZARDS."""
        return int(self.table.hazard[self.row])


def _followed(traced: _Traced, matching: int, most: int) -> Curve:
    """Follow a case until it is back, or for as long as it is followed at all."""
    alarm = _alarm(traced)
    out = number(float(traced.tables.cases.guards.out[traced.row]))
    happens = _events(traced.case, alarm, out)
    end = _end(traced, [at for at, _ in happens])
    happens = [*((at, what) for at, what in happens if at <= end), (end, END)]
    times = times_of(traced.run, end, [at for at, _ in happens], most)
    worst = np.array([traced.case.at_s])
    return Curve(
        case=traced.case,
        matching=matching,
        before=_points(traced, np.zeros(1), np.array([traced.before]), ())[0],
        extreme=_points(traced, worst, _levels(traced, worst), ())[0],
        points=_points(traced, times, _levels(traced, times), [*happens, *_flow_changes(traced)]),
        alarm=alarm,
        out_s=out,
        ends_s=end,
    )


def _events(case: Case, alarm: Alarm | None, out: float | None) -> list[tuple[float, str]]:
    """What happens and when, the most telling first: where points are few, these are kept."""
    found = [
        (0.0, START),
        (case.at_s, _extreme_name(case)),
        *((mark.at_s, MARKS[mark.place - 1]) for mark in case.marks),
        (case.recovered_s, BACK),
        (None if alarm is None else alarm.at_s, ALARM),
        (out, OUT),
    ]
    return [(at, what) for at, what in found if at is not None]


def _extreme_name(case: Case) -> str:
    return LOWEST if case.hazard == OXYGEN_LOW else HIGHEST


def _flow_changes(traced: _Traced) -> list[tuple[float, str]]:
    """Ends of segments: something is empty, filled or shut, or the air is boosted."""
    return [(at, FLOW) for at in np.unique(rounded(traced.run.times[0, 1:-1])).tolist()]


def _alarm(traced: _Traced) -> Alarm | None:
    alarms = traced.tables.cases.guards.alarms
    rows = np.flatnonzero((alarms.case == traced.row) & ~np.isnan(alarms.time))
    if not rows.size:
        return None
    first = rows[np.argmin(alarms.time[rows])]
    return Alarm(
        at_s=float(rounded(alarms.time[first])),
        detector=detector_record(traced.tables, int(alarms.detector[first])),
    )


def _end(traced: _Traced, happens: Sequence[float]) -> float:
    """When the course ends: back inside the first mark, and nothing more to happen.

    Where no mark is crossed there is nothing to come back from: what goes on without an accident
    is followed for the sustained time, an accident until next to nothing of it is left.
    """
    longest = float(rounded(traced.run.times[0, -1]))
    back = traced.case.recovered_s
    if traced.case.mark == 0 and not bool(traced.table.sustained[traced.row]):
        clean = float(CLEAN[traced.hazard])
        left = clean + _LEFT * (float(traced.run.highest[0]) - clean)
        back = number(float(rounded(traced.run.back_below(left)[0])))
    if not back:
        return longest
    return min(max(back, *happens), longest)


def _levels(traced: _Traced, times: Floats) -> Floats:
    """Level at each time; at ends of segments, and at its worst, the very numbers judged by."""
    run = traced.run
    levels: Floats = fraction_at(run, times[np.newaxis, :])[0]
    joints = rounded(run.times[0])
    place = np.minimum(np.searchsorted(times, joints), times.size - 1)
    there = times[place] == joints
    levels[place[there]] = run.ends[0, there]
    levels[times == 0.0] = max(traced.before, float(run.ends[0, 0]))
    levels[times == traced.case.at_s] = max(traced.before, float(run.highest[0]))
    return levels


def _points(
    traced: _Traced, times: Floats, levels: Floats, happens: Sequence[tuple[float, str]]
) -> tuple[Point, ...]:
    """The air at each time, in the units of answers and rounded as an assessment is."""
    table, row, hazard = traced.table, traced.row, traced.hazard
    taken = float(table.oxygen_taken[row])
    oxygen = rounded(np.clip(oxygen_from_fraction(taken * levels), 0.0, 1.0))
    pressure = float(table.conditions.pressure[table.room[row]])
    kilopascal = rounded(rounded(oxygen_partial_pressure(oxygen, pressure)) / 1000.0)
    level, none = rounded(levels), np.full(levels.shape, np.nan)
    percent = 100.0 * float(table.gas_by_level[row])
    of_all = rounded(percent * level)
    released, gas = (of_all, none) if ABOUT_OXYGEN[hazard] else (none, of_all)
    burns = traced.case.hazard == FLAMMABLE
    share = rounded(100.0 * level / REFERENCE_LIMIT) if burns else none
    at: dict[float, list[str]] = {}
    for time, what in happens:
        at.setdefault(time, []).append(what)
    return tuple(
        Point(
            time,
            percent_oxygen,
            kpa,
            number(of_released),
            number(of_gas),
            number(of_limit),
            tuple(at.get(time, ())),
        )
        for time, percent_oxygen, kpa, of_released, of_gas, of_limit in zip(
            times.tolist(),
            rounded(100.0 * oxygen).tolist(),
            kilopascal.tolist(),
            released.tolist(),
            gas.tolist(),
            share.tolist(),
            strict=True,
        )
    )
