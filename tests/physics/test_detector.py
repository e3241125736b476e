"""Readings of first-order detectors, against printed values and an integrator."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from service.physics.averages import fraction_at
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.detector import alarm_time, reading_after, time_constant
from service.physics.errors import OutOfRange
from service.physics.ventilation import course, oxygen_from_fraction


def integrated_alarm(run_of, level, tau, until):
    """First time a lagging reading passes a level, by SciPy's DOP853 with dense output."""

    def crossing(_, state):
        return state[1] - level

    crossing.terminal = True
    crossing.direction = 1.0
    # The integrator's own first step underflows harmlessly.
    with np.errstate(all="ignore"):
        answer = solve_ivp(
            run_of,
            (0.0, until),
            [0.0, 0.0],
            "DOP853",
            events=crossing,
            rtol=1e-11,
            atol=1e-13,
            max_step=5.0,
        )
    return answer.t_events[0][0] if answer.t_events[0].size else np.nan


def test_time_constant_of_a_sensor_of_thirty_seconds():
    """M-1. Step response 1 - exp(-t/tau): tau = 30 s / ln 10 = 13.0288 s, by hand."""
    assert_allclose(time_constant(30.0), 13.0288, rtol=1e-5)


def test_alarm_of_a_supplied_room_agrees_with_an_integrator():
    """100 m3, 0.2 m3/s supplied, 0.05 m3/s of gas, alarm at 19.5 %: against SciPy's DOP853.

    M-2 and M-3, the root of methods M1: after 193.14 s, when the room itself is at 19.345 %.
    """
    tau = 30.0 / np.log(10.0)
    level = (OXYGEN_IN_AIR - 0.195) / OXYGEN_IN_AIR

    def flows(_, state):
        fraction, reading = state
        return [(0.05 - 0.25 * fraction) / 100.0, (fraction - reading) / tau]

    run = course([[3600.0]], release=0.05, supply=0.2, exhaust=0.0, volume=100.0)
    found = alarm_time(run, np.array([0]), [level], t90=[30.0], delay=[10.0])
    assert_allclose(found, integrated_alarm(flows, level, tau, 3600.0) + 10.0, rtol=1e-7)
    assert_allclose(found, 193.14, atol=0.05)
    assert_allclose(oxygen_from_fraction(fraction_at(run, [found])), 0.19345, atol=1e-5)


@pytest.mark.parametrize("seed", range(12))
def test_alarms_in_rooms_of_several_segments_agree_with_an_integrator(seed):
    """Random rooms and detectors, against SciPy's DOP853."""
    random = np.random.default_rng(seed)
    durations = random.uniform(100.0, 900.0, 3)
    release = random.uniform(0.0, 0.2, 3)
    exhaust, volume, t90 = random.uniform(0.0, 0.3), random.uniform(20.0, 200.0), 40.0
    run = course([durations], release=[release], supply=0.0, exhaust=exhaust, volume=volume)
    level = 0.6 * float(run.highest[0])
    ends, tau = np.cumsum(durations), t90 / np.log(10.0)

    def flows(time, state):
        fraction, reading = state
        gas = release[min(int(np.searchsorted(ends, time)), 2)]
        return [
            (gas - max(gas, exhaust) * fraction) / volume,
            (fraction - reading) / tau,
        ]

    found = alarm_time(run, np.array([0]), [level], t90=[t90], delay=[0.0])
    expected = integrated_alarm(flows, level, tau, float(ends[-1]))
    assert_allclose(found, expected, rtol=1e-5)


def test_a_pulse_that_a_slow_sensor_misses_gives_no_alarm():
    """A step decays with k = 1/50 s; tau = 130 s reads at most (k tau)^(-k tau/(k tau - 1)) of it.

    The peak of (exp(-kt) - exp(-t/tau))/(1 - k tau) has that closed form: 0.219 for k tau = 2.606.
    """
    run = course([[3600.0]], release=0.0, supply=2.0, exhaust=0.0, volume=100.0, start=0.5)
    highest = 0.5 * 2.6058 ** (-2.6058 / 1.6058)
    levels = [highest * 1.01, highest * 0.99]
    found = alarm_time(run, np.array([0, 0]), levels, t90=[300.0, 300.0], delay=[0.0, 0.0])
    assert np.isnan(found[0])
    assert 0.0 < found[1] < 300.0


def test_a_reading_has_its_limit_where_room_and_sensor_are_equally_fast():
    """k tau = 1: y = Gs + (y0 - Gs) e^-s + (G0 - Gs) s e^-s; at s = 1, by hand 1 - 2/e."""
    reading = reading_after(10.0, reading=0.0, start=0.0, steady=1.0, rate=0.1, constant=10.0)
    assert_allclose(reading, 1.0 - 2.0 / np.e, rtol=1e-12)


def test_a_sensor_without_a_response_time_is_refused():
    with pytest.raises(OutOfRange):
        time_constant([0.0])
    with pytest.raises(OutOfRange):
        time_constant([np.nan])


def test_a_sensor_that_lags_a_slow_room_by_a_steady_ramp_reads_true_after_hours():
    """After 100,000 s a 30 s sensor trails the room by its own lag only: M3, by hand.

    The room goes as exp(-kt), so the reading is exp(-kt)/(1 - k tau) once exp(-t/tau) is gone.
    """
    rate, tau, elapsed = 1e-6, 13.0288, 1e5
    reading = reading_after(elapsed, reading=0.0, start=1.0, steady=0.0, rate=rate, constant=tau)
    assert_allclose(reading, np.exp(-rate * elapsed) / (1.0 - rate * tau), rtol=1e-12)


def test_a_room_that_is_still_rising_when_its_reading_has_caught_up_gives_its_alarm():
    """G = Gs + (G0 - Gs) e^-kt, and a reading without lag: t = ln((Gs - G0)/(Gs - level))/k."""
    run = course([[345_600.0]], release=0.05, supply=0.0, exhaust=0.1, volume=100.0, start=5e-4)
    found = alarm_time(run, np.array([0]), [0.1], t90=[1e-3], delay=[0.0])
    assert_allclose(found, np.log((0.5 - 5e-4) / (0.5 - 0.1)) / 1e-3, rtol=1e-4)
