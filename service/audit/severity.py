"""How bad each case is: its worst mark against the safeguards that hold (judging 4)."""

from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, LOST
from service.audit.assessment import SEVERITIES
from service.audit.cases import CaseTable
from service.audit.columns import UNKNOWN
from service.audit.releases import BOIL_OFF, RELEASES
from service.audit.safeguards import Safeguards
from service.audit.solve import Results
from service.physics.arrays import Floats, Integers, Mask

NONE: Final = -1  # no mark is crossed
OBSERVATION, MINOR, MAJOR, CRITICAL = range(len(SEVERITIES))

# What evaporates by itself needs no accident: at least this by the marks crossed.
_WITHOUT_ACCIDENT: Final = np.array([NONE, MAJOR, CRITICAL, CRITICAL])


def case_severity(table: CaseTable, results: Results, guards: Safeguards) -> Integers:
    """Severity of each case as an index in SEVERITIES; -1 where no mark is crossed."""
    boils = table.release == [release.slug for release in RELEASES].index(BOIL_OFF)
    as_measured = boils & (table.airflow == AIRFLOWS.index(AS_MEASURED))
    lost = boils & (table.airflow == AIRFLOWS.index(LOST))
    row = np.where(guards.late & (results.mark > 0), 3, results.mark)
    column = np.where(as_measured, 0, _column(table, guards, boils))
    by_table = table.given.bases.severity[table.room, np.maximum(row - 1, 0), column]
    lower = lost & _told_of_loss(table)[table.room]
    by_table = np.where(lower, np.maximum(by_table - 1, OBSERVATION), by_table)
    least = np.where(as_measured, _WITHOUT_ACCIDENT[results.mark], NONE)
    severity = np.maximum(by_table, least)
    shown_only = np.where(table.counts, severity, OBSERVATION)
    return np.where(results.mark > 0, shown_only, NONE)


def _column(table: CaseTable, guards: Safeguards, boils: Mask) -> Integers:
    """Column of the severity table: no safeguard, some, all of those that count."""
    slugs = [set(release.safeguards) for release in RELEASES]
    counts_detection = np.array(["detection" in names for names in slugs])[table.release]
    counts_ventilation = np.array(["ventilation" in names for names in slugs])[table.release]
    counts_nobody = guards.nobody_counts & ~boils
    possible = (
        counts_detection.astype(np.int64) + counts_ventilation + counts_nobody.astype(np.int64)
    )
    held = (
        (counts_detection & guards.detection).astype(np.int64)
        + (counts_ventilation & guards.ventilation)
        + (counts_nobody & guards.nobody_inside)
    )
    column = np.where(held == 0, 0, np.where(held == possible, 2, 1))
    return np.where(guards.alone_suffices & ~boils, 2, column)


def _told_of_loss(table: CaseTable) -> Mask:
    """Tell which rooms have a running unit on standby power, or with an alarm when it fails."""
    units, air = table.given.units, table.air.units
    told = (units.standby_power == 1) | (units.fail_alarm == 1)
    told &= air.runs & (air.flow > 0.0)
    rooms = np.zeros(table.given.count, dtype=np.bool_)
    rooms[units.room[told]] = True
    return rooms


def worst_by_room(values: Integers, counts: Mask, table: CaseTable) -> Integers:
    """Largest of a value over the cases of each room that count."""
    worst = np.full(table.given.count, UNKNOWN)
    np.maximum.at(worst, table.room[counts], values[counts])
    return worst


def nearest(table: CaseTable, results: Results, rank: Integers) -> Integers:
    """Row of the case of each room that leads by rank, then by nearness to its first mark.

    A rank below zero is left out; -1 where no case is left. Equal cases go by their order.
    """
    rows = np.flatnonzero(rank >= 0)
    near: Floats = results.nearness[rows]
    order = rows[np.lexsort((rows, -near, -rank[rows], table.room[rows]))]
    leading = np.full(table.given.count, UNKNOWN)
    room, first = np.unique(table.room[order], return_index=True)
    leading[room] = order[first]
    return leading
