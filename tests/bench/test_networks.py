"""Many networks at once against one at a time by another library; rooms joined against alone."""

import statistics
import time
from datetime import UTC, datetime

import numpy as np
import pytest
from scipy.linalg import expm

from service.audit.judge import assess_rooms
from service.physics.networks import network_course, outflow_of_balance
from tests.audit.builders import a_door, a_room, a_vessel

pytestmark = pytest.mark.bench
NETWORKS, ROOMS = 200, 12
AT = datetime(2027, 3, 1, 8, tzinfo=UTC)


def _median(work, times=5):
    work()
    taken = []
    for _ in range(times):
        began = time.perf_counter()
        work()
        taken.append(time.perf_counter() - began)
    return statistics.median(taken)


def _networks():
    random = np.random.default_rng(3)
    passed = random.uniform(0.0, 0.2, (NETWORKS, 1, ROOMS, ROOMS))
    passed[:, :, np.arange(ROOMS), np.arange(ROOMS)] = 0.0
    release = np.zeros((NETWORKS, 1, ROOMS))
    release[:, :, 0] = 0.05
    fans = random.uniform(0.0, 0.1, (NETWORKS, 1, ROOMS))
    return {
        "volume": random.uniform(20.0, 300.0, (NETWORKS, ROOMS)),
        "passed": passed,
        "outflow": outflow_of_balance(passed, fans, 0.0 * fans, release),
        "release": release,
        "start": np.zeros((NETWORKS, ROOMS)),
    }


def test_networks_at_once_against_one_point_of_each_by_another_library(report):
    """The exponential of scipy gives one moment; ours gives every point, and the peaks."""
    given = _networks()
    lengths = np.full((NETWORKS, 1), 3600.0)

    def one_at_a_time():
        for row in range(NETWORKS):
            volume = given["volume"][row]
            matrix = np.zeros((ROOMS + 1, ROOMS + 1))
            matrix[:ROOMS, :ROOMS] = given["passed"][row, 0] / volume[:, np.newaxis]
            matrix[np.arange(ROOMS), np.arange(ROOMS)] -= given["outflow"][row, 0] / volume
            matrix[:ROOMS, ROOMS] = given["release"][row, 0] / volume
            expm(matrix * 3600.0)

    run = network_course(lengths, **given)
    ours = _median(lambda: network_course(lengths, **given))
    theirs = _median(one_at_a_time)
    report(
        f"{NETWORKS} networks of {ROOMS} rooms, {run.times.shape[2]} points each:"
        f" {ours / theirs:.1f} x one point of each by scipy's exponential"
        f" ({ours * 1e3:.1f} ms against {theirs * 1e3:.1f} ms)"
    )


def test_rooms_joined_in_a_ring_against_the_same_rooms_alone(report):
    def door(place, other, is_open):
        tag = f"O-{min(place, other)}-{max(place, other)}"
        return a_door(f"room-R{other}", tag, normally_open=is_open)

    def rooms(is_open):
        return [
            a_room(
                60.0,
                tag=f"R{place}",
                vessels=(a_vessel(60.0),),
                openings=tuple(
                    door(place, (place + step) % ROOMS, is_open) for step in (ROOMS - 1, 1)
                ),
            )
            for place in range(ROOMS)
        ]

    alone, joined = rooms(False), rooms(True)
    apart = _median(lambda: assess_rooms(alone, at=AT))
    together = _median(lambda: assess_rooms(joined, at=AT))
    report(
        f"{ROOMS} rooms in a ring of open doors: {together / apart:.1f} x the same behind shut ones"
        f" ({together * 1e3:.0f} ms against {apart * 1e3:.0f} ms)"
    )
