import numpy as np
import pytest
from CoolProp.CoolProp import PropsSI
from numpy.testing import assert_allclose

from service.physics.ambient import station_pressure
from service.physics.constants import ROOM_TEMPERATURE, STANDARD_PRESSURE, ZERO_CELSIUS
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.gas import gas_density, gas_volume_of_liquid, gas_volume_of_mass

STANDARD = {"pressure": STANDARD_PRESSURE, "temperature": ROOM_TEMPERATURE}
# Deviation of the ideal gas from the reference equations that methods A3 states, in per cent.
REAL_GAS = {
    "Nitrogen": 0.1,
    "Oxygen": 0.1,
    "Argon": 0.1,
    "Helium": 0.1,
    "Hydrogen": 0.1,
    "Neon": 0.1,
    "Air": 0.1,
    "Methane": 0.3,
    "Krypton": 0.3,
    "Xenon": 0.7,
    "NitrousOxide": 0.7,
    "CarbonDioxide": 0.7,
}


@pytest.mark.parametrize("name", REAL_GAS)
def test_gas_density_is_that_of_the_reference_equations(name):
    """CoolProp 8.0.0, 0 to 3000 m and 5 to 40 degrees Celsius."""
    pressure = station_pressure([0.0, 1500.0, 3000.0])[:, np.newaxis]
    temperature = ZERO_CELSIUS + np.array([5.0, 20.0, 40.0])
    density = gas_density(PropsSI("M", name), pressure=pressure, temperature=temperature)
    with np.errstate(all="ignore"):
        real = [
            [PropsSI("D", "P", at, "T", warm, name) for warm in temperature]
            for at in pressure[:, 0]
        ]
    assert_allclose(density, real, rtol=REAL_GAS[name] / 100.0)


def test_a_litre_of_nitrogen_becomes_as_much_gas_as_its_densities_say():
    """A-1 and A-2: CoolProp 8.0.0."""
    nitrogen = FLUIDS["nitrogen"]
    with np.errstate(all="ignore"):
        liquid = PropsSI("D", "P", STANDARD_PRESSURE, "Q", 0, "Nitrogen")
    assert_allclose(nitrogen.liquid_density_kg_m3, liquid, rtol=1e-3)
    ratio = gas_volume_of_liquid(
        1.0,
        nitrogen.liquid_density_kg_m3,
        nitrogen.molar_mass_kg_mol,
        pressure=STANDARD_PRESSURE,
        temperature=ZERO_CELSIUS + np.array([20.0, 21.1]),
    )
    assert_allclose(ratio, [692.02, 694.62], rtol=2e-3)


@pytest.mark.parametrize(
    ("slug", "liquid_m3", "celsius", "gas_m3", "tolerance"),
    [("helium", 1.0, 15.0, 736.8, 3e-3), ("neon", 0.010, 20.0, 14.382, 2e-3)],
    ids=["A-3", "A-6"],
)
def test_liquid_becomes_as_much_gas_as_the_property_library_says(
    slug, liquid_m3, celsius, gas_m3, tolerance
):
    """CoolProp 8.0.0, saturated liquid over gas density."""
    fluid = FLUIDS[slug]
    volume = gas_volume_of_liquid(
        liquid_m3,
        fluid.liquid_density_kg_m3,
        fluid.molar_mass_kg_mol,
        pressure=STANDARD_PRESSURE,
        temperature=ZERO_CELSIUS + celsius,
    )
    assert_allclose(volume, gas_m3, rtol=tolerance)


def test_a_kilogram_of_dry_ice_becomes_half_a_cubic_metre():
    """A-4: CoolProp 8.0.0 gives 0.5437 m3, the ideal gas 0.5466 m3."""
    volume = gas_volume_of_mass(1.0, FLUIDS["carbon-dioxide"].molar_mass_kg_mol, **STANDARD)
    assert_allclose(volume, 0.5437, rtol=7e-3)
    assert_allclose(volume, 0.5466, rtol=2e-4)


def test_gas_at_two_thousand_metres_is_as_light_as_there():
    """A-5: CoolProp 8.0.0 at the standard atmosphere's 79 495.2 Pa."""
    density = gas_density(
        FLUIDS["nitrogen"].molar_mass_kg_mol,
        pressure=station_pressure(2000.0),
        temperature=ZERO_CELSIUS + 10.0,
    )
    assert_allclose(density, 0.94617, rtol=1e-3)


def test_a_vessel_under_pressure_counts_with_more_liquid_than_it_can_let_down():
    """A-7: CoolProp 8.0.0, nitrogen saturated at 4 bar absolute flashes by 14.64 %."""
    with np.errstate(all="ignore"):
        hot = PropsSI("H", "P", 4e5, "Q", 0, "Nitrogen")
        density = PropsSI("D", "P", 4e5, "Q", 0, "Nitrogen")
        cold = PropsSI("H", "P", STANDARD_PRESSURE, "Q", 0, "Nitrogen")
    assert_allclose((hot - cold) / FLUIDS["nitrogen"].latent_heat_j_kg, 0.1464, rtol=1e-2)
    assert density < FLUIDS["nitrogen"].liquid_density_kg_m3


def test_volume_and_density_undo_each_other_over_rows_and_columns():
    masses = np.array([[0.0], [1.0], [3.0]])
    molar = np.array([0.004, 0.028])
    volume = gas_volume_of_mass(masses, molar, **STANDARD)
    assert volume.shape == (3, 2)
    assert_allclose(volume * gas_density(molar, **STANDARD), np.broadcast_to(masses, (3, 2)))
    assert np.shape(gas_volume_of_mass(1.0, 0.028, **STANDARD)) == ()
    assert_allclose(
        gas_volume_of_liquid(0.5, 800.0, 0.028, **STANDARD),
        gas_volume_of_mass(400.0, 0.028, **STANDARD),
    )


@pytest.mark.parametrize("wrong", [0.0, -1.0, np.nan])
@pytest.mark.parametrize("named", ["molar_mass", "pressure", "temperature", "liquid_density"])
def test_gas_refuses_what_no_gas_has(named, wrong):
    inputs = {"liquid_density": 800.0, "molar_mass": 0.028, **STANDARD, named: wrong}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        gas_volume_of_liquid(1.0, **inputs)


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
def test_gas_refuses_less_than_no_liquid(wrong):
    with pytest.raises(OutOfRange, match=r"^liquid_volume must be"):
        gas_volume_of_liquid(wrong, 800.0, 0.028, **STANDARD)
    with pytest.raises(OutOfRange, match=r"^mass must be"):
        gas_volume_of_mass(wrong, 0.028, **STANDARD)
