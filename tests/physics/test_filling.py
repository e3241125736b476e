"""Outside: the property library's densities, printed enthalpies of steel and of boiling liquids."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from service.physics.constants import STANDARD_PRESSURE
from service.physics.errors import OutOfRange
from service.physics.filling import (
    cool_down_liquid,
    filling_gas_rate,
    filling_time,
    flash_fraction,
    vapour_and_snow_fraction,
)
from service.physics.fluids import FLUIDS

NITROGEN, HELIUM = FLUIDS["nitrogen"], FLUIDS["helium"]
# Heat that 304 steel gives up from 293 K to 77 K and to 4.2 K, by the NIST fit of its heat
# capacity. [J/kg]
STEEL_TO_77_K, STEEL_TO_4_K = 83.3e3, 89.0e3


def test_a_kilogram_of_steel_takes_as_much_liquid_as_the_balance_says():
    """Methods G2: 0.418 to 0.195 kg of nitrogen, 4.33 to 0.0582 kg of helium."""
    share = np.array([0.0, 1.0])
    nitrogen = cool_down_liquid(
        1.0,
        STEEL_TO_77_K,
        NITROGEN.latent_heat_j_kg,
        sensible_heat=NITROGEN.sensible_heat_to_20c_j_kg,
        use_of_cold_gas=share,
    )
    assert_allclose(nitrogen, [0.418, 0.195], rtol=3e-3)
    helium = cool_down_liquid(
        1.0,
        STEEL_TO_4_K,
        HELIUM.latent_heat_j_kg,
        sensible_heat=HELIUM.sensible_heat_to_20c_j_kg,
        use_of_cold_gas=share,
    )
    assert_allclose(helium, [4.33, 0.0582], rtol=2e-3)


def test_steel_takes_as_many_litres_as_the_handbooks_print():
    """R. B. Jacobs (1962), as reprinted in cryogenic handbooks, from memory.

    Litres a kilogram of stainless steel from 300 K, by latent heat alone: 0.54 of nitrogen, 34 of
    helium.
    """
    kilograms = cool_down_liquid(
        1.0,
        [STEEL_TO_77_K, STEEL_TO_4_K],
        [NITROGEN.latent_heat_j_kg, HELIUM.latent_heat_j_kg],
    )
    litres = 1000.0 * kilograms / [NITROGEN.liquid_density_kg_m3, HELIUM.liquid_density_kg_m3]
    # The table starts 7 K warmer, and takes 0.12 to 0.125 kg/L for helium.
    assert_allclose(litres, [0.54, 34.0], rtol=0.05)


def test_nitrogen_at_four_bar_flashes_by_a_seventh():
    """A-7: 0.1464 by the enthalpies of methods A6."""
    assert_allclose(flash_fraction("nitrogen", 4e5), 0.1464, rtol=1e-2)


def test_a_boiling_liquid_flashes_as_printed_enthalpies_say():
    """Saturated enthalpies that the authors of the equations print.

    Span et al. (2000), page 1403; Tegeler et al. (1999), table 33; Setzmann and Wagner (1991),
    table 39; seen in the stored checks of a public implementation.
    """
    nitrogen = flash_fraction("nitrogen", 0.77827e6, 0.13687e6)
    assert_allclose(nitrogen, (3265.7 - 2050.8) / (2215.8 + 3265.7), rtol=1e-3)
    argon = flash_fraction("argon", 1.2130e6, 0.13351e6)
    assert_allclose(argon, (269.61 - 233.48) / (269.61 - 110.55), rtol=1e-3)
    methane = flash_fraction("methane", 0.64118e6, 0.088130e6)
    assert_allclose(methane, (916.75 - 807.74) / (916.75 - 402.92), rtol=1e-3)


def test_above_two_bar_eight_the_flash_alone_is_a_tenth():
    """Judging 1: above 2.8 bar absolute the flash alone exceeds 10 %."""
    assert flash_fraction("nitrogen", 2.7e5) < 0.10 < flash_fraction("nitrogen", 2.85e5)


def test_liquid_carbon_dioxide_becomes_half_snow():
    """A-8: 0.535 and 0.465, by Clausius and Clapeyron on the sublimation line."""
    vapour, snow = vapour_and_snow_fraction(20e5)
    assert_allclose([vapour, snow], [0.535, 0.465], rtol=2e-2)


def test_carbon_dioxide_at_its_triple_point_becomes_snow_as_printed_enthalpies_say():
    """Liquid at the triple point lies 350.38 kJ/kg below its vapour: Span and Wagner, table 34.

    The vapour at 194.7 K lies about 5 kJ/kg below that at the triple point (gas of 0.77 kJ/(kg K)
    and the departure of 0.5 MPa, from memory), so 345 of the 573 kJ/kg of sublimation remain.
    """
    _, snow = vapour_and_snow_fraction(5.18e5)
    assert_allclose(snow, 345.0 / 573.0, rtol=0.02)


def test_the_gas_of_a_filling_is_that_of_its_liquid():
    """A-2: a litre of nitrogen is 692.02 L of gas at 20 degrees Celsius; 10 L/min, a tenth lost."""
    rate = filling_gas_rate(10.0 / 60_000.0, 0.1, 806.08, 1.1648)
    assert_allclose(rate, 10.0 / 60_000.0 * 0.1 * 692.02, rtol=1e-4)
    assert_allclose(filling_time(0.2, 10.0 / 60_000.0), 1200.0)
    # What is lost while a vessel is filled is a tenth of what it takes.
    assert_allclose(rate * filling_time(0.2, 10.0 / 60_000.0), 0.02 * 692.02, rtol=1e-4)


@given(
    slug=st.sampled_from(sorted(set(FLUIDS) - {"carbon-dioxide"})),
    pressures=st.tuples(st.floats(1e5, 6e6), st.floats(1e5, 6e6)),
)
def test_more_pressure_never_flashes_less(slug, pressures):
    low, high = flash_fraction(slug, sorted(pressures))
    assert 0.0 <= low <= high <= 1.0


def test_a_flash_is_nothing_without_a_fall_and_all_above_the_critical_pressure():
    shares = flash_fraction("helium", [[0.5e5], [101_325.0], [2.3e5], [1e7]])
    assert shares.shape == (4, 1)
    assert shares.ravel().tolist() == [0.0, 0.0, 1.0, 1.0]
    assert flash_fraction("nitrogen", 4e5).shape == ()


def test_filling_broadcasts_and_loses_nothing_without_a_flow():
    assert filling_gas_rate(np.zeros((3, 1)), 0.1, [800.0, 900.0], 1.2).shape == (3, 2)
    assert filling_gas_rate(0.0, 1.0, 800.0, 1.2) == 0.0
    assert cool_down_liquid([1.0, 2.0], 1.0, 1.0).tolist() == [1.0, 2.0]
    vapour, snow = vapour_and_snow_fraction([[6e5], [20e5]])
    assert vapour.shape == snow.shape == (2, 1)
    assert_allclose(vapour + snow, 1.0)


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
def test_filling_refuses_what_is_none(wrong):
    with pytest.raises(OutOfRange, match=r"^flow must be"):
        filling_gas_rate(wrong, 0.1, 800.0, 1.2)
    with pytest.raises(OutOfRange, match=r"^loss_fraction must be"):
        filling_gas_rate(1.0, wrong, 800.0, 1.2)
    with pytest.raises(OutOfRange, match=r"^liquid_density must be"):
        filling_gas_rate(1.0, 0.1, wrong, 1.2)
    with pytest.raises(OutOfRange, match=r"^gas_density must be"):
        filling_gas_rate(1.0, 0.1, 800.0, wrong)
    with pytest.raises(OutOfRange, match=r"^capacity must be"):
        filling_time(wrong, 1.0)
    with pytest.raises(OutOfRange, match=r"^flow must be"):
        filling_time(1.0, wrong)
    with pytest.raises(OutOfRange, match=r"^source_pressure must be"):
        flash_fraction("nitrogen", wrong)
    with pytest.raises(OutOfRange, match=r"^to_pressure must be"):
        flash_fraction("nitrogen", 4e5, wrong)
    with pytest.raises(OutOfRange, match=r"^source_pressure must be"):
        vapour_and_snow_fraction(wrong)


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
@pytest.mark.parametrize(
    "named",
    ["metal_mass", "enthalpy_change", "latent_heat", "sensible_heat", "use_of_cold_gas"],
)
def test_a_cool_down_refuses_what_is_none(named, wrong):
    inputs = {"metal_mass": 1.0, "enthalpy_change": 1.0, "latent_heat": 1.0, named: wrong}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        cool_down_liquid(**inputs)


def test_what_does_not_boil_is_refused():
    with pytest.raises(OutOfRange, match=r"^pressure must be from .* where carbon-dioxide boils"):
        flash_fraction("carbon-dioxide", 20e5)
    with pytest.raises(OutOfRange, match=r"^pressure must be from .* where carbon-dioxide boils"):
        vapour_and_snow_fraction(STANDARD_PRESSURE)
    with pytest.raises(OutOfRange, match=r"^pressure must be from .* where carbon-dioxide boils"):
        vapour_and_snow_fraction(8e6)
    with pytest.raises(OutOfRange, match=r"^fluid_key must be one of"):
        flash_fraction("acetylene", 4e5)
