"""Rules on the records of supply lines: what would end a break, and what would limit it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import TRIGGERS, UNKNOWN, Moments, all_of, is_one_of
from service.audit.rules.kinds import Missing, Overdue
from service.audit.rules.rule import Subject, Tables, line_record
from service.audit.rules.words import at_least, number
from service.audit.severity import MINOR, OBSERVATION
from service.physics.arrays import Mask
from service.physics.constants import SECONDS_PER_HOUR

_HIGH_LEVEL, _EXCESS_FLOW, _MANUAL = range(len(TRIGGERS))

_Words = tuple[str, str, Mapping[str, Any]]


def _flows(tables: Tables) -> Mask:
    """Lines that anything can come out of."""
    flows: Mask = tables.cases.table.lines.broken > 0.0
    return flows


def _without_shut_off(tables: Tables) -> Mask:
    return all_of(_flows(tables), ~tables.cases.table.given.lines.has_shut_off)


def _say_shut_off(tables: Tables, row: int) -> _Words:
    tag, flow = line_record(tables, row).tag, _flow(tables, row)
    return (
        f"No shut-off of {tag} is recorded: a break would let {at_least(flow)} kg/h go until its "
        "source is empty.",
        "Fit a shut-off that acts by itself on excess flow or on a detector, fails closed and is "
        "tested, and record it.",
        {"flow_kg_h": number(flow)},
    )


def _shuts_no_break(tables: Tables) -> Mask:
    """A shut-off that a person or a high level closes: neither sees a break."""
    lines = tables.cases.table.given.lines
    nothing = (lines.trigger == UNKNOWN) & ~lines.named_detector
    blind = is_one_of(lines.trigger, (_HIGH_LEVEL, _MANUAL)) | nothing
    return all_of(_flows(tables), lines.has_shut_off, blind)


def _say_shuts_no_break(tables: Tables, row: int) -> _Words:
    lines = tables.cases.table.given.lines
    trigger = int(lines.trigger[row])
    by = "by nothing that is recorded" if trigger < 0 else f"by {TRIGGERS[trigger]} alone"
    return (
        f"The shut-off of {line_record(tables, row).tag} is closed {by}, which does not see a "
        "break: it is no safeguard of one.",
        "Let an excess flow or a detector in the room close it as well, and record that.",
        {"trigger": None if trigger < 0 else TRIGGERS[trigger]},
    )


def _trigger_fails(tables: Tables) -> Mask:
    """A shut-off whose detector stands elsewhere, or does not work."""
    lines, found = tables.cases.table.given.lines, tables.cases.guards.detectors
    works = np.zeros(lines.room.size, dtype=np.bool_)
    here = np.flatnonzero(lines.detector != UNKNOWN)
    works[here] = found.works[lines.detector[here]]
    return all_of(_flows(tables), lines.named_detector, ~works)


def _say_trigger(tables: Tables, row: int) -> _Words:
    elsewhere = bool(tables.cases.table.given.lines.detector[row] == UNKNOWN)
    why = (
        "stands in another room"
        if elsewhere
        else "is not in service inside the room, is out of calibration, or is silenced"
    )
    return (
        f"The detector that shuts {line_record(tables, row).tag} {why}: here it ends no break.",
        "Let a working detector of this room shut the line as well.",
        {"detector_elsewhere": elsewhere},
    )


def _may_stay_open(tables: Tables) -> Mask:
    lines = tables.cases.table.given.lines
    return all_of(_flows(tables), lines.has_shut_off, lines.fails_closed != 1)


def _say_open(tables: Tables, row: int) -> _Words:
    said = bool(tables.cases.table.given.lines.fails_closed[row] == 0)
    return (
        f"The shut-off of {line_record(tables, row).tag} "
        + ("stays open" if said else "is not recorded to close")
        + " when its power or its air fails.",
        "Fit one that fails closed, test that it does, and record it.",
        {"fails_closed": False if said else None},
    )


def _unrestricted(tables: Tables) -> Mask:
    """Neither a restrictor nor an excess-flow valve limits what comes out."""
    lines = tables.cases.table.given.lines
    return all_of(_flows(tables), np.isnan(lines.restrictor), lines.trigger != _EXCESS_FLOW)


def _say_unrestricted(tables: Tables, row: int) -> _Words:
    table = tables.cases.table
    flow = _flow(tables, row)
    bore = 1000.0 * float(table.lines.bore[row])
    return (
        f"Nothing limits what comes out of {line_record(tables, row).tag} when it breaks: "
        f"{at_least(flow)} kg/h from a bore of {bore:.4g} mm.",
        "Put a restrictor before the first part that can break in a room, of no more than the "
        "supply needs, and record what passes it.",
        {
            "flow_kg_h": number(flow),
            "bore_mm": number(bore),
            "bore_recorded": not np.isnan(table.given.lines.bore[row]),
            "pressure_kpa_abs": number(float(table.lines.pressure[row]) / 1000.0),
        },
    )


def _flow(tables: Tables, row: int) -> float:
    return float(tables.cases.table.lines.broken[row]) * SECONDS_PER_HOUR


def _has_shut_off(tables: Tables) -> Mask:
    return all_of(_flows(tables), tables.cases.table.given.lines.has_shut_off)


def _test_due(tables: Tables) -> Moments:
    return tables.cases.table.given.lines.test_due


RULES: Final = (
    Missing(
        slug="supply-lines/shut-off-missing",
        subject=Subject.LINES,
        missing=_without_shut_off,
        consequence=OBSERVATION,
        words=_say_shut_off,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="supply-lines/shut-off-sees-no-break",
        subject=Subject.LINES,
        missing=_shuts_no_break,
        consequence=OBSERVATION,
        words=_say_shuts_no_break,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="supply-lines/shut-off-trigger",
        subject=Subject.LINES,
        missing=_trigger_fails,
        consequence=MINOR,
        words=_say_trigger,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="supply-lines/shut-off-fails-open",
        subject=Subject.LINES,
        missing=_may_stay_open,
        consequence=MINOR,
        words=_say_open,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Overdue(
        slug="supply-lines/shut-off-untested",
        subject=Subject.LINES,
        applies=_has_shut_off,
        due=_test_due,
        overdue="The test of the shut-off of {tag} has been overdue since {due}.",
        never_done="No test of the shut-off of {tag} is recorded, with the interval it holds for.",
        remedy="Test that it closes and how soon, and record the date; until then it does not "
        "count.",
        consequence=MINOR,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="supply-lines/unrestricted",
        subject=Subject.LINES,
        missing=_unrestricted,
        consequence=OBSERVATION,
        words=_say_unrestricted,
        method="line-break/liquid",
        source=COMMON_PRACTICE,
    ),
)
