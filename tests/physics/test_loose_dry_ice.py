"""The default share of loose dry ice, against the heat that its surroundings can give it (G8)."""

import numpy as np
from numpy.testing import assert_allclose
from scipy.integrate import quad

from service.audit.bases import SHIPPED_VALUES
from service.physics.evaporation import dry_ice_mass_rate
from service.physics.fluids import FLUIDS

HOUR = 3600.0
MASS, AREA = 50.0, 50.0 / 900.0 / 0.1  # pellets of 900 kg/m3, heaped 0.1 m deep
ROOM, ICE = 293.15, 194.7
LATENT_HEAT = FLUIDS["carbon-dioxide"].latent_heat_j_kg
# Concrete: Incropera, table of building materials, stone mix, from memory. [W/(m K)], [m2/s]
CONDUCTIVITY, DIFFUSIVITY = 1.4, 1.4 / (2300.0 * 880.0)
STEFAN_BOLTZMANN = 5.670374e-8


def from_above():
    """Heat by air and by radiation, eps 0.9. [W]"""
    radiation = 0.9 * STEFAN_BOLTZMANN * (ROOM**4 - ICE**4)
    return AREA * (5.5 * (ROOM - ICE) + radiation)


def from_below(time):
    """Heat of a thick floor in perfect contact: Carslaw and Jaeger, from memory. [W]"""
    return AREA * CONDUCTIVITY * (ROOM - ICE) / np.sqrt(np.pi * DIFFUSIVITY * time)


def test_a_heap_loses_no_more_in_an_hour_than_the_default_says():
    """G-10: 13.8 kg/h as the mean of the first hour and 8.37 kg/h at its end, closed."""
    floor, _ = quad(from_below, 0.0, HOUR)
    first_hour = (floor + from_above() * HOUR) / LATENT_HEAT
    at_its_end = (from_below(HOUR) + from_above()) / LATENT_HEAT * HOUR
    assert_allclose([first_hour, at_its_end], [13.8, 8.37], rtol=2e-2)
    for values in SHIPPED_VALUES.values():
        share = values["loose_ice_share_per_h"]
        assert dry_ice_mass_rate(MASS, share) * HOUR >= first_hour
        # Nor is it taken to be gone much sooner than the balance has it.
        assert dry_ice_mass_rate(MASS, share) * HOUR <= 1.2 * first_hour
