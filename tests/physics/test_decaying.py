import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp
from scipy.optimize import minimize_scalar

from service.physics.constants import OXYGEN_IN_AIR
from service.physics.decaying import (
    oxygen_with_decaying_source_closed_room,
    oxygen_with_decaying_source_exhaust,
    oxygen_with_decaying_source_supply,
    time_of_lowest_oxygen_with_decaying_source_exhaust,
)
from service.physics.errors import OutOfRange
from service.physics.mixing import oxygen_after_mixing

SOURCE = {"initial_release": 0.15, "decay_rate": 0.005, "volume": 100.0}

rates = st.floats(1e-3, 0.1)
releases = st.just(0.0) | st.floats(1e-4, 2.0)
flows = st.just(0.0) | st.floats(1e-4, 2.0)
volumes = st.floats(10.0, 1e3)
times = st.just(0.0) | st.floats(1.0, 1e5)


def test_a_quench_that_dies_away_under_exhaust():
    """D-7: closed, agrees with an ODE solver; the minimum too."""
    oxygen = oxygen_with_decaying_source_exhaust(300.0, **SOURCE, exhaust=0.2)
    assert_allclose(oxygen, 0.175385, atol=1e-6)
    lowest = time_of_lowest_oxygen_with_decaying_source_exhaust(**SOURCE, exhaust=0.2)
    assert_allclose(lowest, 305.43, atol=0.01)
    at_lowest = oxygen_with_decaying_source_exhaust(lowest, **SOURCE, exhaust=0.2)
    assert_allclose(at_lowest, 0.175380, atol=1e-6)


def test_a_quench_that_dies_away_under_supply():
    """D-8: quadrature, agrees with an ODE solver."""
    oxygen = oxygen_with_decaying_source_supply(300.0, **SOURCE, supply=0.2)
    assert_allclose(oxygen, 0.178729, atol=1e-6)


def test_decaying_sources_agree_with_an_ode_solver():
    """Outside: scipy 1.17.1, DOP853, on the balance of oxygen, from any start."""
    generator = np.random.default_rng(11)
    rows = 24
    release = generator.uniform(0.0, 0.6, rows)
    decay = 10.0 ** generator.uniform(-3.5, -1.5, rows)
    air = np.where(generator.uniform(size=rows) < 0.15, 0.0, generator.uniform(0.0, 0.4, rows))
    volume = generator.uniform(20.0, 300.0, rows)
    before = generator.uniform(0.1, OXYGEN_IN_AIR, rows)
    time = generator.uniform(10.0, 2000.0, rows)
    decay[:4] = np.where(air[:4] > 0.0, air[:4] / volume[:4], decay[:4])  # Rates that meet.
    expected = np.empty((2, rows))
    with np.errstate(all="ignore"):
        for row in range(rows):
            for kind in range(2):

                def balance(t, oxygen, row=row, kind=kind):
                    now = release[row] * np.exp(-decay[row] * t)
                    fresh = air[row] if kind else max(air[row] - now, 0.0)
                    leaving = air[row] + now if kind else max(air[row], now)
                    return (OXYGEN_IN_AIR * fresh - leaving * oxygen) / volume[row]

                solved = solve_ivp(
                    balance,
                    (0.0, time[row]),
                    [before[row]],
                    "DOP853",
                    rtol=1e-11,
                    atol=1e-14,
                    max_step=20.0,
                )
                expected[kind, row] = solved.y[0, -1]
    room = {"initial_release": release, "decay_rate": decay, "volume": volume}
    with_exhaust = oxygen_with_decaying_source_exhaust(
        time, **room, exhaust=air, oxygen_before=before
    )
    # The exhaust's balance has a corner, at which a solver loses figures.
    assert_allclose(with_exhaust, expected[0], atol=1e-8)
    with_supply = oxygen_with_decaying_source_supply(time, **room, supply=air, oxygen_before=before)
    assert_allclose(with_supply, expected[1], atol=1e-10)
    closed = oxygen_with_decaying_source_closed_room(time, **room, oxygen_before=before)
    assert_allclose(closed[air == 0.0], expected[1][air == 0.0], atol=1e-10)
    assert (air == 0.0).any()
    assert (release > air).any()
    assert (release < air).any()


@pytest.mark.parametrize(
    ("release", "decay", "exhaust"),
    [(0.15, 0.005, 0.2), (1.0, 0.01, 0.1), (0.05, 0.002, 0.2), (0.3, 0.001, 0.1)],
)
def test_the_lowest_oxygen_is_where_a_search_finds_it(release, decay, exhaust):
    """Outside: scipy 1.17.1, bounded minimisation of the closed form."""
    room = {"initial_release": release, "decay_rate": decay, "volume": 100.0, "exhaust": exhaust}
    found = minimize_scalar(
        lambda time: float(oxygen_with_decaying_source_exhaust(time, **room)),
        bounds=(0.0, 5000.0),
        method="bounded",
        options={"xatol": 1e-6},
    )
    lowest = time_of_lowest_oxygen_with_decaying_source_exhaust(**room)
    assert_allclose(lowest, found.x, rtol=1e-4)


