"""Outside: printed tables, and equations of state other than those of the property library."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from service.physics.constants import ZERO_CELSIUS
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.gas import gas_density
from service.physics.properties import saturated_liquid_density, saturation_pressure
from service.physics.real_gas import HIGHEST_PRESSURE, REAL_GASES, compressed_gas_density

GAS_CONSTANT = 8.31446
# Reducing temperature [K], reducing density [mol/L], molar mass [g/mol] of the short equations.
REDUCING = {
    "nitrogen": (126.192, 11.184, 28.013),
    "oxygen": (154.581, 13.630, 31.9988),
    "argon": (150.687, 13.407, 39.948),
    "methane": (190.564, 10.139, 16.0428),
    "carbon-dioxide": (304.1282, 10.625, 44.0098),
    "helium": (5.1953, 17.399, 4.0026),
    "hydrogen": (33.19, 14.94, 2.01594),
    "neon": (44.4918, 23.882, 20.179),
    "krypton": (209.48, 10.850, 83.798),
}
# Kept as liquids, so that their density jumps where they boil.
LIQUEFIED = ("carbon-dioxide", "nitrous-oxide", "xenon")


@pytest.fixture
def short_density(handbook):
    """Density by the second equation of a fluid, from the highest density that has the pressure."""
    terms = {}
    for row in handbook("short_equations.csv"):
        terms.setdefault(row["fluid"], []).append([float(row[key]) for key in "ndtcg"])

    def density(slug, pressure, temperature):
        reducing_temperature, reducing_density, molar_mass = REDUCING[slug]
        n, d, t, c, g = np.array(terms[slug]).T
        tau = reducing_temperature / temperature

        def excess(moles):
            delta = moles / reducing_density
            power = np.where(c > 0, g * delta**c, 0.0)
            slope = np.sum(
                n * delta**d * tau**t * np.exp(-np.minimum(power, 600.0)) * (d - c * power)
            )
            return 1000.0 * moles * GAS_CONSTANT * temperature * (1.0 + slope) - pressure

        return brentq(excess, 1e-6, 3.2 * reducing_density) * molar_mass

    return density


def test_a_cylinder_is_as_dense_as_the_authors_of_its_equation_print(handbook):
    for row in handbook("compressed_gas_density.csv"):
        slug, kelvin = row["fluid"], float(row["kelvin"])
        molar_mass = FLUIDS[slug].molar_mass_kg_mol
        printed = float(row["density"]) * (1000.0 * molar_mass if row["unit"] == "mol/L" else 1.0)
        density = compressed_gas_density(slug, float(row["pressure_mpa"]) * 1e6, kelvin)
        # Near the critical point the pressure, of seven figures, fixes the density to four.
        assert_allclose(density, printed, rtol=2e-4, err_msg=str(row))


@pytest.mark.parametrize("slug", REDUCING)
def test_a_cylinder_is_as_dense_as_another_equation_says(slug, short_density):
    """Technical equations of Span and Wagner: within 0.2 % up to 30 MPa; the others, 0.3 %."""
    pressures = np.array([10e6, 20e6, 30e6])
    temperatures = np.array([250.0, ZERO_CELSIUS + 15.0, 330.0])
    density = compressed_gas_density(slug, pressures, temperatures[:, np.newaxis])
    other = [[short_density(slug, at, warm) for at in pressures] for warm in temperatures]
    assert_allclose(density, other, rtol=3.5e-3)


def test_air_is_as_dense_as_its_gases_side_by_side(short_density):
    """Amagat's law, from memory, on the short equations of nitrogen, oxygen and argon."""
    shares = {"nitrogen": 0.7812, "oxygen": 0.2096, "argon": 0.0092}
    for pressure in (10e6, 20e6, 30e6):
        molar_volume = sum(
            share * REDUCING[slug][2] / short_density(slug, pressure, ZERO_CELSIUS + 15.0)
            for slug, share in shares.items()
        )
        density = compressed_gas_density("air", pressure, ZERO_CELSIUS + 15.0)
        # Mixing moves the volume by less than half a per cent at these pressures.
        assert_allclose(density, 28.9655 / molar_volume, rtol=5e-3)


