"""What a rule is, and the tables that rules look at."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Any, Final, Protocol

import numpy as np

from service.audit.assumptions import ASSUMPTIONS, Assumptions
from service.audit.columns import Moments
from service.audit.evaluation import Evaluation
from service.audit.incoming import Incoming
from service.audit.inputs import Reference, RoomValues
from service.audit.layering import Layering
from service.audit.networks import Networks
from service.audit.rules.case_records import CaseRecords
from service.physics.arrays import Floats, Integers, Mask

_NO_ROWS: Final = np.empty(0, dtype=np.int64)


class Subject(StrEnum):
    """Which table a rule judges, row by row."""

    CASES = "cases"
    INCOMING = "incoming"  # cases of other rooms, in the room that their gas comes to
    ROOMS = "rooms"
    DETECTORS = "detectors"
    VESSELS = "vessels"
    UNITS = "ventilation-units"  # a row a unit and room that it serves
    CONTROLS = "controls"
    LINES = "supply-lines"  # a row a line and room that it can break in
    ASSUMED = "assumed"  # a row a field that was assumed
    GIVEN = "given"  # every room asked for, also those that cannot be computed


class Direction(StrEnum):
    """Which way a measure gets worse."""

    LOWER = "lower"
    HIGHER = "higher"


@dataclass(frozen=True, slots=True)
class Judged:
    """Arrays of one length, the rows of the table."""

    broken: Mask  # not-a-number is broken
    measure: Floats  # the number that getting worse is measured by; not-a-number: none
    limit: Floats
    consequence: Integers  # index in SEVERITIES
    turns_at: Moments  # next moment at which this answer changes by itself; not-a-time: never


@dataclass(frozen=True, slots=True)
class Said:
    """What is said of a broken rule."""

    statement: str
    remedy: str
    evidence: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Came:
    """The cases whose gas comes from another room, judged where it comes to."""

    rows: Incoming
    cases: Evaluation
    records: CaseRecords


@dataclass(frozen=True, slots=True)
class Tables:
    """Everything that rules look at; ``sound`` are the rooms that are rows of the cases."""

    rooms: Sequence[RoomValues]  # as asked for
    failed: Sequence[str | None]  # by the rooms as asked for
    sound: Integers  # position in rooms of each row of the columns
    cases: Evaluation
    assumed: Assumptions
    decides: Mask  # by assumption
    records: CaseRecords
    layering: Layering
    networks: Networks
    came: Came | None  # None: no room is joined to another

    def beside(self, came: Came) -> Tables:
        """The same with the cases that came from other rooms in place of the rooms' own."""
        return replace(self, cases=came.cases, records=came.records)

    def room(self, row: int) -> RoomValues:
        """The room of a row of the columns."""
        return self.rooms[int(self.sound[row])]


class Rule(Protocol):
    """What is looked for in a table, and how bad it is where it is found."""

    @property
    def slug(self) -> str:
        """Public name, never reused; the family stands before the stroke."""

    @property
    def subject(self) -> Subject:
        """The table judged."""

    @property
    def gas(self) -> str | None:
        """The gas judged."""

    @property
    def worse_is(self) -> Direction:
        """Which way the measure gets worse."""

    @property
    def method(self) -> str:
        """Slug of the method."""

    @property
    def source(self) -> str:
        """Where the limit comes from."""

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Judge every row of the table."""

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say what is wrong with one subject; the worst of its rows comes first."""


def family(rule: Rule) -> str:
    """The family of a rule."""
    return rule.slug.split("/")[0]


def rooms_of(tables: Tables, subject: Subject) -> Integers:
    """Position in the rooms asked for, for each row of a table."""
    table = tables.cases.table
    if subject is Subject.GIVEN:
        return np.arange(len(tables.rooms))
    given = table.given
    rows = {
        Subject.CASES: table.room,
        Subject.INCOMING: _NO_ROWS if tables.came is None else tables.came.rows.table.room,
        Subject.ROOMS: np.arange(given.count),
        Subject.DETECTORS: given.detectors.room,
        Subject.VESSELS: given.vessels.room,
        Subject.UNITS: given.units.room,
        Subject.CONTROLS: given.controls.room,
        Subject.LINES: given.lines.room,
        Subject.ASSUMED: tables.assumed.room,
    }[subject]
    positions: Integers = tables.sound[rows]
    return positions


def record_of(tables: Tables, subject: Subject, row: int) -> Reference:
    """The record that a finding on a row is about."""
    table = tables.cases.table
    if subject is Subject.GIVEN:
        return tables.rooms[row].record
    if subject in _EQUIPMENT:
        return _EQUIPMENT[subject](tables, row)
    if subject is Subject.INCOMING and tables.came is not None:
        return tables.room(int(tables.came.rows.table.room[row])).record
    return tables.room(int(table.room[row]) if subject is Subject.CASES else row).record


def detector_record(tables: Tables, row: int) -> Reference:
    """The record of a row of the detectors."""
    detectors = tables.cases.table.given.detectors
    return tables.room(int(detectors.room[row])).detectors[int(detectors.source[row])].record


def vessel_record(tables: Tables, row: int) -> Reference:
    """The record of a row of the vessels."""
    vessels = tables.cases.table.given.vessels
    return tables.room(int(vessels.room[row])).vessels[int(vessels.source[row])].record


def unit_record(tables: Tables, row: int) -> Reference:
    """The record of a row of the ventilation units."""
    units = tables.cases.table.given.units
    return tables.room(int(units.room[row])).units[int(units.source[row])].record


def control_record(tables: Tables, row: int) -> Reference:
    """The record of a row of the controls."""
    controls = tables.cases.table.given.controls
    return tables.room(int(controls.room[row])).controls[int(controls.source[row])].record


def line_record(tables: Tables, row: int) -> Reference:
    """The record of a row of the supply lines."""
    lines = tables.cases.table.given.lines
    return tables.room(int(lines.room[row])).lines[int(lines.source[row])].record


def assumed_record(tables: Tables, place: int) -> Reference:
    """The record of a row of what was assumed."""
    assumed = tables.assumed
    room, row = tables.room(int(assumed.room[place])), int(assumed.row[place])
    kind = ASSUMPTIONS[int(assumed.code[place])].record
    if kind == "vessel":
        return vessel_record(tables, row)
    if kind == "ventilation-unit":
        return unit_record(tables, row)
    if kind == "detector":
        return detector_record(tables, row)
    if kind == "supply-line":
        return line_record(tables, row)
    return room.site if kind == "site" else room.record


_EQUIPMENT: Final[Mapping[Subject, Callable[[Tables, int], Reference]]] = {
    Subject.DETECTORS: detector_record,
    Subject.VESSELS: vessel_record,
    Subject.UNITS: unit_record,
    Subject.LINES: line_record,
    Subject.CONTROLS: control_record,
    Subject.ASSUMED: assumed_record,
}
