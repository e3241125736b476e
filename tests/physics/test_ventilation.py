import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from service.physics.constants import OXYGEN_IN_AIR
from service.physics.errors import OutOfRange
from service.physics.ventilation import (
    counted,
    dilution_rate,
    exhaust_to_hold,
    exhaust_to_hold_oxygen,
    flow_to_restore,
    fraction_after,
    fraction_from_oxygen,
    mean_fraction,
    outflow,
    oxygen_from_fraction,
    purge_time,
    steady_fraction,
    supply_to_hold,
    supply_to_hold_oxygen,
    time_to_fraction,
)

ROOM = {"release": 0.05, "supply": 0.2, "exhaust": 0.1, "volume": 100.0}

# Nothing, or more than a cubic millimetre a second: less only underflows.
flows = st.just(0.0) | st.floats(1e-9, 1e3)
some_flow = st.floats(1e-6, 1e3)
volumes = st.floats(1.0, 1e5)
durations = st.just(0.0) | st.floats(1e-3, 1e7)
fractions = st.just(0.0) | st.floats(1e-9, 1.0)


def oxygen_after(duration, **room):
    return oxygen_from_fraction(fraction_after(duration, **{"volume": 100.0, **room}))


@pytest.mark.parametrize(
    ("release", "supply", "exhaust", "oxygen", "steady"),
    [
        (0.05, 0.2, 0.0, 0.176949, 0.1676),
        (0.05, 0.0, 0.2, 0.172900, 0.157125),
        (0.1, 0.0, 0.05, 0.114976, 0.0),
        (0.1, 0.05, 0.0, 0.126618, None),
        (0.05, 0.10, 0.12, 0.168059, None),
        (0.05, 0.10, 0.20, 0.172900, 0.157125),
    ],
    ids=["D-1", "D-2", "D-3 exhaust", "D-3 supply", "D-12", "D-13"],
)
def test_ten_minutes_of_release_leave_the_oxygen_of_the_balance(
    release, supply, exhaust, oxygen, steady
):
    """Methods D: closed forms that agree with an ODE solver (DOP853, rtol 1e-11)."""
    room = {"release": release, "supply": supply, "exhaust": exhaust}
    assert_allclose(oxygen_after(600.0, **room), oxygen, atol=1e-6)
    if steady is not None:
        assert_allclose(oxygen_from_fraction(steady_fraction(**room)), steady, atol=1e-6)


def test_recirculated_air_counts_with_its_fresh_share_only():
    """D-11: an identity."""
    recirculated = oxygen_after(600.0, release=0.05, supply=0.25 * 0.8, exhaust=0.0)
    assert_allclose(recirculated, 0.176949, atol=1e-6)
    assert recirculated == oxygen_after(600.0, release=0.05, supply=0.2, exhaust=0.0)


@pytest.mark.parametrize(
    ("release", "supply", "exhaust", "seconds"),
    [(0.05, 0.2, 0.0, 169.897), (0.05, 0.0, 0.2, 162.069), (0.1, 0.0, 0.05, 71.724)],
    ids=["D1", "D2", "D3"],
)
def test_the_deficient_mark_is_reached_when_the_balance_says(release, supply, exhaust, seconds):
    """D-4: closed."""
    time = time_to_fraction(
        fraction_from_oxygen(0.195),
        release=release,
        supply=supply,
        exhaust=exhaust,
        volume=100.0,
        direction="rising",
    )
    assert_allclose(time, seconds, atol=0.01)


def test_the_fan_that_holds_a_mark_is_that_of_the_laboratory_manuals():
    """D-5 and methods D, closed: 13.448 and 14.448 times the release, 6.102 and 7.102 at 18 %."""
    assert_allclose(supply_to_hold_oxygen(0.195, release=0.05), 0.67241, atol=1e-5)
    assert_allclose(exhaust_to_hold_oxygen(0.195, release=0.05), 0.72241, atol=1e-5)
    assert_allclose(supply_to_hold_oxygen([0.195, 0.18], release=1.0), [13.448, 6.102], atol=1e-3)
    assert_allclose(exhaust_to_hold_oxygen([0.195, 0.18], release=1.0), [14.448, 7.102], atol=1e-3)


