"""A quench: methods G7."""

import pytest
from numpy.testing import assert_allclose

from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.quench import PEAK_OVER_MEAN, evaporated_by_energy, quench_rate

HELIUM = FLUIDS["helium"]


def test_a_quench_is_as_worked_for_check_g_9():
    """Methods G-9: 1700 L of helium in 60 s; 0.1663 kg/m3 of gas at 20 C (CoolProp)."""
    mass = 1.7 * HELIUM.liquid_density_kg_m3
    assert_allclose(mass, 211.9, rtol=5e-3)
    gas = mass / 0.1663
    assert_allclose(gas, 1274.0, rtol=5e-3)
    assert_allclose(quench_rate(gas, 60.0), 21.24, rtol=5e-3)
    # Cold, at the mouth, it is the volume of the saturated vapour.
    assert_allclose(quench_rate(mass / HELIUM.vapour_density_kg_m3, 60.0), 0.209, rtol=5e-3)
    assert PEAK_OVER_MEAN == 2.0


def test_the_energy_of_a_magnet_evaporates_as_worked_in_the_methods():
    """Methods G7: 30 H at 500 A is 3.75 MJ, 182 kg or 1463 L."""
    mass = evaporated_by_energy(0.5 * 30.0 * 500.0**2, HELIUM.latent_heat_j_kg)
    assert_allclose(mass, 182.0, rtol=5e-3)
    assert_allclose(1000.0 * mass / HELIUM.liquid_density_kg_m3, 1463.0, rtol=5e-3)


def test_what_cannot_be_is_refused():
    with pytest.raises(OutOfRange, match="duration"):
        quench_rate(1.0, 0.0)
    with pytest.raises(OutOfRange, match="stored_energy"):
        evaporated_by_energy(-1.0, 1.0)
