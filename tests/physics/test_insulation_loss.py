"""Lost vacuum: methods G3, with the properties of air from a property library."""

import numpy as np
import pytest
from CoolProp import CoolProp
from numpy.testing import assert_allclose

from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.insulation_loss import (
    HELIUM_BARE,
    HELIUM_WITH_MULTILAYER,
    JACKET_LEAKS,
    JACKET_OPEN,
    evaporation_by_heat,
    heat_flux_condensing,
    heat_flux_in_jacket,
    heat_flux_in_open_air,
    vessel_surface,
)

WALL, ROOM, DEW = 77.36, 293.15, 81.72
GAS = 0.1663  # [kg/m3] helium at 20 degrees Celsius; CoolProp 8


def of_air(name, kelvin):
    return CoolProp.PropsSI(name, "T", kelvin, "P", 101_325.0, "Air")


@pytest.mark.parametrize(
    ("flux", "mass", "gas"), [(HELIUM_WITH_MULTILAYER, 0.3501, 2.105), (HELIUM_BARE, 2.217, 13.33)]
)
def test_helium_is_as_worked_for_checks_g_2_and_g_3(flux, mass, gas):
    """Methods G-2 and G-3: 1.2 m2 with and without multilayer insulation."""
    found = evaporation_by_heat(1.2, flux, FLUIDS["helium"].latent_heat_j_kg)
    assert_allclose(found, mass, rtol=0.02)
    assert_allclose(found / GAS, gas, rtol=0.02)


def test_the_low_end_of_the_bracket_is_still_air_in_the_jacket():
    """Methods G3 (a): 50 mm at a mean of 185 K, 74 W/m2."""
    flux = heat_flux_in_jacket(0.05, ROOM - WALL, conductivity=of_air("L", 185.0))
    assert_allclose(flux, 74.0, rtol=0.02)


def test_the_middle_of_the_bracket_is_a_bare_wall_in_open_air():
    """Methods G3 (b): Churchill and Chu with radiation, 1 m high, 2812 W/m2."""
    mean = 0.5 * (WALL + ROOM)
    density = of_air("D", mean)
    flux = heat_flux_in_open_air(
        WALL,
        ROOM,
        height=1.0,
        conductivity=of_air("L", mean),
        viscosity=of_air("V", mean) / density,
        diffusivity=of_air("L", mean) / (density * of_air("C", mean)),
    )
    assert_allclose(flux, 2812.0, rtol=0.02)
    assert_allclose(flux, JACKET_LEAKS, rtol=0.02)


def first_drops():
    """Mole fraction of oxygen in what condenses from air first, by Raoult's law."""
    oxygen, nitrogen = (
        share * 101_325.0 / CoolProp.PropsSI("P", "T", DEW, "Q", 0, name)
        for share, name in ((0.2095, "Oxygen"), (0.7905, "Nitrogen"))
    )
    # Together 1.05: the law is a little off.
    assert_allclose(oxygen + nitrogen, 1.0, atol=0.06)
    return oxygen / (oxygen + nitrogen)


def test_the_high_end_of_the_bracket_is_a_wall_that_condenses_air():
    """Methods G3 (c): the film of Nusselt, 1 m high, 6941 W/m2."""
    film, oxygen = 0.5 * (WALL + DEW), first_drops()

    def of_drops(name):
        pure = [CoolProp.PropsSI(name, "T", film, "Q", 0, gas) for gas in ("Oxygen", "Nitrogen")]
        return oxygen * pure[0] + (1.0 - oxygen) * pure[1]

    flux = heat_flux_condensing(
        WALL,
        DEW,
        height=1.0,
        latent_heat=204_810.0,
        conductivity=of_drops("L"),
        density=of_drops("D"),
        viscosity=of_drops("V"),
    )
    # The library has no transport properties of mixtures: means by mole, and so a hundredth.
    assert_allclose(flux, 6941.0, rtol=0.01)
    assert_allclose(JACKET_OPEN, 6941.0, rtol=0.01)


def test_no_air_condenses_on_a_wall_above_its_dew_point():
    flux = heat_flux_condensing(
        [77.36, DEW, 90.0],
        DEW,
        height=1.0,
        latent_heat=204_810.0,
        conductivity=0.15,
        density=1000.0,
        viscosity=2e-4,
    )
    assert flux[0] > 0.0
    assert not flux[1:].any()


def test_a_vertical_plate_is_as_in_the_handbook():
    """Incropera, example 9.2 (from memory): a fire screen at 232 C in air at 23 C, 0.71 m high.

    Nu = 147, h = 7.0 W/(m2 K), from Ra = 1.813e9 with k 0.0338, nu 26.4e-6 and alpha 38.3e-6.
    """
    air = {"conductivity": 0.0338, "viscosity": 26.4e-6, "diffusivity": 38.3e-6}
    flux = heat_flux_in_open_air(505.0, 296.0, height=0.71, emissivity=0.0, **air)
    assert_allclose(-flux / 209.0, 7.0, rtol=0.01)


def test_the_surface_of_a_vessel_is_that_of_a_sphere_and_a_share_more():
    """A sphere of 1 m has 4.18879 m3 and 12.56637 m2."""
    assert_allclose(vessel_surface(4.18879), 1.3 * 12.56637, rtol=1e-6)


@pytest.mark.parametrize(
    ("name", "call"),
    [
        ("area", lambda: evaporation_by_heat(-1.0, 1.0, 1.0)),
        ("latent_heat", lambda: evaporation_by_heat(1.0, 1.0, 0.0)),
        ("gap", lambda: heat_flux_in_jacket(0.0, 1.0, conductivity=1.0)),
        ("liquid_volume", lambda: vessel_surface(np.nan)),
        ("heat_flux", lambda: evaporation_by_heat(1.0, np.nan, 1.0)),
        (
            "emissivity",
            lambda: heat_flux_in_open_air(
                WALL,
                ROOM,
                height=1.0,
                conductivity=0.017,
                viscosity=6.5e-6,
                diffusivity=9e-6,
                emissivity=1.1,
            ),
        ),
    ],
)
def test_what_cannot_be_is_refused(name, call):
    with pytest.raises(OutOfRange, match=name):
        call()