def test_the_fan_that_holds_hydrogen_below_a_quarter_of_its_lower_limit():
    """E-4, closed: 1 % from 0.001 m3/s."""
    assert_allclose(supply_to_hold(0.01, release=0.001), 0.0990, atol=1e-6)
    assert_allclose(exhaust_to_hold(0.01, release=0.001), 0.1000, atol=1e-6)


def test_a_purge_takes_as_many_air_changes_as_the_manuals_print():
    """D-6 and methods D4, closed: 2.022, 2.671 and 3.841 air changes."""
    bad, good = fraction_from_oxygen([0.10, 0.0, 0.0]), fraction_from_oxygen([0.195, 0.195, 0.205])
    changes = purge_time(bad, good, volume=1.0, flow=1.0)
    assert_allclose(changes, [2.022, 2.671, 3.841], atol=1e-3)
    assert_allclose(purge_time(bad[0], good[0], volume=100.0, flow=0.2), 1010.89, atol=0.05)
    assert_allclose(flow_to_restore(bad[0], good[0], volume=100.0, within=1010.89), 0.2, rtol=1e-4)
    assert purge_time(0.05, 0.1, volume=100.0, flow=0.2) == 0.0
    assert flow_to_restore(0.05, 0.1, volume=100.0, within=60.0) == 0.0


def test_oxygen_enriches_by_what_it_carries_itself():
    """E-3 and E4, closed: 2 L/h of liquid oxygen at 857.3 times its volume, CoolProp 8.0.0."""
    release = 0.002 / 3600.0 * 857.3
    rich = steady_fraction(release, 0.05, 0.0, dilution=dilution_rate(release, 1.0))
    assert_allclose(oxygen_from_fraction(rich), 0.21696, atol=2e-5)
    supply, exhaust = steady_fraction(
        1.0, [30.0, 0.0], [0.0, 31.0], dilution=dilution_rate(1.0, 1.0)
    )
    assert_allclose(oxygen_from_fraction(supply), 0.235, atol=1e-5)
    assert_allclose(oxygen_from_fraction(exhaust), 0.235, atol=1e-5)


def test_a_mark_of_oxygen_is_far_beyond_what_carbon_dioxide_allows():
    """E1 and E-5, identities: 19.5 % means 69 212 ppm, and 3 % carbon dioxide 20.3215 %."""
    assert_allclose(fraction_from_oxygen(0.195), 0.069212, atol=5e-7)
    assert_allclose(oxygen_from_fraction(0.03), 0.203215, atol=1e-9)
    assert_allclose(oxygen_from_fraction([0.04, 0.005]), [0.2011, 0.20845], atol=3e-5)


def test_an_exhaust_smaller_than_the_release_does_nothing():
    """D3: the result does not contain the fan."""
    without = fraction_after(600.0, release=0.1, supply=0.0, exhaust=0.0, volume=100.0)
    with_fan = fraction_after(600.0, release=0.1, supply=0.0, exhaust=0.0999, volume=100.0)
    assert without == with_fan
    assert steady_fraction(0.1, 0.0, 0.0999) == 1.0


def test_one_segment_agrees_with_an_ode_solver_where_the_gas_carries_oxygen():
    """Outside: scipy 1.17.1, DOP853, on the balance of oxygen itself."""
    generator = np.random.default_rng(5)
    for _ in range(20):
        release, supply, exhaust = generator.uniform(0.0, 0.3, 3)
        own, volume, start = generator.uniform([0.0, 20.0, 0.05], [1.0, 300.0, 0.2])
        outside = max(supply, exhaust - release)
        leaving = max(supply + release, exhaust)

        def balance(
            _, oxygen, outside=outside, release=release, own=own, leaving=leaving, v=volume
        ):
            return (OXYGEN_IN_AIR * outside + own * release - leaving * oxygen) / v

        with np.errstate(all="ignore"):
            solved = solve_ivp(balance, (0, 900.0), [start], "DOP853", rtol=1e-11, atol=1e-13)
        after = fraction_after(
            900.0,
            release=release,
            supply=supply,
            exhaust=exhaust,
            volume=volume,
            start=fraction_from_oxygen(start),
            dilution=dilution_rate(release, own),
        )
        assert_allclose(oxygen_from_fraction(after), solved.y[0, -1], atol=1e-9)


