"""Rooms that exchange air: methods L, an ODE solver, and what must hold of any network."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp
from scipy.linalg import expm

from service.physics.errors import OutOfRange
from service.physics.networks import (
    door_exchange,
    network_course,
    outflow_of_balance,
    returned_air,
)

AIR = 0.2095


def oxygen(run, place=-1):
    return AIR * (1.0 - run.levels[:, :, place])


def one_segment(seconds, volume, passed, outflow, release, start=None):
    """A single network through one segment."""
    return network_course(
        [[seconds]],
        volume=[volume],
        passed=[[passed]],
        outflow=[[outflow]],
        release=[[release]],
        start=[np.zeros(len(volume)) if start is None else start],
    )


def test_two_rooms_are_as_worked_for_check_l_1():
    """Methods L-1: two rooms with fresh air and unequal flows; expm and solve_ivp agree there."""
    passed = [[0.0, 0.01], [0.03, 0.0]]
    outflow = outflow_of_balance(passed, [0.05, 0.02], [0.0, 0.0], [0.01, 0.0])
    run = one_segment(600.0, [60.0, 40.0], passed, outflow, [0.01, 0.0])
    assert_allclose(oxygen(run)[0], [0.194341, 0.206539], atol=1e-6)
    steady = one_segment(1e6, [60.0, 40.0], passed, outflow, [0.01, 0.0])
    assert_allclose(oxygen(steady)[0], [0.176766, 0.189859], atol=1e-6)


def test_three_rooms_are_as_worked_for_check_l_2():
    """Methods L-2: a release room whose surplus goes straight outside, a corridor and a third."""
    passed = [[0.0, 0.0, 0.05], [0.0, 0.0, 0.05], [0.05, 0.05, 0.0]]
    outflow = outflow_of_balance(passed, [0.0, 0.0, 0.30], [0.0, 0.0, 0.0], [0.02, 0.0, 0.0])
    run = one_segment(900.0, [60.0, 40.0, 120.0], passed, outflow, [0.02, 0.0, 0.0])
    assert_allclose(oxygen(run)[0], [0.169646, 0.208112, 0.205690], atol=1e-6)
    steady = one_segment(1e6, [60.0, 40.0, 120.0], passed, outflow, [0.02, 0.0, 0.0])
    assert_allclose(oxygen(steady)[0], [0.142841, 0.199977, 0.199977], atol=1e-6)


def test_rooms_of_a_recirculating_unit_are_as_worked_for_check_l_3():
    """Methods L-3: a unit with a fifth of fresh air; the mixed return is 0.1676 in the end."""
    share, flow, gas = 0.2, np.array([0.1, 0.1]), np.array([0.01, 0.0])
    passed = returned_air((1.0 - share) * flow, flow + gas)
    outflow = outflow_of_balance(passed, share * flow, [0.0, 0.0], gas)
    run = one_segment(1800.0, [60.0, 40.0], passed, outflow, gas)
    assert_allclose(oxygen(run)[0], [0.177779, 0.193462], atol=1e-6)
    steady = one_segment(1e6, [60.0, 40.0], passed, outflow, gas)
    assert_allclose(oxygen(steady)[0], [0.159982, 0.175980], atol=1e-6)
    mixed = oxygen(steady)[0] @ (flow + gas) / (flow + gas).sum()
    assert_allclose(mixed, 0.1676, atol=1e-6)
    # By the balance of the whole: C0 f Q / (f Q + R).
    assert_allclose(mixed, AIR * 0.04 / 0.05, rtol=1e-9)


def test_the_flow_through_a_doorway_is_as_worked_for_check_l_4():
    """Methods L-4 and the figures of L5, after Brown and Solvason (1962)."""
    flow = door_exchange(0.9, 2.1, temperature_difference=[2.0, 1.0, 5.0, 10.0], temperature=293.15)
    assert_allclose(flow, [0.1417, 0.100, 0.224, 0.317], rtol=3e-3)


def _solved(change, span, start, **options):
    # The integrator's own steps underflow harmlessly.
    with np.errstate(all="ignore"):
        return solve_ivp(change, span, start, **options)


def random_networks(seed, count, rooms, segments=3):
    """Networks of a size with flows both ways, fans, a release that changes, and a start."""
    random = np.random.default_rng(seed)
    shape = (count, segments, rooms, rooms)
    passed = random.uniform(0.0, 0.3, shape) * (random.random(shape) < 0.4)
    passed[:, :, np.arange(rooms), np.arange(rooms)] = 0.0
    fans = random.uniform(0.0, 0.2, (2, count, segments, rooms)) * random.integers(
        0, 2, (2, count, segments, rooms)
    )
    gas = np.zeros((count, segments, rooms))
    gas[:, :, 0] = random.uniform(0.0, 1.0, (count, segments)) * [1.0, 0.1, 0.0][:segments]
    start = np.zeros((count, rooms))
    start[:, 0] = random.uniform(0.0, 1.0, count)
    return {
        "durations": random.uniform(10.0, 3000.0, (count, segments)),
        "volume": random.uniform(5.0, 300.0, (count, rooms)),
        "passed": passed,
        "outflow": outflow_of_balance(passed, fans[0], fans[1], gas),
        "release": gas,
        "start": start,
    }


def followed(network):
    return network_course(
        network["durations"], **{k: v for k, v in network.items() if k != "durations"}
    )


@pytest.mark.parametrize("rooms", range(2, 13))
def test_random_networks_agree_with_an_ode_solver(rooms):
    """Against DOP853 of scipy with a relative tolerance of 1e-11."""
    network = random_networks(rooms, 3, rooms)
    run = followed(network)
    for row in range(3):
        state, begun = network["start"][row], 0.0
        for segment in range(3):
            volume = network["volume"][row]
            passed, outflow = network["passed"][row, segment], network["outflow"][row, segment]
            gas, length = network["release"][row, segment], network["durations"][row, segment]
            solution = _solved(
                lambda _, level, v=volume, q=passed, w=outflow, r=gas: (
                    (r + q @ level - w * level) / v
                ),
                (0.0, length),
                state,
                method="DOP853",
                rtol=1e-11,
                atol=1e-13,
                max_step=length / 50,
                dense_output=True,
            )
            for room in range(rooms):
                times = run.times[row, room] - begun
                inside = (times >= 0.0) & (times <= length)
                wanted = solution.sol(times[inside])[room]
                assert_allclose(run.levels[row, room, inside], wanted, rtol=1e-6, atol=1e-9)
            state, begun = solution.y[:, -1], begun + length


def test_long_and_fast_networks_agree_with_the_exponential_of_another_library():
    """Against scipy.linalg.expm, from a second to four days, with turnovers of a second."""
    network = random_networks(99, 5, 12, segments=1)
    network["durations"] = np.array([[1.0], [60.0], [3600.0], [86_400.0], [345_600.0]])
    network["volume"] = network["volume"] / 30.0
    run = followed(network)
    for row in range(5):
        volume = network["volume"][row]
        matrix = np.zeros((13, 13))
        matrix[:12, :12] = network["passed"][row, 0] / volume[:, np.newaxis]
        matrix[np.arange(12), np.arange(12)] -= network["outflow"][row, 0] / volume
        matrix[:12, 12] = network["release"][row, 0] / volume
        state = np.append(network["start"][row], 1.0)
        for point in range(0, run.times.shape[2], 17):
            for room in (0, 5, 11):
                # The other library's products underflow harmlessly.
                with np.errstate(all="ignore"):
                    there = expm(matrix * run.times[row, room, point]) @ state
                assert_allclose(run.levels[row, room, point], there[room], rtol=1e-8, atol=1e-12)


@given(st.integers(0, 10_000), st.integers(2, 12))
def test_no_gas_is_lost_and_no_fraction_leaves_its_bounds(seed, rooms):
    network = random_networks(seed, 4, rooms)
    run = followed(network)
    assert run.levels.min() >= 0.0
    # What is let go is the gas alone, so that no room can hold more than all of it.
    assert run.levels.max() <= 1.0 + 1e-12
    let_go = (network["release"] * network["durations"][:, :, np.newaxis]).sum(axis=(1, 2))
    had = (network["start"] * network["volume"]).sum(axis=1)
    held = (run.levels[:, :, -1] * network["volume"]).sum(axis=1)
    assert_allclose(held + run.left, had + let_go, rtol=1e-9)


@pytest.mark.slow
@given(st.integers(0, 10_000), st.floats(0.05, 0.95))
def test_splitting_a_segment_changes_nothing(seed, share):
    network = random_networks(seed, 2, 5, segments=2)
    split = {
        name: np.repeat(values, 2, axis=1) if name not in ("volume", "start") else values
        for name, values in network.items()
    }
    split["durations"] = split["durations"] * np.tile([share, 1.0 - share], 2)
    whole, parts = followed(network), followed(split)
    assert_allclose(parts.levels[:, :, -1], whole.levels[:, :, -1], rtol=1e-9, atol=1e-14)
    assert_allclose(parts.levels.max(axis=2), whole.levels.max(axis=2), rtol=1e-7)
    assert_allclose(parts.left, whole.left, rtol=1e-9)


def test_the_highest_level_stands_at_a_point_of_its_own():
    """The peak of a neighbour against a search over the exponential of scipy, with a fine step."""
    volume, passed = np.array([30.0, 200.0]), np.array([[0.0, 0.1], [0.1, 0.0]])
    outflow = outflow_of_balance(passed, [0.0, 0.05], [0.0, 0.0], [0.0, 0.0])
    run = one_segment(20_000.0, volume, passed, outflow, [0.0, 0.0], start=[1.0, 0.0])
    matrix = (passed - np.diag(outflow)) / volume[:, np.newaxis]
    times = np.linspace(100.0, 2000.0, 20_001)
    step, state = expm(matrix * (times[1] - times[0])), expm(matrix * times[0]) @ [1.0, 0.0]
    levels = []
    for _ in times:
        levels.append(state[1])
        state = step @ state
    place = int(np.argmax(run.levels[0, 1]))
    assert_allclose(run.levels[0, 1, place], max(levels), rtol=1e-8)
    assert_allclose(run.times[0, 1, place], times[int(np.argmax(levels))], rtol=1e-3)


def test_between_its_points_a_course_is_close_to_the_exact_one():
    """Times to a mark against the exponential of scipy: to a thousandth of the time."""
    network = random_networks(7, 6, 4, segments=1)
    run = followed(network)
    rows = np.arange(6)
    course = run.of_rooms(rows, np.full(6, 2))
    marks = 0.37 * course.highest
    times = course.first_time_above(marks)
    for row in range(6):
        volume = network["volume"][row]
        matrix = np.zeros((5, 5))
        matrix[:4, :4] = network["passed"][row, 0] / volume[:, np.newaxis]
        matrix[np.arange(4), np.arange(4)] -= network["outflow"][row, 0] / volume
        matrix[:4, 4] = network["release"][row, 0] / volume
        there = expm(matrix * times[row]) @ np.append(network["start"][row], 1.0)
        assert_allclose(there[2], marks[row], rtol=5e-3)


def test_a_room_that_nothing_joins_keeps_clean():
    passed = np.zeros((2, 2))
    outflow = outflow_of_balance(passed, [0.0, 0.1], [0.0, 0.0], [0.1, 0.0])
    run = one_segment(1000.0, [50.0, 50.0], passed, outflow, [0.1, 0.0])
    assert run.levels[0, 1].max() == 0.0
    # Methods D5: an unventilated room alone.
    assert_allclose(run.levels[0, 0, -1], 1.0 - np.exp(-0.1 * 1000.0 / 50.0), rtol=1e-12)


@pytest.mark.parametrize(
    ("changed", "name"),
    [
        ({"volume": [[0.0, 1.0]]}, "volume"),
        ({"durations": [[-1.0]]}, "durations"),
        ({"release": [[[np.nan, 0.0]]]}, "release"),
        ({"start": [[np.nan, 0.0]]}, "start"),
        ({"passed": [[[[0.0, -0.1], [0.0, 0.0]]]]}, "passed"),
        ({"outflow": [[[0.0, 0.0]]]}, "outflow"),
    ],
)
def test_what_cannot_be_is_refused(changed, name):
    network = {
        "durations": [[10.0]],
        "volume": [[10.0, 10.0]],
        "passed": [[[[0.0, 0.1], [0.1, 0.0]]]],
        "outflow": [[[0.2, 0.1]]],
        "release": [[[0.1, 0.0]]],
        "start": [[0.0, 0.0]],
        **changed,
    }
    with pytest.raises(OutOfRange, match=name):
        followed(network)
