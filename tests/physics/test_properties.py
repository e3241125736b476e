"""Outside: printed tables; the equations themselves are the library's."""

import subprocess
import sys

import pytest
from numpy.testing import assert_allclose

from service.physics.constants import STANDARD_PRESSURE
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.properties import (
    critical_point,
    gas_density_at,
    gas_enthalpy,
    saturated_enthalpies,
    saturated_liquid_density,
    saturation_pressure,
)

# Saturation as the authors of the equations print it: Span et al. (2000), page 1403; Tegeler et
# al. (1999), table 33; Setzmann and Wagner, J. Phys. Chem. Ref. Data 20 (1991) 1061, table 39; Span
# and Wagner (1996), table 34; all seen in the stored checks of a public implementation.
SATURATION = [
    ("nitrogen", 80.0, 0.13687e6, 28.341 * 28.0134, (2215.8 + 3265.7) / 28.0134),
    ("nitrogen", 100.0, 0.77827e6, 24.608 * 28.0134, (2458.6 + 2050.8) / 28.0134),
    ("argon", 90.0, 0.13351e6, 1378.63, 269.61 - 110.55),
    ("argon", 120.0, 1.2130e6, 1162.82, 233.48 - 106.71),
    ("methane", 110.0, 0.088130e6, 424.78, 916.75 - 402.92),
    ("methane", 140.0, 0.64118e6, 376.87, 807.74 - 362.60),
    ("carbon-dioxide", 240.0, 1.2825e6, 1088.87, 379.94 - 70.293),
    ("carbon-dioxide", 280.0, 4.1607e6, 883.58, 289.48 - 80.840),
]


@pytest.mark.parametrize(("slug", "kelvin", "pressure", "density", "latent_kj"), SATURATION)
def test_a_boiling_liquid_is_as_the_tables_print(slug, kelvin, pressure, density, latent_kj):
    assert_allclose(saturation_pressure(slug, kelvin), pressure, rtol=1e-4)
    assert_allclose(saturated_liquid_density(slug, kelvin), density, rtol=1e-4)
    liquid, vapour = saturated_enthalpies(slug, pressure)
    assert_allclose((vapour - liquid) / 1000.0, latent_kj, rtol=2e-4)


@pytest.mark.parametrize(
    ("slug", "kelvin", "megapascal"),
    [
        ("nitrogen", 126.192, 3.3958),
        ("argon", 150.687, 4.863),
        ("methane", 190.564, 4.5992),
        ("carbon-dioxide", 304.1282, 7.3773),
        ("xenon", 289.733, 5.842),
        ("nitrous-oxide", 309.52, 7.245),
        ("krypton", 209.48, 5.525),
    ],
)
def test_the_critical_point_is_the_printed_one(slug, kelvin, megapascal):
    """Critical constants of the equations' authors, seen with the tables above."""
    assert_allclose(critical_point(slug), (kelvin, megapascal * 1e6), rtol=2e-4)


def test_the_heat_to_warm_vapour_is_that_of_nearly_constant_heat_capacities(handbook):
    """Handbook heat capacities of gases at 1 bar, J/(g K): 1.04, 0.520, 5.19; from memory."""
    for slug, capacity in (("nitrogen", 1040.0), ("argon", 520.0), ("helium", 5190.0)):
        _, vapour = saturated_enthalpies(slug, STANDARD_PRESSURE)
        heat = gas_enthalpy(slug, STANDARD_PRESSURE, 293.15) - vapour
        # Cold vapour takes up to 4 % more than the warm gas.
        assert_allclose(
            heat, capacity * (293.15 - FLUIDS[slug].boiling_k), rtol=0.045, err_msg=slug
        )


def test_a_state_without_an_answer_is_refused():
    with pytest.raises(OutOfRange, match=r"^temperature must be from 63.151 to 126.192, where nit"):
        saturation_pressure("nitrogen", 300.0)
    with pytest.raises(OutOfRange, match=r"^temperature must be from 216.592 to"):
        saturated_liquid_density("carbon-dioxide", 200.0)
    with pytest.raises(OutOfRange, match=r"^pressure must be from"):
        saturated_enthalpies("carbon-dioxide", STANDARD_PRESSURE)
    with pytest.raises(OutOfRange, match=r"^pressure must be from"):
        saturated_enthalpies("helium", float("nan"))
    with pytest.raises(OutOfRange, match=r"^state must be one that the equation of Nitrogen holds"):
        gas_density_at("nitrogen", float("nan"), 300.0)
    with pytest.raises(OutOfRange, match=r"^state must be"):
        gas_density_at("carbon-dioxide", saturation_pressure("carbon-dioxide", 288.15), 288.15)
    with pytest.raises(OutOfRange, match=r"^state must be"):
        gas_enthalpy("argon", -1.0, 293.15)


@pytest.mark.parametrize("ask", [lambda key: gas_density_at(key, 1e5, 300.0), critical_point])
def test_an_unknown_fluid_is_named_as_such(ask):
    with pytest.raises(OutOfRange, match=r"^fluid_key must be one of air, argon, "):
        ask("acetylene")


@pytest.mark.slow
def test_the_library_is_loaded_by_the_first_question_and_not_before():
    """Its import takes seconds, which no command and no poll should pay for."""
    program = (
        "import sys; import service.physics.real_gas, service.physics.filling;"
        "assert 'CoolProp' not in sys.modules;"
        "from service.physics.properties import critical_point; critical_point('argon');"
        "assert 'CoolProp' in sys.modules"
    )
    done = subprocess.run([sys.executable, "-c", program], check=False, timeout=120)
    assert done.returncode == 0