@given(durations, flows, flows, flows, volumes, fractions)
def test_fractions_stay_between_none_and_all(duration, release, supply, exhaust, volume, start):
    room = {"release": release, "supply": supply, "exhaust": exhaust, "volume": volume}
    after = fraction_after(duration, **room, start=start)
    assert 0.0 <= after <= 1.0
    assert 0.0 <= mean_fraction(duration, **room, start=start) <= 1.0
    assert 0.0 <= oxygen_from_fraction(after) <= OXYGEN_IN_AIR


@given(durations, flows, flows, flows, volumes, fractions, flows)
def test_more_air_never_lowers_oxygen_and_more_gas_never_raises_it(
    duration, release, supply, exhaust, volume, start, more
):
    room = {"volume": volume, "start": start}
    before = fraction_after(duration, release=release, supply=supply, exhaust=exhaust, **room)
    for flows_now in (
        {"release": release, "supply": supply + more, "exhaust": exhaust},
        {"release": release, "supply": supply, "exhaust": exhaust + more},
    ):
        assert fraction_after(duration, **flows_now, **room) <= before * (1 + 1e-9)
    gassed = fraction_after(
        duration, release=release + more, supply=supply, exhaust=exhaust, **room
    )
    assert gassed >= before * (1 - 1e-9)


@given(durations, flows, flows, flows, volumes, fractions)
def test_gas_is_neither_made_nor_lost(duration, release, supply, exhaust, volume, start):
    """Released = gone out + left."""
    room = {"release": release, "supply": supply, "exhaust": exhaust, "volume": volume}
    mean = mean_fraction(duration, **room, start=start)
    left = (fraction_after(duration, **room, start=start) - start) * volume
    gone = outflow(release, supply, exhaust) * duration * mean
    scale = max(release * duration, start * volume)
    assert_allclose(left + gone, release * duration, rtol=1e-9, atol=1e-9 * scale)


@given(durations, durations, flows, flows, flows, volumes, fractions)
def test_a_pause_for_breath_changes_nothing(first, second, release, supply, exhaust, volume, start):
    room = {"release": release, "supply": supply, "exhaust": exhaust, "volume": volume}
    middle = fraction_after(first, **room, start=start)
    assert_allclose(
        fraction_after(second, **room, start=middle),
        fraction_after(first + second, **room, start=start),
        rtol=1e-9,
        atol=1e-15,
    )


@given(some_flow, flows, flows, volumes, fractions, st.floats(0.01, 0.99))
def test_the_time_to_a_fraction_is_the_time_after_which_it_is_there(
    release, supply, exhaust, volume, start, share
):
    room = {"release": release, "supply": supply, "exhaust": exhaust, "volume": volume}
    steady = steady_fraction(release, supply, exhaust)
    target = start + share * (steady - start)
    direction = "rising" if steady > start else "falling"
    time = time_to_fraction(target, **room, start=start, direction=direction)
    assert_allclose(fraction_after(time, **room, start=start), target, rtol=1e-7, atol=1e-12)


def test_a_fraction_that_is_never_reached_has_no_time():
    """Methods D: null, not a huge number."""
    never = time_to_fraction([0.2, 0.3, 0.9], **{**ROOM, "exhaust": 0.0}, direction="rising")
    assert np.isnan(never).all()
    still = {"release": 0.0, "supply": 0.0, "exhaust": 0.0, "volume": 100.0, "start": 0.1}
    assert np.isnan(time_to_fraction(0.2, **still, direction="rising"))
    assert np.isnan(time_to_fraction(0.05, **still, direction="falling"))


