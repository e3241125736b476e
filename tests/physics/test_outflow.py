"""Broken lines: methods G6, and a general-purpose library of pipes and nozzles."""

import fluids
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from service.physics.constants import GAS_CONSTANT
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.outflow import (
    bore_area,
    critical_pressure_ratio,
    gas_outflow,
    liquid_outflow,
)

NITROGEN = {"molar_mass": 0.0280135, "temperature": 293.15, "gamma": 1.4}
OUTSIDE = 101_325.0


def test_liquid_from_a_hole_is_as_worked_for_check_g_6():
    """Methods G-6: nitrogen saturated at 4 bar absolute, 10 mm, Cd 0.62."""
    flow = liquid_outflow(bore_area(0.010), 738.6, 4e5, OUTSIDE)
    assert_allclose(flow, 1.0228, rtol=3e-3)


def test_gas_through_a_restrictor_is_as_worked_for_check_g_7():
    """Methods G-7: 11 bar absolute, 20 degrees Celsius, 4 mm, Cd 0.85, choked."""
    flow = gas_outflow(bore_area(0.004), 11e5, OUTSIDE, **NITROGEN, discharge_coefficient=0.85)
    assert_allclose(flow, 0.027275, rtol=3e-3)


def test_gas_that_does_not_choke_is_as_worked_for_check_g_8():
    """Methods G-8: 1.5 bar absolute to the atmosphere, 10 mm, Cd 0.62."""
    flow = gas_outflow(bore_area(0.010), 1.5e5, OUTSIDE, **NITROGEN)
    assert_allclose(flow, 0.016120, rtol=3e-3)


@pytest.mark.parametrize("gamma", [1.2828, 1.3083, 1.4, 1.6665])
def test_the_critical_ratio_is_that_of_the_library(gamma):
    """fluids 1.3.1, `critical_pressure` of isentropic flow."""
    wanted = fluids.P_critical_flow(1e6, gamma) / 1e6
    assert_allclose(critical_pressure_ratio(gamma), wanted, rtol=1e-12)


@pytest.mark.parametrize("gas", ["helium", "hydrogen", "nitrogen", "argon", "carbon-dioxide"])
@pytest.mark.parametrize("upstream", [3e5, 11e5, 200e5])
def test_choked_flow_is_density_times_the_speed_of_sound_at_the_throat(gas, upstream):
    """The state at the throat from the isentropic relations of fluids 1.3.1."""
    molar_mass, gamma, still = FLUIDS[gas].molar_mass_kg_mol, FLUIDS[gas].gamma, 293.15
    throat_temperature = fluids.T_critical_flow(still, gamma)
    throat_pressure = fluids.P_critical_flow(upstream, gamma)
    density = throat_pressure * molar_mass / (GAS_CONSTANT * throat_temperature)
    sound = np.sqrt(gamma * GAS_CONSTANT * throat_temperature / molar_mass)
    flow = gas_outflow(
        1e-4, upstream, OUTSIDE,
        molar_mass=molar_mass, temperature=still, gamma=gamma, discharge_coefficient=1.0,
    )  # fmt: skip
    assert_allclose(flow, 1e-4 * density * sound, rtol=1e-9)


@pytest.mark.parametrize("gas", ["helium", "hydrogen", "nitrogen", "argon", "carbon-dioxide"])
@pytest.mark.parametrize("upstream", [1.1e5, 1.3e5, 1.6e5, 1.8e5])
def test_flow_that_does_not_choke_is_that_of_the_librarys_nozzle(gas, upstream):
    """fluids 1.3.1: expansibility of a nozzle of vanishing diameter ratio, after ISO 5167."""
    molar_mass, gamma, still = FLUIDS[gas].molar_mass_kg_mol, FLUIDS[gas].gamma, 293.15
    density = upstream * molar_mass / (GAS_CONSTANT * still)
    expansibility = fluids.flow_meter.nozzle_expansibility(
        D=1.0, Do=1e-3, P1=upstream, P2=OUTSIDE, k=gamma
    )
    wanted = expansibility * 1e-4 * np.sqrt(2.0 * density * (upstream - OUTSIDE))
    flow = gas_outflow(
        1e-4, upstream, OUTSIDE,
        molar_mass=molar_mass, temperature=still, gamma=gamma, discharge_coefficient=1.0,
    )  # fmt: skip
    assert_allclose(flow, wanted, rtol=1e-6)


@pytest.mark.parametrize(("bore", "upstream"), [(0.006, 2e5), (0.012, 4e5), (0.025, 7e5)])
def test_liquid_from_a_sharp_edge_is_that_of_the_librarys_orifice(bore, upstream):
    """fluids 1.3.1: flow meter of a small ratio of diameters with the same coefficient."""
    wanted = fluids.flow_meter.flow_meter_discharge(
        D=10.0, Do=bore, P1=upstream, P2=OUTSIDE, rho=806.08, C=0.62, expansibility=1.0
    )
    assert_allclose(liquid_outflow(bore_area(bore), 806.08, upstream, OUTSIDE), wanted, rtol=1e-6)


def test_at_the_critical_ratio_the_two_forms_meet():
    upstream = OUTSIDE / critical_pressure_ratio(1.4)
    below, above = (
        gas_outflow(1e-4, upstream * (1.0 + shift), OUTSIDE, **NITROGEN) for shift in (-1e-7, 1e-7)
    )
    assert_allclose(below, above, rtol=1e-6)


@given(
    st.floats(1e-6, 1e-2), st.floats(0.5e5, 300e5), st.floats(0.5e5, 300e5), st.floats(1.01, 1.67)
)
def test_more_pressure_or_a_larger_hole_never_lets_less_gas_out(area, one, other, gamma):
    low, high = sorted((one, other))
    given_gas = {**NITROGEN, "gamma": gamma}
    less = gas_outflow(area, low, OUTSIDE, **given_gas)
    assert gas_outflow(area, high, OUTSIDE, **given_gas) >= less * (1.0 - 1e-12)
    assert gas_outflow(2.0 * area, low, OUTSIDE, **given_gas) >= less
    assert liquid_outflow(area, 806.0, high, OUTSIDE) >= liquid_outflow(area, 806.0, low, OUTSIDE)


def test_nothing_flows_against_a_pressure():
    assert liquid_outflow(1e-4, 806.0, 1e5, 2e5) == 0.0
    assert gas_outflow(1e-4, 1e5, 2e5, **NITROGEN) == 0.0


def test_many_lines_are_taken_at_once():
    flow = gas_outflow(np.array([1e-4, 2e-4])[:, np.newaxis], [2e5, 3e5, 4e5], OUTSIDE, **NITROGEN)
    assert flow.shape == (2, 3)
    assert_allclose(flow[1], 2.0 * flow[0])


@pytest.mark.parametrize(
    ("name", "changed"),
    [
        ("upstream_pressure", {"upstream_pressure": 0.0}),
        ("downstream_pressure", {"downstream_pressure": np.nan}),
        ("gamma", {"gamma": 1.0}),
        ("temperature", {"temperature": -1.0}),
        ("area", {"area": -1.0}),
        ("molar_mass", {"molar_mass": np.nan}),
        ("discharge_coefficient", {"discharge_coefficient": np.nan}),
    ],
)
def test_what_cannot_be_is_refused(name, changed):
    values = {"area": 1e-4, "upstream_pressure": 2e5, "downstream_pressure": 1e5, **NITROGEN}
    with pytest.raises(OutOfRange, match=name):
        gas_outflow(**{**values, **changed})
    with pytest.raises(OutOfRange, match="bore"):
        bore_area(0.0)
