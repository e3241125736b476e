"""How bad each case is: its worst mark against the safeguards that hold (judging 4)."""

from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, LOST
from service.audit.assessment import SEVERITIES
from service.audit.cases import CaseTable
from service.audit.columns import UNKNOWN
from service.audit.release_rows import PIPE_FAILED
from service.audit.releases import (
    ALL_VESSELS,
    DETECTION,
    NOBODY_INSIDE,
    RELEASES,
    SHUT_OFF,
    VENTILATION,
)
from service.audit.safeguards import Safeguards
from service.audit.solve import Results
from service.physics.arrays import Floats, Integers, Mask, sum_by_group

NONE: Final = -1  # no mark is crossed
OBSERVATION, MINOR, MAJOR, CRITICAL = range(len(SEVERITIES))

# What goes on by itself needs no accident: at least this by the marks crossed.
_WITHOUT_ACCIDENT: Final = np.array([NONE, MAJOR, CRITICAL, CRITICAL])

# A vessel of less than this is carried or wheeled. [m3]  Judging 1.
PORTABLE: Final = 0.060

_SLUGS: Final = [release.slug for release in RELEASES]


def case_severity(table: CaseTable, results: Results, guards: Safeguards) -> Integers:
    """Severity of each case as an index in SEVERITIES; -1 where no mark is crossed."""
    by_itself = table.sustained & (table.airflow == AIRFLOWS.index(AS_MEASURED))
    row = np.where(guards.late & (results.mark > 0), 3, results.mark)
    column = np.where(by_itself, 0, _column(table, guards))
    by_table = table.given.bases.severity[table.room, np.maximum(row - 1, 0), column]
    lower = (table.airflow == AIRFLOWS.index(LOST)) & _told_of_loss(table)[table.network]
    everything = table.release == _SLUGS.index(ALL_VESSELS)
    lower |= everything | (table.variant == PIPE_FAILED)
    by_table = np.where(lower, np.maximum(by_table - 1, OBSERVATION), by_table)
    unlikely = everything & ~_may_all_go(table)[table.network]
    by_table = np.where(unlikely, OBSERVATION, by_table)
    least = np.where(by_itself, _WITHOUT_ACCIDENT[results.mark], NONE)
    severity = np.maximum(by_table, least)
    shown_only = np.where(table.counts, severity, OBSERVATION)
    return np.where(results.mark > 0, shown_only, NONE)


def without_safeguards(table: CaseTable, results: Results, severity: Integers) -> Integers:
    """Severity of each case if no safeguard held; -1 where no mark is crossed."""
    row = np.maximum(results.mark - 1, 0)
    bare = np.maximum(table.given.bases.severity[table.room, row, 0], severity)
    # All vessels at once count for what the table makes of them: seldom more than an observation.
    everything = table.release == _SLUGS.index(ALL_VESSELS)
    return np.where(results.mark > 0, np.where(everything, severity, bare), NONE)


def _column(table: CaseTable, guards: Safeguards) -> Integers:
    """Column of the severity table: no safeguard, some, all of those that count."""
    holding = {
        DETECTION: guards.detection,
        VENTILATION: guards.ventilation,
        SHUT_OFF: guards.shut_off,
        NOBODY_INSIDE: guards.nobody_inside,
    }
    possible = np.zeros(table.size, dtype=np.int64)
    held = np.zeros(table.size, dtype=np.int64)
    for name, holds in holding.items():
        counts = np.array([name in each.safeguards for each in RELEASES])[table.release]
        if name == NOBODY_INSIDE:
            counts &= guards.nobody_counts
        possible += counts
        held += counts & holds
    column = np.where(held == 0, 0, np.where(held == possible, 2, 1))
    accident = np.array([NOBODY_INSIDE in each.safeguards for each in RELEASES])[table.release]
    return np.where(guards.alone_suffices & accident, 2, column)


def _may_all_go(table: CaseTable) -> Mask:
    """Tell where all vessels may go together: a manifold is shared, or many are carried about."""
    vessels, present = table.given.vessels, table.stock.present
    portable = present & (vessels.capacity_volume < PORTABLE) & (vessels.mobile != 0)
    many = sum_by_group(portable.astype(np.float64), vessels.room, table.given.count)
    may = many > table.given.bases.many_vessels
    joined = np.flatnonzero(present & vessels.on_manifold)
    group, members = np.unique(vessels.group[joined], return_counts=True)
    shared = np.isin(vessels.group, group[members > 1]) & present & vessels.on_manifold
    may[vessels.room[shared]] = True
    return may


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