def test_a_fraction_already_there_takes_no_time():
    assert (time_to_fraction([0.1, 0.05], **ROOM, start=0.1, direction="rising") == 0.0).all()
    assert (time_to_fraction([0.1, 0.15], **ROOM, start=0.1, direction="falling") == 0.0).all()


def test_nothing_flows_and_nothing_changes():
    still = {"release": 0.0, "supply": 0.0, "exhaust": 0.0}
    assert fraction_after(1e9, **still, volume=100.0, start=0.3) == 0.3
    assert mean_fraction(1e9, **still, volume=100.0, start=0.3) == 0.3
    assert steady_fraction(**still, start=0.3) == 0.3


def test_the_mean_of_a_long_purge_keeps_its_figures():
    """Closed: G0 V / (Q t), since all the gas has gone out."""
    mean = mean_fraction(1e7, release=0.0, supply=1e3, exhaust=0.0, volume=1.0, start=0.5)
    assert_allclose(mean, 0.5 / 1e10, rtol=1e-12)


def test_an_empty_room_and_no_time_give_the_start_exactly():
    for start in (0.0, 0.1, 1.0 / 3.0, 1.0):
        assert fraction_after(0.0, **ROOM, start=start) == start
        assert mean_fraction(0.0, **ROOM, start=start) == start


def test_a_very_long_time_gives_the_steady_state():
    assert_allclose(fraction_after(1e12, **ROOM, start=1.0), 0.2, rtol=1e-15)
    assert_allclose(mean_fraction(1e12, **ROOM, start=1.0), 0.2, rtol=1e-8)


@pytest.mark.parametrize("turnovers", [1e-9, 1e-4, 0.0999, 0.1001, 1.0, 30.0])
def test_the_mean_is_that_of_the_curve(turnovers):
    """Outside: Gauss-Legendre quadrature of the curve, 40 nodes."""
    duration = turnovers * 100.0 / 0.25
    nodes, weights = np.polynomial.legendre.leggauss(40)
    room = {**ROOM, "start": 0.0}
    curve = fraction_after(duration * (1.0 + nodes) / 2.0, **room)
    assert_allclose(mean_fraction(duration, **room), np.sum(weights * curve) / 2.0, rtol=1e-11)


@given(some_flow, flows, st.floats(0.001, 1.0))
def test_the_flow_that_holds_a_fraction_holds_it_and_no_smaller_one_does(release, other, limit):
    supply = supply_to_hold(limit, release=release, exhaust=other)
    assert steady_fraction(release, supply, other) <= limit * (1 + 1e-12)
    if supply > 0.0:
        assert steady_fraction(release, supply * 0.99, other) > limit * (1 - 1e-12)
    exhaust = exhaust_to_hold(limit, release=release, supply=other)
    assert steady_fraction(release, other, exhaust) <= limit * (1 + 1e-12)
    if exhaust > 0.0:
        assert steady_fraction(release, other, exhaust * 0.99) > limit


def test_no_flow_is_needed_where_the_other_fan_holds():
    assert supply_to_hold(0.25, release=0.05, exhaust=0.2) == 0.0
    assert exhaust_to_hold(0.2, release=0.05, supply=0.2) == 0.0
    assert supply_to_hold(0.1, release=0.05, dilution=-0.01) == 0.0
    assert exhaust_to_hold(1.0, release=0.05) == 0.0


def test_oxygen_and_fraction_undo_each_other():
    oxygen = np.linspace(0.0, 1.0, 21)
    assert_allclose(oxygen_from_fraction(fraction_from_oxygen(oxygen)), oxygen, atol=1e-15)
    assert fraction_from_oxygen(OXYGEN_IN_AIR) == 0.0
    assert oxygen_from_fraction(1.0) == 0.0


