"""Outside: an ODE solver, and the standard atmosphere."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from service.physics.ambient import station_pressure
from service.physics.constants import OXYGEN_IN_AIR, STANDARD_PRESSURE
from service.physics.detector import time_constant
from service.physics.errors import OutOfRange
from service.physics.monitors import (
    error_of_reading,
    lag_of_reading,
    reading_of_cell_zeroed_elsewhere,
)


@pytest.mark.parametrize(("t90", "delay"), [(30.0, 10.0), (15.0, 0.0), (60.0, 30.0)])
def test_a_reading_trails_a_ramp_as_an_ode_solver_says(t90, delay):
    """M3: scipy DOP853 on tau dy/dt = C(t - t_d) - y, after twenty time constants."""
    slope, tau = -1e-5, float(time_constant(t90))
    end = delay + 20.0 * tau

    def fraction(time):
        return OXYGEN_IN_AIR + slope * time

    def lagging(time, reading):
        return (fraction(max(time - delay, 0.0)) - reading) / tau

    # From where the ramp reaches the sensor, so that no step crosses the bend.
    still = [OXYGEN_IN_AIR]
    # The integrator's own first step underflows harmlessly.
    with np.errstate(all="ignore"):
        solved = solve_ivp(lagging, (delay, end), still, "DOP853", rtol=1e-11, atol=1e-13)
    reading = solved.y[0, -1]
    assert_allclose(reading - fraction(end), error_of_reading(slope, tau, delay=delay), rtol=1e-6)
    assert_allclose(reading, fraction(end - lag_of_reading(tau, delay=delay)), rtol=1e-9)


def test_a_cell_zeroed_at_sea_level_reads_low_on_a_mountain():
    """Methods M4 and B-1: 17.5 % at 1500 m, where ISO 2533 has 84 556 Pa."""
    reading = reading_of_cell_zeroed_elsewhere(OXYGEN_IN_AIR, 84556.0, STANDARD_PRESSURE)
    assert_allclose(reading, 0.175, atol=5e-4)
    by_height = reading_of_cell_zeroed_elsewhere(
        OXYGEN_IN_AIR, station_pressure(1500.0), STANDARD_PRESSURE
    )
    assert_allclose(by_height, 0.175, atol=5e-4)


def test_a_cell_carried_down_hides_a_lack_of_oxygen():
    """By Dalton's law: 17.5 % at sea level is the partial pressure of clean air at 1500 m."""
    reading = reading_of_cell_zeroed_elsewhere(0.17483, STANDARD_PRESSURE, 84556.0)
    assert_allclose(reading, OXYGEN_IN_AIR, rtol=1e-3)


def test_a_cell_zeroed_where_it_hangs_reads_the_fraction():
    pressures = np.array([70_000.0, 101_325.0])
    assert_allclose(reading_of_cell_zeroed_elsewhere(0.195, pressures, pressures), 0.195)


def test_readings_broadcast_and_a_steady_room_is_read_right():
    assert error_of_reading(0.0, 13.0) == 0.0
    assert error_of_reading(np.zeros((3, 1)), [13.0, 6.5]).shape == (3, 2)
    assert lag_of_reading([10.0, 20.0], delay=[[0.0], [5.0]]).tolist() == [[10, 20], [15, 25]]
    assert error_of_reading(1e-4, 10.0) < 0.0 < error_of_reading(-1e-4, 10.0)


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
def test_monitors_refuse_what_is_none(wrong):
    with pytest.raises(OutOfRange, match=r"^constant must be"):
        lag_of_reading(wrong)
    with pytest.raises(OutOfRange, match=r"^delay must be"):
        error_of_reading(1e-4, 13.0, delay=wrong)
    with pytest.raises(OutOfRange, match=r"^slope must be"):
        error_of_reading(np.nan, 13.0)
    for named in ("oxygen", "station_pressure", "zeroed_pressure"):
        inputs = {"oxygen": 0.2, "station_pressure": 1e5, "zeroed_pressure": 1e5, named: wrong}
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            reading_of_cell_zeroed_elsewhere(**inputs)
