import numpy as np
import pytest
from numpy.testing import assert_allclose

from service.physics.constants import ROOM_TEMPERATURE, STANDARD_PRESSURE
from service.physics.errors import OutOfRange
from service.physics.evaporation import dry_ice_mass_rate, evaporation_mass_rate, release_rate
from service.physics.fluids import FLUIDS
from service.physics.ventilation import mean_fraction, steady_fraction

STANDARD = {"pressure": STANDARD_PRESSURE, "temperature": ROOM_TEMPERATURE}
NITROGEN, ICE = FLUIDS["nitrogen"], FLUIDS["carbon-dioxide"]


def test_a_large_nitrogen_cylinder_boils_off_as_the_property_library_says():
    """G-1: CoolProp 8.0.0, 230 L at 1.5 % a day."""
    mass = evaporation_mass_rate(0.230 * 0.015, NITROGEN.liquid_density_kg_m3)
    assert_allclose(mass, 3.2187e-05, rtol=3e-3)
    rate = release_rate(mass, NITROGEN.molar_mass_kg_mol, **STANDARD)
    assert_allclose(rate, 2.7633e-05, rtol=3e-3)


def test_dry_ice_fills_a_store_as_its_balance_says():
    """E-1 and E-2, closed, on the real gas volume of CoolProp 8.0.0: 0.5437 m3/kg."""
    mass = dry_ice_mass_rate(50.0, 0.01)
    rate = release_rate(mass, ICE.molar_mass_kg_mol, **STANDARD)
    assert_allclose(rate, 75.510e-6, rtol=7e-3)  # The ideal gas is 0.5 % larger.
    # The marks to hold it against are those of the real volume rate.
    rate, air = 75.510e-6, 40.0 / 3600.0
    assert_allclose(steady_fraction(rate, air, 0.0), 6750e-6, rtol=5e-3)
    assert_allclose(steady_fraction(rate, 0.0, air), 6796e-6, rtol=5e-3)
    means = mean_fraction([900.0, 8 * 3600.0], release=rate, supply=0.0, exhaust=air, volume=40.0)
    assert_allclose(means, [783e-6, 5947e-6], rtol=5e-3)


def test_evaporation_broadcasts_and_starts_at_nothing():
    assert evaporation_mass_rate(np.zeros((3, 1)), [800.0, 900.0]).shape == (3, 2)
    assert dry_ice_mass_rate([[1.0], [2.0]], [0.02, 0.3]).shape == (2, 2)
    assert release_rate(0.0, 0.028, **STANDARD) == 0.0
    assert dry_ice_mass_rate(3600.0, 1.0) == 1.0
    assert evaporation_mass_rate(86.4, 1000.0) == 1.0


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
def test_evaporation_refuses_what_is_none(wrong):
    with pytest.raises(OutOfRange, match=r"^liquid_volume_per_day must be"):
        evaporation_mass_rate(wrong, 800.0)
    with pytest.raises(OutOfRange, match=r"^density must be"):
        evaporation_mass_rate(1.0, wrong)
    with pytest.raises(OutOfRange, match=r"^mass_rate must be"):
        release_rate(wrong, 0.028, **STANDARD)
    with pytest.raises(OutOfRange, match=r"^mass must be"):
        dry_ice_mass_rate(wrong, 0.02)
    with pytest.raises(OutOfRange, match=r"^share_per_hour must be"):
        dry_ice_mass_rate(1.0, wrong)


@pytest.mark.parametrize("named", ["molar_mass", "pressure", "temperature"])
def test_release_rate_refuses_zero(named):
    inputs = {"molar_mass": 0.028, **STANDARD, named: 0.0}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        release_rate(1.0, **inputs)


def test_dry_ice_loses_no_more_than_itself_in_an_hour():
    with pytest.raises(OutOfRange, match=r"^share_per_hour must be from 0 to 1"):
        dry_ice_mass_rate(1.0, 1.01)