def test_ventilation_broadcasts_rows_against_columns():
    release, supply = np.array([[0.01], [0.05], [0.1]]), np.array([0.1, 0.2])
    room = {"release": release, "supply": supply, "exhaust": 0.0, "volume": 100.0}
    assert outflow(release, supply, 0.0).shape == (3, 2)
    assert steady_fraction(release, supply, 0.0).shape == (3, 2)
    assert fraction_after(60.0, **room).shape == (3, 2)
    assert mean_fraction(60.0, **room).shape == (3, 2)
    assert time_to_fraction(0.05, **room, direction="rising").shape == (3, 2)
    assert supply_to_hold([0.1, 0.2], release=release).shape == (3, 2)
    assert exhaust_to_hold([0.1, 0.2], release=release).shape == (3, 2)
    assert purge_time(release, supply, volume=1.0, flow=1.0).shape == (3, 2)
    single = {**room, "release": 0.1, "supply": 0.2}
    assert fraction_after(60.0, **room)[2, 1] == fraction_after(60.0, **single)
    assert np.shape(fraction_after(60.0, **single)) == ()


@pytest.mark.parametrize("wrong", [-0.1, np.nan, np.inf])
@pytest.mark.parametrize("named", ["release", "supply", "exhaust", "volume", "duration"])
def test_ventilation_refuses_flows_that_are_none(named, wrong):
    inputs = {"duration": 60.0, **ROOM, named: [1.0, wrong]}
    for formula in (fraction_after, mean_fraction):
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            formula(**inputs)
    if named != "duration":
        del inputs["duration"]
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            time_to_fraction(0.1, **inputs, direction="rising")


def test_ventilation_refuses_a_room_without_volume():
    with pytest.raises(OutOfRange, match=r"^volume must be above 0"):
        fraction_after(60.0, **{**ROOM, "volume": 0.0})


@pytest.mark.parametrize("named", ["start", "dilution"])
def test_ventilation_refuses_what_is_not_a_number(named):
    for formula in (fraction_after, mean_fraction):
        with pytest.raises(OutOfRange, match=f"^{named} must be finite"):
            formula(60.0, **ROOM, **{named: np.nan})
    with pytest.raises(OutOfRange, match=r"^target must be finite"):
        time_to_fraction(np.nan, **ROOM, direction="rising")
    with pytest.raises(OutOfRange, match=r"^released must be finite"):
        oxygen_from_fraction(np.nan)


def test_no_gas_counts_for_more_than_oxygen_does():
    assert_allclose(counted(1.0, dilution_rate(1.0, 1.0)), 1.0 - 1.0 / OXYGEN_IN_AIR)
    with pytest.raises(OutOfRange, match=r"^dilution must be no more"):
        counted(1.0, 3.8)
    with pytest.raises(OutOfRange, match=r"^dilution must be no more"):
        counted(0.0, -1e-6)


def test_a_direction_is_up_or_down():
    with pytest.raises(OutOfRange, match=r"^direction must be rising or falling"):
        time_to_fraction(0.1, **ROOM, direction="sideways")


@pytest.mark.parametrize("wrong", [0.0, -0.1, np.nan])
def test_a_limit_of_nothing_cannot_be_held(wrong):
    for hold in (supply_to_hold, exhaust_to_hold):
        with pytest.raises(OutOfRange, match=r"^limit must be above 0"):
            hold(wrong, release=0.05)


@pytest.mark.parametrize("wrong", [OXYGEN_IN_AIR, 0.25, -0.1, np.nan])
def test_the_oxygen_of_clean_air_cannot_be_held(wrong):
    for hold in (supply_to_hold_oxygen, exhaust_to_hold_oxygen):
        with pytest.raises(OutOfRange, match=r"^oxygen must be"):
            hold(wrong, release=0.05)


@pytest.mark.parametrize("wrong", [-0.1, np.nan])
def test_a_purge_refuses_what_is_none(wrong):
    good = {"start": 0.5, "target": 0.1, "volume": 100.0}
    for named in (*good, "flow"):
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            purge_time(**{**good, "flow": 0.2, named: wrong})
    for named in (*good, "within"):
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            flow_to_restore(**{**good, "within": 60.0, named: wrong})


@pytest.mark.parametrize("wrong", [-0.1, 1.1, np.nan])
def test_a_gas_has_no_more_oxygen_than_all(wrong):
    with pytest.raises(OutOfRange, match=r"^oxygen_in_gas must be"):
        dilution_rate(1.0, wrong)
