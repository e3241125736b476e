"""Makers of rules: what most rules are but for a column, a limit and words."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.audit.columns import Moments
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables, record_of
from service.audit.rules.words import as_record, moment_text, number
from service.physics.arrays import Floats, Integers, Mask

Masked = Callable[[Tables], Mask]
Measured = Callable[[Tables], Floats]
Dated = Callable[[Tables], Moments]
Graded = Callable[[Tables], Integers]  # index in SEVERITIES of each row


def never(size: int) -> Moments:
    """Not-a-time for each row: answers that do not change by themselves."""
    return np.full(size, np.datetime64("NaT", "us"))


@dataclass(frozen=True, slots=True)
class Threshold:
    """A measure that must stay on the right side of a limit."""

    slug: str
    subject: Subject
    worse_is: Direction
    applies: Masked
    measure: Measured
    limit: Measured
    consequence: int | Graded
    words: Callable[[Tables, int, float, float], tuple[str, str, Mapping[str, Any]]]
    method: str
    source: str
    gas: str | None = None

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where the measure is not on the right side; not-a-number is not."""
        measure, limit = self.measure(tables), self.limit(tables)
        inside = measure >= limit if self.worse_is is Direction.LOWER else measure <= limit
        return Judged(
            broken=self.applies(tables) & ~inside,
            measure=measure,
            limit=limit,
            consequence=_graded(self.consequence, tables, measure.size),
            turns_at=never(measure.size),
        )

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say it in the words of the rule."""
        row = rows[0]
        measure, limit = float(judged.measure[row]), float(judged.limit[row])
        statement, remedy, evidence = self.words(tables, row, measure, limit)
        record = record_of(tables, self.subject, row)
        found = {"record": as_record(record), "measure": number(measure), "limit": number(limit)}
        return Said(statement, remedy, {**found, **evidence})


@dataclass(frozen=True, slots=True)
class Missing:
    """Something that ought to be there."""

    slug: str
    subject: Subject
    missing: Masked
    consequence: int | Graded
    words: Callable[[Tables, int], tuple[str, str, Mapping[str, Any]]]
    method: str
    source: str
    gas: str | None = None
    worse_is: Direction = Direction.HIGHER

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where it is missing; there is nothing to measure."""
        broken = self.missing(tables)
        none = np.full(broken.size, np.nan)
        consequence = _graded(self.consequence, tables, broken.size)
        return Judged(broken, none, none, consequence, never(broken.size))

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say it in the words of the rule."""
        statement, remedy, evidence = self.words(tables, rows[0])
        record = record_of(tables, self.subject, rows[0])
        return Said(statement, remedy, {"record": as_record(record), **evidence})


@dataclass(frozen=True, slots=True)
class Overdue:
    """Something that had to be done by a moment; never done is overdue too.

    It has no measure: days overdue would change with every look, and an answer must not change
    between two turns.
    """

    slug: str
    subject: Subject
    applies: Masked
    due: Dated
    overdue: str  # "Calibration of {tag} has been overdue since {due}."
    never_done: str
    remedy: str
    consequence: int
    method: str
    source: str
    gas: str | None = None
    worse_is: Direction = Direction.HIGHER

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken from the due moment on; it turns at that moment."""
        due, applies = self.due(tables), self.applies(tables)
        in_date = due > at
        none = np.full(due.size, np.nan)
        return Judged(
            broken=applies & ~in_date,
            measure=none,
            limit=none,
            consequence=np.full(due.size, self.consequence),
            turns_at=np.where(applies & in_date, due, never(due.size)),
        )

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Name what is overdue, and since when."""
        record, due = record_of(tables, self.subject, rows[0]), self.due(tables)[rows[0]]
        done = not np.isnat(due)
        statement = self.overdue if done else self.never_done
        since = moment_text(due) if done else None
        evidence = {"record": as_record(record), "due": since}
        return Said(statement.format(tag=record.tag, due=since), self.remedy, evidence)


def _graded(consequence: int | Graded, tables: Tables, size: int) -> Integers:
    return np.full(size, consequence) if isinstance(consequence, int) else consequence(tables)