@pytest.mark.parametrize(
    ("slug", "like", "critical", "tolerance"),
    [
        ("xenon", "krypton", (289.733, 5.842e6, 5.525e6), 0.02),
        ("nitrous-oxide", "carbon-dioxide", (309.52, 7.245e6, 7.3773e6), 0.03),
    ],
)
def test_a_liquefied_gas_is_as_dense_as_one_alike_in_a_corresponding_state(
    slug, like, critical, tolerance, short_density
):
    """Principle of corresponding states, critical constants from Lemmon and Span (2006)."""
    critical_temperature, critical_pressure, pressure_of_other = critical
    temperature_of_other, _, molar_mass = REDUCING[like]
    for pressure in (15e6, 20e6, 30e6):
        warm = (ZERO_CELSIUS + 15.0) / critical_temperature * temperature_of_other
        at = pressure / critical_pressure * pressure_of_other
        compressibility = (
            at * molar_mass / (1000.0 * GAS_CONSTANT * warm * short_density(like, at, warm))
        )
        ideal = gas_density(
            FLUIDS[slug].molar_mass_kg_mol, pressure=pressure, temperature=ZERO_CELSIUS + 15.0
        )
        density = compressed_gas_density(slug, pressure, ZERO_CELSIUS + 15.0)
        assert_allclose(density, ideal / compressibility, rtol=tolerance)


@pytest.mark.parametrize("slug", LIQUEFIED)
def test_a_cylinder_at_its_saturation_pressure_counts_as_liquid(slug):
    """The cautious side of two phases; beyond the band below it, the vapour alone."""
    warm = ZERO_CELSIUS + 15.0
    boils = saturation_pressure(slug, warm)
    liquid = saturated_liquid_density(slug, warm)
    shares = np.array([0.981, 1.0 - 1e-9, 1.0, 1.0 + 1e-9, 1.0 + 5e-6])
    assert_allclose(compressed_gas_density(slug, shares * boils, warm), liquid, rtol=1e-9)
    assert compressed_gas_density(slug, 1.001 * boils, warm) >= liquid
    assert compressed_gas_density(slug, 0.97 * boils, warm) < 0.6 * liquid


def test_carbon_dioxide_marked_with_fifty_bar_counts_as_liquid():
    """50.87 bar at 15 degrees Celsius, handbook tables of carbon dioxide, from memory."""
    assert compressed_gas_density("carbon-dioxide", 50.0e5, ZERO_CELSIUS + 15.0) > 800.0
    assert compressed_gas_density("carbon-dioxide", 45.0e5, ZERO_CELSIUS + 15.0) < 150.0


@pytest.mark.parametrize("slug", sorted(REAL_GASES))
def test_thin_gas_is_ideal(slug):
    ideal = gas_density(FLUIDS[slug].molar_mass_kg_mol, pressure=1e4, temperature=300.0)
    assert_allclose(compressed_gas_density(slug, 1e4, 300.0), ideal, rtol=1e-3)


@given(
    slug=st.sampled_from(sorted(REAL_GASES)),
    temperature=st.floats(250.0, 330.0),
    pressures=st.tuples(st.floats(1e4, 30e6), st.floats(1e4, 30e6)),
)
def test_more_pressure_never_makes_less_gas(slug, temperature, pressures):
    low, high = compressed_gas_density(slug, sorted(pressures), temperature)
    assert 0.0 < low <= high


def test_every_fluid_that_ships_has_a_density_and_states_broadcast():
    assert set(FLUIDS) == REAL_GASES
    for slug in REAL_GASES:
        grid = compressed_gas_density(slug, [[1e5], [HIGHEST_PRESSURE]], [250.0, 288.15, 330.0])
        assert grid.shape == (2, 3)
        assert np.all(grid[1] > grid[0])
    assert compressed_gas_density("argon", 20e6, 300.0).shape == ()
    assert compressed_gas_density("argon", np.zeros(0), 300.0).shape == (0,)
    alike = compressed_gas_density("argon", np.full(3, 20e6), 300.0)
    assert alike.tolist() == [float(compressed_gas_density("argon", 20e6, 300.0))] * 3


@pytest.mark.parametrize("wrong", [0.0, -1.0, 51e6, np.inf, np.nan])
def test_a_pressure_that_no_cylinder_has_is_refused(wrong):
    with pytest.raises(OutOfRange, match=r"^pressure must be"):
        compressed_gas_density("nitrogen", [20e6, wrong], 288.15)


@pytest.mark.parametrize("wrong", [0.0, 219.0, 401.0, np.nan])
def test_a_temperature_that_no_store_has_is_refused(wrong):
    with pytest.raises(OutOfRange, match=r"^temperature must be"):
        compressed_gas_density("nitrogen", 20e6, [288.15, wrong])


@pytest.mark.parametrize("unknown", ["acetylene", "Nitrogen", ""])
def test_an_unknown_fluid_is_named_as_such(unknown):
    with pytest.raises(OutOfRange, match=r"^fluid_key must be one of air, argon, "):
        compressed_gas_density(unknown, 20e6, 288.15)