@settings(deadline=None)  # The quadrature takes as many steps as the room is emptied.
@given(times, releases, rates, flows, volumes)
def test_supply_leaves_more_oxygen_than_exhaust_and_either_more_than_none(
    time, release, decay, air, volume
):
    room = {"initial_release": release, "decay_rate": decay, "volume": volume}
    closed = oxygen_with_decaying_source_closed_room(time, **room)
    exhaust = oxygen_with_decaying_source_exhaust(time, **room, exhaust=air)
    supply = oxygen_with_decaying_source_supply(time, **room, supply=air)
    assert 0.0 <= closed <= exhaust + 1e-12
    assert exhaust <= supply + 1e-12
    assert supply <= OXYGEN_IN_AIR


@settings(deadline=None)  # The quadrature takes as many steps as the room is emptied.
@given(times, releases, rates, volumes)
def test_no_fan_is_a_closed_room(time, release, decay, volume):
    room = {"initial_release": release, "decay_rate": decay, "volume": volume}
    closed = oxygen_with_decaying_source_closed_room(time, **room)
    exhaust = oxygen_with_decaying_source_exhaust(time, **room, exhaust=0.0)
    assert_allclose(exhaust, closed, atol=1e-14)
    supply = oxygen_with_decaying_source_supply(time, **room, supply=0.0)
    assert_allclose(supply, closed, atol=1e-13)


def test_the_end_of_a_closed_room_is_all_gas_mixed_at_once():
    """Methods D: C0 exp(-V_g/V), the gas being R0/lambda."""
    end = oxygen_with_decaying_source_closed_room(1e6, **SOURCE)
    assert_allclose(end, oxygen_after_mixing(0.15 / 0.005, 100.0), rtol=1e-12)


def test_a_short_puff_is_purged_long_after_as_a_release_at_once():
    """Closed: what a puff of R0/lambda leaves decays with Q/V, 1/(1 - k/lambda) to begin with."""
    puff = {"initial_release": 0.001, "decay_rate": 0.1, "volume": 100.0}
    oxygen = oxygen_with_decaying_source_exhaust(1e4, **puff, exhaust=0.01)
    left = 0.001 / 100.0 / (0.1 - 1e-4) * np.exp(-1.0)
    assert_allclose(1.0 - oxygen / OXYGEN_IN_AIR, left, rtol=1e-9)


def test_the_room_starts_as_it_was_and_ends_clean():
    for formula, air in (
        (oxygen_with_decaying_source_exhaust, "exhaust"),
        (oxygen_with_decaying_source_supply, "supply"),
    ):
        oxygen = formula([0.0, 1e7], **SOURCE, **{air: 0.2}, oxygen_before=0.19)
        assert_allclose(oxygen, [0.19, OXYGEN_IN_AIR], rtol=1e-14)


def test_decaying_sources_broadcast_rows_against_columns():
    time, volume = np.array([[0.0], [60.0], [600.0]]), np.array([50.0, 100.0])
    room = {**SOURCE, "volume": volume}
    by_row = oxygen_with_decaying_source_supply(time, **room, supply=0.2)
    assert by_row.shape == (3, 2)
    single = oxygen_with_decaying_source_supply(600.0, **{**room, "volume": 100.0}, supply=0.2)
    assert np.shape(single) == ()
    assert_allclose(by_row[2, 1], single, rtol=1e-13)
    assert oxygen_with_decaying_source_exhaust(time, **room, exhaust=0.2).shape == (3, 2)
    assert oxygen_with_decaying_source_closed_room(time, **room).shape == (3, 2)
    lowest = time_of_lowest_oxygen_with_decaying_source_exhaust(**room, exhaust=0.2)
    assert lowest.shape == (2,)


@pytest.mark.parametrize("wrong", [-0.1, np.nan])
@pytest.mark.parametrize(
    "named", ["time", "initial_release", "decay_rate", "volume", "oxygen_before", "supply"]
)
def test_decaying_sources_refuse_what_is_none(named, wrong):
    inputs = {"time": 60.0, **SOURCE, "oxygen_before": 0.2, "supply": 0.2, named: wrong}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        oxygen_with_decaying_source_supply(**inputs)
    inputs["exhaust"] = inputs.pop("supply")
    named = "exhaust" if named == "supply" else named
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        oxygen_with_decaying_source_exhaust(**inputs)
    del inputs["exhaust"]
    if named != "exhaust":
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            oxygen_with_decaying_source_closed_room(**inputs)


@pytest.mark.parametrize("named", ["initial_release", "decay_rate", "volume", "exhaust"])
def test_no_lowest_point_without_release_or_fan(named):
    inputs = {**SOURCE, "exhaust": 0.2, named: 0.0}
    with pytest.raises(OutOfRange, match=f"^{named} must be above 0"):
        time_of_lowest_oxygen_with_decaying_source_exhaust(**inputs)
