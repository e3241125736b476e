"""Lines that a detector shuts: a break goes on until its alarm, and the closing of the valve."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from service.audit.cases import CaseTable
from service.audit.columns import UNKNOWN
from service.audit.releases import LINE_BREAK, RELEASES
from service.audit.safeguards import safeguards
from service.audit.segments import cut_at
from service.audit.solve import solve
from service.physics.arrays import Floats, Integers

_LINE_BREAK = [release.slug for release in RELEASES].index(LINE_BREAK)


def with_shut_off(table: CaseTable, at: np.datetime64) -> CaseTable:
    """End the breaks of lines whose shut-off a detector of the room triggers, where it alarms.

    The alarm follows from the course without any shut-off, which is the same until then.
    """
    row, line = _shut_by_detector(table)
    if not row.size:
        return table
    alarms = safeguards(table, solve(table), at).alarms
    by_pair = dict(
        zip(
            zip(alarms.case.tolist(), alarms.detector.tolist(), strict=True),
            alarms.time.tolist(),
            strict=True,
        )
    )
    pairs = zip(row.tolist(), table.given.lines.detector[line].tolist(), strict=True)
    alarm = np.array([by_pair.get(pair, np.nan) for pair in pairs], dtype=np.float64)
    shuts = ~np.isnan(alarm)
    return _ended(table, row[shuts], alarm[shuts] + table.lines.closes_in[line[shuts]])


def _shut_by_detector(table: CaseTable) -> tuple[Integers, Integers]:
    """Cases of a broken line that a detector of the room shuts, and the line."""
    line = table.sources.line[table.member_source]
    broken = (table.release[table.member_row] == _LINE_BREAK) & (line >= 0)
    members = np.flatnonzero(broken)
    lines = line[members]
    shut = table.lines.shut_off_holds[lines] & (table.given.lines.detector[lines] != UNKNOWN)
    return table.member_row[members[shut]], lines[shut]


def _ended(table: CaseTable, row: Integers, ends: Floats) -> CaseTable:
    """The table with the rates of some rows ended."""
    until = np.full(table.size, np.inf)
    until[row] = ends
    durations, which, after = cut_at(table.durations, until)

    def ended(rates: Floats) -> Floats:
        return np.where(after, 0.0, np.take_along_axis(rates, which, axis=1))

    rates = ended(table.rates)
    gas = (durations * rates).sum(axis=1)
    of_row = np.isin(table.member_row, row)
    return replace(
        table,
        durations=durations,
        rates=rates,
        rates_level=ended(table.rates_level),
        member_gas=np.where(of_row, gas[table.member_row], table.member_gas),
    )
