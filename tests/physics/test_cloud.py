"""Cold clouds: the tables of methods F4 to F6, whose enthalpies are CoolProp's."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from service.physics.cloud import cloud_density, cloud_temperature, compact_layer
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS

# Methods F4: released nitrogen, temperature and density from vapour, and from liquid.
TABLE = np.array(
    [
        [0.0692, 278.1, 1.267, 264.8, 1.330],
        [0.1408, 262.4, 1.339, 235.5, 1.492],
        [0.2840, 231.2, 1.512, 176.9, 1.977],
        [0.4272, 200.0, 1.740, 118.8, 2.931],
        [0.5000, 184.2, 1.885, 89.8, 3.866],
    ]
)


def test_a_cloud_of_nitrogen_is_as_in_the_table():
    """Methods F4, and F-4 for a half: 184.20 K and 1.8849 kg/m3."""
    share = TABLE[:, 0]
    for from_liquid, kelvin, density in ((False, 1, 2), (True, 3, 4)):
        found = cloud_temperature("nitrogen", share, from_liquid=from_liquid)
        assert_allclose(found, TABLE[:, kelvin], atol=1.0)
        assert_allclose(cloud_density("nitrogen", share, found), TABLE[:, density], rtol=0.01)


def test_a_compact_layer_is_as_worked_for_check_f_5():
    """Methods F-5: 6.92 m3 in a layer of 30 m3, X 0.1744 and C 0.1730."""
    share, oxygen = compact_layer("nitrogen", 6.92, 30.0)
    assert_allclose((share, oxygen), (0.1744, 0.1730), rtol=0.01)


def test_helium_turns_from_heavy_to_light_as_worked_for_check_f_6():
    """Methods F-6: lighter than room air below a mole fraction of 0.632."""
    air = 1.2041
    shares = np.array([0.612, 0.652])
    lighter, heavier = cloud_density("helium", shares, cloud_temperature("helium", shares)) - air
    assert lighter < 0.0 < heavier


def test_air_that_evaporates_nitrogen_is_as_much_as_the_methods_say():
    """Methods F4: 0.928 kg of air a kilogram; at most 53 mol% of nitrogen near 82 K."""
    low, high = 0.5, 0.6
    for _ in range(12):
        middle = 0.5 * (low + high)
        try:
            cloud_temperature("nitrogen", middle, from_liquid=True)
        except OutOfRange:
            high = middle
        else:
            low = middle
    assert_allclose(low, 0.53, atol=0.01)
    air, nitrogen = FLUIDS["air"].molar_mass_kg_mol, FLUIDS["nitrogen"].molar_mass_kg_mol
    # The methods cool the air to its dew point, this balance to a hair above it.
    assert_allclose((1.0 - low) * air / (low * nitrogen), 0.928, rtol=0.03)


@pytest.mark.parametrize("share", [0.0, 1.0, -0.1, np.nan])
def test_a_share_that_is_none_is_refused(share):
    with pytest.raises(OutOfRange, match="released_fraction"):
        cloud_temperature("nitrogen", share)


def test_a_layer_smaller_than_its_gas_is_refused():
    with pytest.raises(OutOfRange, match="layer_volume"):
        compact_layer("nitrogen", 10.0, 9.0)
