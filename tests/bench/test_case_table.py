"""Ten thousand rooms in one case table against the same closed form in bare numpy."""

import statistics
import time
from datetime import UTC, datetime

import numpy as np
import pytest

from service.audit.cases import case_table
from service.audit.judge import assess_rooms
from service.audit.solve import solve
from tests.audit.builders import a_room, a_unit, a_vessel

pytestmark = pytest.mark.bench
ROOMS = 10_000
AT = datetime(2027, 3, 1, 8, tzinfo=UTC)


def _rooms():
    return [
        a_room(
            30.0 + number % 400,
            vessels=(a_vessel(10.0 + number % 90),),
            units=(a_unit(100.0 + number % 700),),
        )
        for number in range(ROOMS)
    ]


def _median(work, times=5):
    work()
    taken = []
    for _ in range(times):
        began = time.perf_counter()
        work()
        taken.append(time.perf_counter() - began)
    return statistics.median(taken)


def test_ten_thousand_rooms_in_one_table_against_bare_numpy(report):
    rooms = _rooms()
    table = case_table(rooms, AT)

    def bare():
        rate = table.rates.sum(axis=1)
        through = np.maximum(table.supply[:, 0] + rate, table.exhaust[:, 0])
        moving = through > 0.0
        steady = np.divide(rate, through, out=np.zeros_like(rate), where=moving)
        spent = table.durations.sum(axis=1)
        return 0.2095 * (1.0 - steady * -np.expm1(-through * spent / table.volume))

    assert np.isfinite(bare()).all()
    solved = solve(table)
    assert solved.oxygen.shape == (table.size,)
    closed, solving = _median(bare), _median(lambda: solve(table))
    building = _median(lambda: case_table(rooms, AT), times=3)
    whole = _median(lambda: assess_rooms(rooms, at=AT), times=1)
    report(
        f"{ROOMS} rooms, {table.size} cases: solve {solving / closed:.0f} x the closed form in bare"
        f" numpy ({closed * 1e3:.1f} ms); table {building / closed:.0f} x, all with findings"
        f" {whole / closed:.0f} x ({whole:.2f} s)"
    )
