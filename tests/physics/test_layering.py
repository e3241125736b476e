"""Outside: the property library's densities, and closed forms of the two-zone bound."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from service.physics.constants import ROOM_TEMPERATURE, STANDARD_PRESSURE
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.gas import gas_density, gas_volume_of_liquid
from service.physics.layering import (
    breathing_zone_volume,
    ceiling_zone_volume,
    depth_of_cold_layer,
    depth_of_warm_layer,
    liquid_to_fill_pit,
)
from service.physics.mixing import oxygen_after_displacement

NITROGEN = FLUIDS["nitrogen"]
STANDARD = {"pressure": STANDARD_PRESSURE, "temperature": ROOM_TEMPERATURE}
# Ten litres of liquid nitrogen as gas at 20 degrees Celsius: A-2, 692.02 times, CoolProp 8.0.0.
GAS_OF_TEN_LITRES = 6.9202

lengths = st.floats(0.1, 1e3)
shares = st.floats(0.01, 1.0)


def test_ten_litres_of_nitrogen_lie_as_the_two_zone_bound_says():
    """F-1, closed: floor 20 m2, 2.5 m high; the room, the zone to 1.5 m, the zone to 0.5 m."""
    zones = [
        20.0 * 2.5,
        breathing_zone_volume(20.0, 2.5),
        breathing_zone_volume(20.0, 2.5, zone_height=0.5),
    ]
    oxygen = oxygen_after_displacement(GAS_OF_TEN_LITRES, zones)
    assert_allclose(oxygen, [0.18050, 0.16117, 0.06452], rtol=3e-3)


def test_a_layer_is_as_deep_as_the_densities_say():
    """F-2: 0.0874 m cold and 0.3460 m warm, CoolProp 8.0.0; the ratios of methods F2."""
    mass = 0.010 * NITROGEN.liquid_density_kg_m3
    cold = depth_of_cold_layer(mass, NITROGEN.vapour_density_kg_m3, 20.0)
    assert_allclose(cold, 0.0874, rtol=5e-3)
    warm_gas = gas_volume_of_liquid(
        0.010, NITROGEN.liquid_density_kg_m3, NITROGEN.molar_mass_kg_mol, **STANDARD
    )
    assert_allclose(depth_of_warm_layer(warm_gas, 20.0), 0.3460, rtol=5e-3)
    for slug, ratio in (
        ("nitrogen", 3.96), ("helium", 101.6), ("argon", 3.47), ("carbon-dioxide", 1.53),
    ):  # fmt: skip
        fluid = FLUIDS[slug]
        warm = gas_density(fluid.molar_mass_kg_mol, **STANDARD)
        # The ideal gas is up to 0.7 % off, and the print has three figures.
        assert_allclose(fluid.vapour_density_kg_m3 / warm, ratio, rtol=1e-2, err_msg=slug)


def test_a_pit_takes_as_few_litres_as_the_densities_say():
    """F-3: 3 m3 are filled by 17.16 L while cold, 4.34 L once warm; CoolProp 8.0.0."""
    warm = gas_density(NITROGEN.molar_mass_kg_mol, **STANDARD)
    litres = 1000.0 * liquid_to_fill_pit(
        3.0, NITROGEN.liquid_density_kg_m3, [NITROGEN.vapour_density_kg_m3, warm]
    )
    assert_allclose(litres, [17.16, 4.34], rtol=5e-3)


@given(area=lengths, height=lengths, net_share=shares, zone=st.floats(0.1, 10.0), gas=lengths)
def test_a_zone_is_never_better_than_the_room(area, height, net_share, zone, gas):
    room = area * height * net_share
    zones = np.array(
        [
            breathing_zone_volume(area, height, net_share=net_share, zone_height=zone),
            ceiling_zone_volume(area, height, net_share=net_share, zone_height=zone),
        ]
    )
    assert np.all((zones > 0.0) & (zones <= room * (1.0 + 1e-12)))
    below = oxygen_after_displacement(gas, zones)
    assert np.all(below <= oxygen_after_displacement(gas, room) + 1e-12)


@given(area=lengths, height=st.floats(1.6, 100.0), net_share=shares)
def test_the_two_zones_of_a_high_room_make_up_the_room(area, height, net_share):
    low = breathing_zone_volume(area, height, net_share=net_share)
    high = ceiling_zone_volume(area, height, net_share=net_share)
    assert_allclose(low + high, area * height * net_share, rtol=1e-12)


def test_a_room_no_higher_than_people_is_one_zone():
    for height in (0.8, 1.5):
        assert_allclose(breathing_zone_volume(20.0, height), 20.0 * height)
        assert_allclose(ceiling_zone_volume(20.0, height), 20.0 * height)


@given(volume=lengths, factor=st.floats(1.01, 50.0))
def test_cold_gas_takes_more_liquid_to_fill_a_pit_than_warm(volume, factor):
    cold, warm = liquid_to_fill_pit(volume, 800.0, [1.16 * factor, 1.16])
    assert cold > warm


def test_zones_and_layers_broadcast_and_nothing_has_no_depth():
    assert breathing_zone_volume(np.ones((3, 1)), [2.0, 3.0]).shape == (3, 2)
    assert ceiling_zone_volume(10.0, [[2.0], [3.0]], net_share=[0.8, 1.0]).shape == (2, 2)
    assert depth_of_cold_layer(0.0, 4.6, 20.0) == 0.0
    assert depth_of_warm_layer([0.0, 20.0], 20.0).tolist() == [0.0, 1.0]
    assert liquid_to_fill_pit(0.0, 800.0, 1.2) == 0.0


@pytest.mark.parametrize("wrong", [0.0, -1.0, np.nan])
@pytest.mark.parametrize("named", ["floor_area", "height", "zone_height"])
@pytest.mark.parametrize("zone_volume", [breathing_zone_volume, ceiling_zone_volume])
def test_a_zone_refuses_what_no_room_has(zone_volume, named, wrong):
    inputs = {"floor_area": 20.0, "height": 2.5, "zone_height": 1.5, named: wrong}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        zone_volume(**inputs)


@pytest.mark.parametrize("wrong", [-0.1, 1.1, np.nan])
@pytest.mark.parametrize("zone_volume", [breathing_zone_volume, ceiling_zone_volume])
def test_a_net_share_is_a_share(zone_volume, wrong):
    with pytest.raises(OutOfRange, match=r"^net_share must be from 0 to 1"):
        zone_volume(20.0, 2.5, net_share=wrong)


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
def test_layers_and_pits_refuse_what_is_none(wrong):
    for named in ("mass", "vapour_density", "floor_area"):
        inputs = {"mass": 1.0, "vapour_density": 4.6, "floor_area": 20.0, named: wrong}
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            depth_of_cold_layer(**inputs)
    for named in ("gas_volume", "floor_area"):
        inputs = {"gas_volume": 1.0, "floor_area": 20.0, named: wrong}
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            depth_of_warm_layer(**inputs)
    for named in ("pit_volume", "liquid_density", "gas_density"):
        inputs = {"pit_volume": 3.0, "liquid_density": 806.0, "gas_density": 1.2, named: wrong}
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            liquid_to_fill_pit(**inputs)
