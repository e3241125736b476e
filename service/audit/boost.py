"""Cases of rooms whose air is boosted by an alarm: as measured, and then more (judging 2)."""

from __future__ import annotations

from dataclasses import replace
from typing import Any, Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, BOOSTED
from service.audit.cases import CaseTable
from service.audit.columns import BY_HAND
from service.audit.safeguards import Alarms, safeguards
from service.audit.segments import cut_at
from service.audit.solve import solve
from service.physics.arrays import Floats, Integers

_BOOSTED: Final = AIRFLOWS.index(BOOSTED)
_BY_ROW: Final = (
    "network",
    "room",
    "release",
    "hazard",
    "variant",
    "at_once",
    "starts_from",
    "measured",
    "volume",
    "instant",
    "instant_level",
    "marks",
    "measured_on",
    "first",
    "first_mark",
    "gas_by_level",
    "oxygen_taken",
)


def with_boost(table: CaseTable, at: np.datetime64) -> CaseTable:
    """Add a case for each release of a room that has a boost; none where no room has one.

    The boost starts when the last of its triggers has alarmed, and a trigger that never does so
    brings nothing. They are shown and never count.
    """
    boosted = np.zeros(table.given.count, dtype=np.bool_)
    boosted[table.given.units.room[table.air.units.boosts]] = True
    rows = np.flatnonzero(boosted[table.room] & (table.airflow == AIRFLOWS.index(AS_MEASURED)))
    if not rows.size:
        return table
    alarms = safeguards(table, solve(table), at).alarms
    return _appended(table, rows, _starts(table, alarms)[rows])


def _starts(table: CaseTable, alarms: Alarms) -> Floats:
    """When every unit that is boosted has been; infinite where one never is."""
    units = table.given.units
    boosts = np.flatnonzero(table.air.units.boosts)
    first = np.full(table.size, np.inf)
    np.fmin.at(first, alarms.case, alarms.time)
    by_hand = first + table.given.bases.react[table.room]
    latest = np.zeros(table.size)
    by_pair = dict(
        zip(
            zip(alarms.case.tolist(), alarms.detector.tolist(), strict=True),
            alarms.time.tolist(),
            strict=True,
        )
    )
    for unit in boosts.tolist():
        detector = int(units.boost_detector[unit])
        cases = np.flatnonzero(table.room == units.room[unit])
        if detector == BY_HAND:
            starts = by_hand[cases]
        else:
            times = [by_pair.get((case, detector), np.nan) for case in cases.tolist()]
            starts = np.array(times, dtype=np.float64)
        latest[cases] = np.maximum(latest[cases], np.where(np.isnan(starts), np.inf, starts))
    return latest


def _appended(table: CaseTable, rows: Integers, starts: Floats) -> CaseTable:
    """Put copies of rows behind a table, cut where the boost starts."""
    durations, which, after = cut_at(table.durations[rows], starts)
    width = durations.shape[1]
    room = table.room[rows]

    def cut(values: Floats) -> Floats:
        return np.take_along_axis(values[rows], which, axis=1)

    def air(plain: Floats, boosted: Floats) -> Floats:
        before = np.broadcast_to(plain, (table.size, width))
        return np.concatenate([before, np.where(after, boosted[room][:, np.newaxis], plain[rows])])

    def wider(values: Floats, new: Floats) -> Floats:
        spare = np.zeros((table.size, width - values.shape[1]))
        return np.concatenate([np.concatenate([values, spare], axis=1), new])

    member, copies = _members_of(table, rows)
    added: dict[str, Any] = {
        name: np.concatenate([getattr(table, name), getattr(table, name)[rows]]) for name in _BY_ROW
    }
    member_row = np.concatenate([table.member_row, table.size + copies])
    return replace(
        table,
        **added,
        airflow=np.concatenate([table.airflow, np.full(rows.size, _BOOSTED)]),
        shown=np.concatenate([table.shown, np.ones(rows.size, dtype=np.bool_)]),
        counts=np.concatenate([table.counts, np.zeros(rows.size, dtype=np.bool_)]),
        supply=air(table.supply, table.air.supply[_BOOSTED]),
        exhaust=air(table.exhaust, table.air.exhaust[_BOOSTED]),
        durations=wider(table.durations, durations),
        rates=wider(table.rates, cut(table.rates)),
        rates_level=wider(table.rates_level, cut(table.rates_level)),
        member_row=member_row,
        member_source=np.concatenate([table.member_source, table.member_source[member]]),
        member_gas=np.concatenate([table.member_gas, table.member_gas[member]]),
        member_start=np.searchsorted(member_row, np.arange(table.size + rows.size + 1)),
    )


def _members_of(table: CaseTable, rows: Integers) -> tuple[Integers, Integers]:
    """Members of some rows, and the place of the row that each belongs to."""
    sizes = np.diff(table.member_start)[rows]
    copies = np.repeat(np.arange(rows.size), sizes)
    within = np.arange(copies.size) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    return table.member_start[rows][copies] + within, copies
