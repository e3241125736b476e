"""Pools on a floor: methods G5, and finite differences of the heat in the floor."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.linalg import solve_banded

from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.pool import (
    CONCRETE,
    CRITICAL_FLUX,
    Floor,
    bund_segments,
    evaporation_rate,
    floor_heat,
    floor_heat_flux,
    growing_pool_rate,
    spread_area,
    time_to_evaporate,
    time_to_spread,
)

NITROGEN = FLUIDS["nitrogen"]
COLDER = 293.15 - NITROGEN.boiling_k  # [K]
LATENT = NITROGEN.latent_heat_j_kg


def floor_by_differences(seconds, steps, boils):
    """Heat a floor has given by the end of each step: implicit differences on a graded grid.

    ``boils`` takes the flux that contact at the boiling point would draw, and gives what is drawn.
    """
    width = 0.25 * np.sqrt(CONCRETE.diffusivity * seconds / steps) * 1.04 ** np.arange(170)
    between = 0.5 * (width[1:] + width[:-1])
    capacity = CONCRETE.conductivity / CONCRETE.diffusivity * width
    step = seconds / steps
    temperature = np.full(width.size, COLDER)
    conductance = CONCRETE.conductivity / between
    surface = CONCRETE.conductivity / (0.5 * width[0])
    given_off, heat = [], 0.0
    for number in range(steps):
        drawn = {}
        for contact in (True, False):
            diagonal = capacity / step
            diagonal[:-1] += conductance
            diagonal[1:] += conductance
            right = capacity / step * temperature
            if contact:
                diagonal[0] += surface
            else:
                right[0] -= drawn["flux"]
            bands = np.zeros((3, width.size))
            bands[0, 1:], bands[1], bands[2, :-1] = -conductance, diagonal, -conductance
            solved = solve_banded((1, 1), bands, right)
            if not contact:
                temperature = solved
                continue
            flux = surface * solved[0]
            drawn["flux"] = boils(flux, number)
            if drawn["flux"] >= flux:
                drawn["flux"], temperature = flux, solved
                break
        heat += drawn["flux"] * step
        given_off.append(heat)
    return np.array(given_off)


def test_a_confined_pool_is_as_worked_for_check_g_4():
    """Methods G-4: 50 L of nitrogen on 5 m2 of concrete; finite differences there give 32.54 kg."""
    mass = 0.05 * NITROGEN.liquid_density_kg_m3
    assert_allclose(time_to_evaporate(mass, 5.0, COLDER, LATENT), 15.34, rtol=5e-3)
    assert_allclose(evaporation_rate(10.0, 5.0, COLDER, LATENT), 1.6269, rtol=5e-3)
    assert_allclose(5.0 * floor_heat(10.0, COLDER) / LATENT, 32.54, rtol=5e-3)


def test_a_growing_pool_is_as_worked_for_check_g_5():
    """Methods G-5: A = pi c t with c 1 m2/s, after 5 s."""
    assert_allclose(growing_pool_rate(5.0, 1.0, COLDER, LATENT), 14.457, rtol=5e-3)


def test_a_growing_pool_is_the_sum_of_its_rings():
    """Each ring wetted at its own time, summed by a fine quadrature of the flux of the slab."""
    wetted = (np.arange(200_000) + 0.5) * 5.0 / 200_000
    # The last ring is new, and its flux has no bound: take the integral in sqrt(t - s).
    rate = np.pi * np.sum(evaporation_rate(5.0 - wetted, 1.0, COLDER, LATENT)) * 5.0 / 200_000
    assert_allclose(growing_pool_rate(5.0, 1.0, COLDER, LATENT), rate, rtol=2e-3)


def test_a_spill_spreads_as_worked_in_the_methods():
    """Methods G5: 50 L to 5 mm in 2.85 s."""
    assert_allclose(time_to_spread(0.05), 2.85, rtol=2e-3)
    assert_allclose(spread_area(0.05), 10.0)


def test_the_heat_of_a_floor_agrees_with_finite_differences():
    """One-dimensional conduction, implicit in time, on a grid that is fine at the surface."""
    found = floor_by_differences(20.0, 4000, lambda flux, _: flux)
    for seconds in (5.0, 10.0, 20.0):
        place = int(seconds / 20.0 * 4000) - 1
        assert_allclose(floor_heat(seconds, COLDER), found[place], rtol=5e-3)


def test_with_a_highest_flux_the_heat_is_no_more_than_finite_differences_allow():
    """A floor spared at first gives a little more later than the formula: within a hundredth."""
    found = floor_by_differences(20.0, 4000, lambda flux, _: min(flux, CRITICAL_FLUX))
    capped = floor_heat(20.0, COLDER, highest_flux=CRITICAL_FLUX)
    whole = floor_heat(20.0, COLDER)
    assert capped <= whole
    assert capped <= found[-1] * 1.005
    assert found[-1] <= whole * 1.005
    # 20 degrees of concrete would give 205 kW/m2 after a second, by the methods.
    assert_allclose(evaporation_rate(1.0, 1.0, COLDER, 1.0), 205_000.0, rtol=5e-3)


def test_the_flux_of_a_floor_is_the_slope_of_its_heat():
    """Central differences of the heat, before and after the highest flux is left."""
    at = np.array([0.2, 0.9, 1.3, 40.0])
    for highest in (np.inf, CRITICAL_FLUX):
        either = [floor_heat(at * (1.0 + up), COLDER, highest_flux=highest) for up in (-1e-5, 1e-5)]
        slope = (either[1] - either[0]) / (2e-5 * at)
        assert_allclose(floor_heat_flux(at, COLDER, highest_flux=highest), slope, rtol=1e-6)


@pytest.mark.parametrize("mass", [0.02, 1.0, 40.304])
def test_a_pool_is_gone_when_the_floor_has_given_its_heat_of_evaporation(mass):
    times = []
    for highest in (np.inf, CRITICAL_FLUX):
        times.append(time_to_evaporate(mass, 5.0, COLDER, LATENT, highest_flux=highest))
        heat = floor_heat(times[-1], COLDER, highest_flux=highest)
        assert_allclose(5.0 * heat, mass * LATENT, rtol=1e-12)
    uncapped, capped = times
    assert uncapped < capped


def bund_by_differences(feed, lasts, area, seconds, steps=6000):
    """Time, and mass that has evaporated: a balance of mass over a floor by finite differences."""
    held, step = {"mass": 0.0}, seconds / steps

    def boils(flux, number):
        there = held["mass"] + (feed * step if number * step < lasts else 0.0)
        drawn = min(flux, there * LATENT / (area * step))
        held["mass"] = there - drawn * area * step / LATENT
        return drawn

    gone = floor_by_differences(seconds, steps, boils) * area / LATENT
    return np.arange(steps + 1) * step, np.concatenate([[0.0], gone])


def highest_amount(at, mass, air_changes):
    """Most gas that a mixed room with so many air changes an hour holds meanwhile."""
    leaves, amount, highest = air_changes / 3600.0, 0.0, 0.0
    for (begin, before), (end, after) in pairwise(zip(at, mass, strict=True)):
        if end > begin:
            steady = (after - before) / (end - begin) / leaves
            amount = steady + (amount - steady) * np.exp(-leaves * (end - begin))
            highest = max(highest, amount)
    return highest


# The floor keeps up a quarter of the feed's time, a 400th and a 3500th of it.
@pytest.mark.parametrize(
    ("feed", "lasts", "area", "seconds"),
    [(0.8, 60.0, 1.5, 120.0), (0.5, 600.0, 0.3, 3600.0), (0.5, 600.0, 0.1, 36_000.0)],
)
def test_at_no_time_has_more_evaporated_in_a_bund_than_is_counted(feed, lasts, area, seconds):
    """A pool fed at a steady rate over a floor by finite differences, with its balance of mass."""
    at, gone = bund_by_differences(feed, lasts, area, seconds)
    durations, rates = bund_segments([feed], [lasts], [area], [COLDER], [LATENT], longest=[seconds])
    ends = np.concatenate([[0.0], np.cumsum(durations[0])])
    counted = np.concatenate([[0.0], np.cumsum(durations[0] * rates[0])])
    told = np.interp(at, ends, counted)
    # A thousandth is left to the differences, whose first steps are coarser than the first piece;
    # a fifth, to the tangents and to a floor that counts as wet at once.
    assert np.all(gone <= told * 1.001)
    assert np.all(gone[50:] >= told[50:] / 1.2)
    for air_changes in (2.0, 6.0, 20.0, 100.0):
        truth = highest_amount(at, gone, air_changes)
        assert truth <= 1.001 * highest_amount(ends, counted, air_changes)


@given(st.floats(1e-3, 10.0), st.floats(1.0, 1e5), st.floats(0.1, 50.0), st.floats(10.0, 290.0))
def test_all_that_runs_into_a_bund_is_gas_in_the_end(feed, lasts, area, colder):
    durations, rates = bund_segments([feed], [lasts], [area], [colder], [LATENT], longest=[1e30])
    assert durations.min() >= 0.0
    assert rates.min() >= 0.0
    assert rates.max() <= feed * (1.0 + 1e-9)
    assert_allclose((durations * rates).sum(), feed * lasts, rtol=1e-12)


def test_a_bund_that_the_floor_keeps_up_with_slows_nothing():
    durations, rates = bund_segments([0.01], [10.0], [50.0], [COLDER], [LATENT], longest=[3600.0])
    assert_allclose(durations[0].sum(), 10.0)
    assert_allclose(rates[0][durations[0] > 0.0], 0.01)


def test_what_comes_off_a_bund_after_the_longest_time_is_left_out():
    given = ([0.5], [np.inf], [0.3], [COLDER], [LATENT])
    durations, rates = bund_segments(*given, longest=[60.0])
    assert_allclose(durations.sum(), 60.0)
    assert 0.0 < (durations * rates).sum() < 0.5 * 60.0


def test_many_bunds_are_taken_at_once():
    feeds, areas = np.array([0.0, 0.01, 0.5, 2.0]), np.array([1.0, 50.0, 0.3, 4.0])
    every = np.ones(4)
    together = bund_segments(
        feeds, 600.0 * every, areas, COLDER * every, LATENT * every, longest=7200.0 * every
    )
    for row in range(4):
        alone = bund_segments(
            feeds[[row]], [600.0], areas[[row]], [COLDER], [LATENT], longest=[7200.0]
        )
        assert_allclose([table[row] for table in together], [table[0] for table in alone])
    assert not together[1][0].any()


@pytest.mark.parametrize(
    ("name", "call"),
    [
        ("time", lambda: floor_heat(-1.0, COLDER)),
        ("area", lambda: time_to_evaporate(1.0, 0.0, COLDER, LATENT)),
        ("latent_heat", lambda: evaporation_rate(1.0, 1.0, COLDER, 0.0)),
        ("liquid_volume", lambda: spread_area(np.nan)),
        ("growth", lambda: growing_pool_rate(1.0, -1.0, COLDER, LATENT)),
        ("highest_flux", lambda: floor_heat(1.0, COLDER, highest_flux=np.nan)),
        ("conductivity", lambda: Floor(np.nan, 1e-6)),
        ("diffusivity", lambda: Floor(1.0, 0.0)),
        ("lasts", lambda: bund_segments([1.0], [np.nan], [1.0], [1.0], [1.0], longest=[1.0])),
        ("longest", lambda: bund_segments([1.0], [1.0], [1.0], [1.0], [1.0], longest=[np.nan])),
        ("temperature_difference", lambda: floor_heat_flux(1.0, np.nan)),
        ("feed", lambda: bund_segments([np.nan], [1.0], [1.0], [1.0], [1.0], longest=[1.0])),
    ],
)
def test_what_cannot_be_is_refused(name, call):
    with pytest.raises(OutOfRange, match=name):
        call()
