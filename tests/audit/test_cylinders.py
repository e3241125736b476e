"""Gas and liquid under pressure: charged cylinders by the real gas, and liquid carbon dioxide."""

from dataclasses import replace

import pytest

from service.physics.constants import STANDARD_PRESSURE
from tests.audit.builders import (
    CARBON_DIOXIDE,
    HYDROGEN,
    LITRE,
    NITROGEN,
    a_fluid,
    a_room,
    a_vessel,
    assessed,
    case_of,
)

BAR = 1e5


def charged(litres, fluid, bar_gauge):
    """A cylinder recorded by its water volume and its pressure."""
    return a_vessel(
        litres,
        fluid,
        kind="cylinder",
        measured_evaporation=None,
        charge_pressure=bar_gauge * BAR + STANDARD_PRESSURE,
    )


@pytest.mark.parametrize(
    ("fluid", "printed"),
    # A 50 L cylinder at 200 bar and 15 degrees Celsius as suppliers print it: 9.4 to 9.6 m3 of
    # nitrogen, 8.8 to 9.0 m3 of hydrogen, at 15 degrees Celsius and 1 bar (from memory).
    [(NITROGEN, (9.4, 9.6)), (HYDROGEN, (8.7, 9.0))],
)
def test_a_cylinder_of_two_hundred_bar_lets_go_what_suppliers_print(fluid, printed):
    room = a_room(500, temperature=288.15, vessels=(charged(50, fluid, 199.0),))
    gas = case_of(room).gas_m3 * STANDARD_PRESSURE / BAR
    assert printed[0] <= gas <= printed[1]


def test_a_mixture_without_an_equation_counts_as_ideal_gas_and_says_so():
    own = a_fluid("site-mixture", molar_mass=0.029, condensed_density=800.0)
    found = assessed(a_room(500, temperature=288.15, vessels=(charged(50, own, 150.0),)))[0]
    assert found.cases[0].gas_m3 == pytest.approx(
        0.050 * (150.0 * BAR + STANDARD_PRESSURE) / STANDARD_PRESSURE, rel=1e-9
    )
    assert [(each.field, each.matters) for each in found.assumed] == [("capacity_kg", True)]


def test_a_pressure_beyond_every_cylinder_is_a_finding_and_no_fault():
    assert "500 bar" in assessed(a_room(vessels=(charged(50, NITROGEN, 600.0),)))[0].failed


def test_liquid_carbon_dioxide_counts_by_the_density_of_the_liquid():
    """1029.4 kg/m3 at 20 bar, and 559.6 m3 of gas a m3 at 20 degrees Celsius (methods A1)."""
    liquid = replace(CARBON_DIOXIDE, pressure_liquid_density=1029.4)
    tank = a_vessel(100, liquid, kind="tank", measured_evaporation=0.0)
    gas = case_of(a_room(2000, vessels=(tank,)), hazard="toxic").gas_m3
    # As an ideal gas 0.63 % more (methods A3).
    assert gas == pytest.approx(100 * LITRE * 559.6, rel=0.007)
