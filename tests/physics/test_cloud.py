"""Cold clouds: the tables of methods F4 to F6, whose enthalpies are CoolProp's."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from service.physics.cloud import (
    AIR_DEW_POINT,
    air_to_evaporate,
    cloud_density,
    cloud_oxygen,
    cloud_temperature,
    compact_layer,
)
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS

# Methods F4: released nitrogen, oxygen, temperature and density from vapour, and from liquid.
TABLE = np.array(
    [
        [0.0692, 0.1950, 278.1, 1.267, 264.8, 1.330],
        [0.1408, 0.1800, 262.4, 1.339, 235.5, 1.492],
        [0.2840, 0.1500, 231.2, 1.512, 176.9, 1.977],
        [0.4272, 0.1200, 200.0, 1.740, 118.8, 2.931],
        [0.5000, 0.1047, 184.2, 1.885, 89.8, 3.866],
    ]
)
SHARE, ROOM = TABLE[:, 0], 293.15
# Carbon dioxide does not boil at the pressure of a room.
BOILING = sorted(set(FLUIDS) - {"carbon-dioxide"})


def test_a_cloud_of_nitrogen_is_as_in_the_table():
    """Methods F4, and F-4 for a half: 184.20 K and 1.8849 kg/m3."""
    assert_allclose(cloud_oxygen("nitrogen", SHARE), TABLE[:, 1], atol=1e-4)
    for from_liquid, kelvin, density in ((False, 2, 3), (True, 4, 5)):
        found = cloud_temperature("nitrogen", SHARE, from_liquid=from_liquid)
        assert_allclose(found, TABLE[:, kelvin], atol=0.2)
        assert_allclose(cloud_density("nitrogen", SHARE, found), TABLE[:, density], rtol=0.01)


@pytest.mark.parametrize(("share", "off"), [(0.07, 0.2), (0.25, 0.6), (0.5, 1.1)])
def test_a_cloud_of_nitrogen_vapour_is_nearly_that_of_one_heat_capacity(share, off):
    """With 29.1 J/(mol K) for both, the mixture is the mean by mole; methods F4 say how far off."""
    mean = share * FLUIDS["nitrogen"].boiling_k + (1.0 - share) * ROOM
    assert_allclose(cloud_temperature("nitrogen", share), mean, atol=off + 0.1)


@pytest.mark.parametrize("fluid", BOILING)
def test_more_cold_gas_makes_a_colder_cloud_and_liquid_a_colder_one_still(fluid):
    shares = np.linspace(0.01, 0.15, 8)
    from_vapour = cloud_temperature(fluid, shares)
    from_liquid = cloud_temperature(fluid, shares, from_liquid=True)
    assert np.all(np.diff(from_vapour) < 0.0)
    assert np.all(from_liquid < from_vapour)
    assert from_vapour.max() < ROOM
    assert from_liquid.min() > max(AIR_DEW_POINT, FLUIDS[fluid].boiling_k)


def test_a_compact_layer_is_as_worked_for_check_f_5():
    """Methods F-5: 6.92 m3 in a layer of 30 m3, X 0.1744 and C 0.1730."""
    share, oxygen = compact_layer("nitrogen", 6.92, 30.0)
    assert_allclose((share, oxygen), (0.1744, 0.1730), rtol=0.002)


def test_a_compact_layer_holds_the_mixture_of_the_table_even_where_it_is_smaller_than_warm_gas():
    """Methods F4, from liquid: the volume that each of its mixtures takes, for 7 m3 of warm gas.

    A share of 0.4272 at 118.8 K makes a layer smaller than that.
    """
    layer = 7.0 * TABLE[:, 4] / (ROOM * SHARE)
    assert layer[-2] < 7.0 < layer[-3]
    share, oxygen = compact_layer("nitrogen", 7.0, layer)
    assert_allclose(share, SHARE, rtol=0.005)
    assert_allclose(oxygen, TABLE[:, 1], atol=1e-3)


def test_a_layer_of_oxygen_is_richer_than_air_and_one_of_air_is_as_before():
    """Balance of oxygen: pure oxygen brings its own, and air is what it falls into."""
    share, rich = compact_layer("oxygen", 6.92, 30.0)
    assert_allclose(rich, 0.2095 + 0.7905 * share, rtol=1e-12)
    assert_allclose(compact_layer("air", 6.92, 30.0)[1], OXYGEN_IN_AIR, rtol=1e-12)


def test_helium_turns_from_heavy_to_light_as_worked_for_check_f_6():
    """Methods F-6: lighter than room air below a mole fraction of 0.632, within 0.01."""
    air = 1.2041
    shares = np.array([0.622, 0.642])
    lighter, heavier = cloud_density("helium", shares, cloud_temperature("helium", shares)) - air
    assert lighter < 0.0 < heavier


def test_air_that_evaporates_nitrogen_is_as_much_as_the_methods_say():
    """Methods F4: 0.928 kg of air a kilogram."""
    assert_allclose(air_to_evaporate("nitrogen"), 0.928, rtol=1e-3)


def test_no_more_than_53_in_a_hundred_is_nitrogen_that_air_alone_evaporates():
    """Methods F4: at most 53 mol% near 82 K."""
    assert 81.7 < cloud_temperature("nitrogen", 0.515, from_liquid=True) < 84.5
    with pytest.raises(OutOfRange, match=r"released_fraction must be so small .* above 81\.7 K"):
        cloud_temperature("nitrogen", 0.535, from_liquid=True)


def test_many_clouds_are_taken_at_once():
    gas = np.array([[5.0], [6.92]])
    share, oxygen = compact_layer("nitrogen", gas, [20.0, 30.0, 60.0])
    assert share.shape == oxygen.shape == (2, 3)
    assert_allclose(share[1, 1], compact_layer("nitrogen", 6.92, 30.0)[0], rtol=1e-9)
    assert cloud_temperature("nitrogen", share).shape == (2, 3)
    assert cloud_temperature("nitrogen", 0.5).shape == ()


@pytest.mark.parametrize("share", [0.0, 1.0, -0.1, np.nan])
def test_a_share_that_is_none_is_refused(share):
    for call in (cloud_temperature, cloud_oxygen):
        with pytest.raises(OutOfRange, match="released_fraction"):
            call("nitrogen", share)


@pytest.mark.parametrize("kelvin", [np.nan, np.inf, 70.0, 81.7])
def test_a_room_that_is_not_warmer_than_its_cloud_is_refused(kelvin):
    with pytest.raises(OutOfRange, match="room_temperature"):
        cloud_temperature("nitrogen", 0.1, room_temperature=kelvin)


def test_a_layer_too_small_for_a_cloud_without_drops_is_refused():
    with pytest.raises(OutOfRange, match="layer_volume"):
        compact_layer("nitrogen", 10.0, [20.0, 4.0])
    with pytest.raises(OutOfRange, match="gas_volume"):
        compact_layer("nitrogen", np.nan, 9.0)


def test_a_fluid_that_is_not_listed_or_does_not_boil_is_refused():
    for call in (cloud_oxygen, cloud_temperature):
        with pytest.raises(OutOfRange, match="fluid_key"):
            call("phlogiston", 0.5)
    with pytest.raises(OutOfRange, match="fluid_key"):
        cloud_density("phlogiston", 0.5, 200.0)
    with pytest.raises(OutOfRange, match="boils"):
        cloud_temperature("carbon-dioxide", 0.1)
