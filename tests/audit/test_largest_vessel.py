"""The largest vessel let go at once, against printed and hand-made numbers."""

from dataclasses import replace
from math import exp, log

import pytest

from tests.audit.builders import (
    ARGON,
    BASELINE,
    HELIUM,
    LATER,
    LITRE,
    NITROGEN,
    OXYGEN,
    PER_DAY,
    a_basis,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    case_of,
    some_ice,
)

# Gas of a litre of liquid nitrogen at 20 degrees Celsius and 101.325 kPa, as an ideal gas:
# 806.08 kg/m3 x 8.314463 J/(mol K) x 293.15 K / (101 325 Pa x 28.0135 g/mol) = 0.692179 m3.
NITROGEN_GAS = 0.806_08 * 8.314_462_618 * 293.15 / (101_325.0 * 0.028_013_5)


def still(litres, fluid=NITROGEN, **fields):
    """A vessel that loses nothing while nobody touches it."""
    return a_vessel(litres, fluid, measured_evaporation=0.0, **fields)


def test_fifty_litres_of_nitrogen_in_fifty_cubic_metres():
    """Displacement, CoolProp densities: 6.452 % (methods C-1), 5.002 % with filling loss (C-3)."""
    exchanged = case_of(a_room(50, vessels=(still(50),)))
    filled = case_of(a_room(50, vessels=(still(50, filled_by="attended"),)))
    assert exchanged.oxygen_pct == pytest.approx(6.452, abs=0.03)
    assert filled.oxygen_pct == pytest.approx(5.002, abs=0.03)


def test_a_basis_may_mix_the_gas_as_it_displaces_air():
    """Methods C-2 and C-3: 10.487 and 9.786 %."""
    basis = a_basis(instant_mixing="mixing")
    exchanged = case_of(a_room(50, vessels=(still(50),), basis=basis))
    filled = case_of(a_room(50, vessels=(still(50, filled_by="attended"),), basis=basis))
    assert exchanged.oxygen_pct == pytest.approx(10.487, abs=0.03)
    assert filled.oxygen_pct == pytest.approx(9.786, abs=0.03)
    assert "mixing/while-displacing" in exchanged.method


def test_five_litres_of_nitrogen_in_fifty_cubic_metres_just_reach_the_first_mark():
    """Methods C-5: 5.001 L (tolerance 0.3 %)."""
    assert case_of(a_room(50, vessels=(still(4.98),))).mark == 0
    assert case_of(a_room(50, vessels=(still(5.02),))).mark == 1


def test_a_hundred_litres_of_helium_fill_thirty_cubic_metres():
    """Methods C-4: 74.96 m3 of gas, 0 %."""
    case = case_of(a_room(30, vessels=(still(100, HELIUM),)))
    assert case.gas_m3 == pytest.approx(74.96, rel=3e-3)
    assert case.oxygen_pct == 0.0
    assert (case.to_deficient_s, case.to_danger_s, case.to_critical_s) == (0.0, 0.0, 0.0)


def test_oxygen_from_two_litres_enriches_fifty_cubic_metres():
    """Litres of oxygen that bring 50 m3 to 23.5 %: 1.881 L (methods E4)."""
    basis = a_basis("us")
    inside, outside = (
        case_of(a_room(50, vessels=(still(litres, OXYGEN),), basis=basis), hazard="oxygen-high")
        for litres in (1.87, 1.89)
    )
    assert (inside.mark, outside.mark) == (0, 1)
    assert outside.oxygen_pct == pytest.approx(23.5, abs=0.05)


def test_the_room_comes_back_with_the_air_that_counts():
    """Purge by hand: t = V/Q ln[(C0 - C)/(C0 - Ct)]; 600 m3/h moved, a third of it counted."""
    case = case_of(a_room(100, vessels=(still(40),), units=(a_unit(600),)))
    air_changes = log((20.95 - case.oxygen_pct) / (20.95 - 19.5))
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - 0.4 * NITROGEN_GAS * 100 / 100), rel=1e-9)
    assert case.recovered_s == pytest.approx(100 / 200 * 3600 * air_changes, rel=1e-9)
    assert case.restore_m3_h == pytest.approx(3 * 100 * air_changes, rel=1e-9)
    assert case.required_m3_h is None
    assert "no fan" in case.required_reason


def test_altitude_makes_more_gas_of_a_litre():
    """At 1500 m a litre of nitrogen becomes 829.5 L of gas (methods A3)."""
    case = case_of(a_room(1000, elevation=1500.0, vessels=(still(100),)))
    assert case.gas_m3 == pytest.approx(82.95, rel=1e-3)


def test_a_measured_air_pressure_wins_over_the_elevation():
    case = case_of(
        a_room(1000, elevation=1500.0, station_pressure=101_325.0, vessels=(still(100),))
    )
    assert case.gas_m3 == pytest.approx(100 * NITROGEN_GAS, rel=1e-9)


def test_an_unknown_occupied_share_leaves_four_fifths():
    """Common practice, no source."""
    case = case_of(a_room(50, occupied_fraction=None, vessels=(still(10),)))
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - 10 * NITROGEN_GAS / 40), rel=1e-9)
    assert case.without_margins["oxygen_pct"] == pytest.approx(
        20.95 * (1 - 10 * NITROGEN_GAS / 50), rel=1e-9
    )
    assert case.without_margins["net_volume_m3"] == 50.0


def test_filling_loss_is_left_out_without_margins():
    case = case_of(a_room(50, vessels=(still(10, filled_by="attended"),)))
    assert case.gas_m3 == pytest.approx(11 * NITROGEN_GAS, rel=1e-9)
    assert case.without_margins["gas_m3"] == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)


def test_vessels_of_one_manifold_go_together():
    group = [still(10, tag=tag, manifold="north wall") for tag in ("A", "B")]
    case = case_of(a_room(70, vessels=(*group, still(15, tag="C"))))
    assert [vessel.tag for vessel in case.vessels] == ["A", "B"]
    assert case.gas_m3 == pytest.approx(20 * NITROGEN_GAS, rel=1e-9)


def test_manifolds_of_two_rooms_are_not_one():
    rooms = [
        a_room(70, tag=tag, vessels=(still(10, manifold="1"), still(1, manifold="1", tag="small")))
        for tag in ("P", "Q")
    ]
    gas = [
        case.gas_m3
        for each in assessed(*rooms)
        for case in each.cases
        if case.release == "largest-vessel"
    ]
    assert gas == [pytest.approx(11 * NITROGEN_GAS, rel=1e-9)] * 6


def test_largest_means_the_most_gas_not_the_most_litres():
    """Argon makes a fifth more gas a litre than nitrogen (methods A1), helium a twelfth."""
    cases = [
        case
        for case in assessed(
            a_room(500, vessels=(still(100), still(99, HELIUM), still(90, ARGON)))
        )[0].cases
        if (case.release, case.airflow) == ("largest-vessel", "as-measured")
    ]
    assert [case.fluids for case in cases] == [("argon",), ("helium",), ("nitrogen",)]


def test_of_one_fluid_only_the_largest_vessel_is_a_case():
    case = case_of(a_room(70, vessels=(still(10, tag="A"), still(30, tag="B"), still(20, tag="C"))))
    assert [vessel.tag for vessel in case.vessels] == ["B"]


@pytest.mark.parametrize("kind", ["cylinder", "magnet", "dry-ice-box"])
def test_cylinders_magnets_and_ice_have_no_filling_loss(kind):
    vessel = (
        some_ice(10, filled_by=None)
        if kind == "dry-ice-box"
        else still(10, kind=kind, filled_by=None)
    )
    room = a_room(70, vessels=(vessel,))
    gas = [case.gas_m3 for case in assessed(room)[0].cases if case.release == "largest-vessel"]
    expected = [] if kind == "dry-ice-box" else [pytest.approx(10 * NITROGEN_GAS, rel=1e-9)] * 3
    assert gas == expected


def test_how_a_vessel_is_filled_counts_as_in_the_room_where_nobody_says():
    case = case_of(a_room(70, vessels=(still(10, filled_by=None),)))
    assert case.gas_m3 == pytest.approx(11 * NITROGEN_GAS, rel=1e-9)


def test_a_withdrawn_vessel_counts_as_nothing():
    assert assessed(a_room(70, vessels=(a_vessel(state="withdrawn"),)))[0].cases == ()


def test_a_cylinder_counts_by_its_kilograms():
    """10 kg of nitrogen: 10 / 28.0135 g/mol x 24.055 L/mol at 20 degrees Celsius = 8.587 m3."""
    cylinder = replace(still(1, kind="cylinder"), capacity_volume=None, capacity_mass=10.0)
    assert case_of(a_room(70, vessels=(cylinder,))).gas_m3 == pytest.approx(8.587, rel=1e-3)


class TestContents:
    """What is in a vessel: by the basis, and only as far as a count may be relied on."""

    RECORDED = a_basis(contents="recorded")
    HALF = 5 * LITRE

    def gas(self, basis=RECORDED, **fields):
        return case_of(a_room(70, basis=basis, vessels=(still(10, **fields),))).gas_m3

    def test_full_by_capacity_whatever_is_recorded(self):
        found = self.gas(BASELINE, contents_volume=self.HALF, count_due=LATER)
        assert found == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)

    def test_as_recorded_while_the_count_is_in_date(self):
        found = self.gas(contents_volume=self.HALF, count_due=LATER)
        assert found == pytest.approx(5 * NITROGEN_GAS, rel=1e-9)

    @pytest.mark.parametrize(
        "fields", [{"count_due": None}, {"count_due": LATER, "filled_by": "automatic"}]
    )
    def test_full_where_no_count_can_be_relied_on(self, fields):
        loss = 1.1 if "filled_by" in fields else 1.0
        found = self.gas(contents_volume=self.HALF, **fields)
        assert found == pytest.approx(10 * loss * NITROGEN_GAS, rel=1e-9)

    def test_more_than_the_capacity_counts_as_recorded(self):
        assert self.gas(BASELINE, contents_volume=12 * LITRE) == pytest.approx(
            12 * NITROGEN_GAS, rel=1e-9
        )

    @pytest.mark.parametrize("basis", [BASELINE, RECORDED])
    def test_an_empty_vessel_counts_as_nothing_while_its_count_is_in_date(self, basis):
        counted = a_room(70, basis=basis, vessels=(still(10, state="empty", count_due=LATER),))
        uncounted = a_room(70, basis=basis, vessels=(still(10, state="empty"),))
        assert assessed(counted)[0].cases == ()
        assert case_of(uncounted).gas_m3 == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)

    def test_both_readings_are_shown(self):
        room = a_room(70, vessels=(still(10, contents_volume=self.HALF, count_due=LATER),))
        figures = assessed(room)[0].figures
        assert figures["gas_at_capacity_m3"] == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)
        assert figures["gas_as_recorded_m3"] == pytest.approx(5 * NITROGEN_GAS, rel=1e-9)
        assert figures["contents"] == "capacity"


def test_it_starts_from_the_worst_point_of_the_boil_off():
    """In a closed walk-in, 10 L boiled away leave C0 exp(-Vg/V); then 10 L displace."""
    vessels = (a_vessel(10, measured_evaporation=10 * PER_DAY),)
    room = a_room(100, kind="walk-in", vessels=vessels)
    left = 20.95 * exp(-10 * NITROGEN_GAS / 100)
    assert case_of(room, "boil-off").oxygen_pct == pytest.approx(left, rel=1e-8)
    expected = left * (1 - 10 * NITROGEN_GAS / 100)
    assert case_of(room).oxygen_pct == pytest.approx(expected, rel=1e-8)


def test_gases_richer_and_poorer_than_air_never_hide_each_other():
    alone = case_of(a_room(70, vessels=(a_vessel(20),)))
    both = a_room(70, vessels=(a_vessel(20), a_vessel(20, OXYGEN)))
    assert case_of(both).oxygen_pct == alone.oxygen_pct
    rich = case_of(a_room(70, vessels=(a_vessel(20, OXYGEN),)), hazard="oxygen-high")
    assert case_of(both, hazard="oxygen-high").oxygen_pct == rich.oxygen_pct


def test_a_mixture_takes_only_the_oxygen_it_lacks():
    """A tenth of the gas is oxygen: C = C0 (1 - x) + 0.1 x, by conservation of oxygen."""
    mixture = a_fluid(
        "mixture", molar_mass=0.0280135, condensed_density=806.08, oxygen_fraction=0.1
    )
    share = 20 * NITROGEN_GAS / 70
    case = case_of(a_room(70, vessels=(still(20, mixture),)))
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - share) + 10.0 * share, rel=1e-9)


def test_the_release_in_lost_air_is_shown_but_does_not_count():
    room = a_room(70, vessels=(still(20),), units=(a_unit(600),))
    assert case_of(room).counts
    assert not case_of(room, airflow="lost").counts


def test_without_margins_each_case_stands_beside_the_same_fluid():
    """With filling loss the first is the larger nitrogen vessel (11 L), without it the second."""
    vessels = (
        still(10, filled_by="attended", tag="A"),
        still(3, HELIUM),
        still(10.5, tag="B"),
    )
    found = {case.fluids: case for case in assessed(a_room(90, vessels=vessels))[0].cases}
    nitrogen, helium = found[("nitrogen",)], found[("helium",)]
    assert nitrogen.gas_m3 == pytest.approx(11 * NITROGEN_GAS, rel=1e-9)
    assert nitrogen.without_margins["gas_m3"] == pytest.approx(10.5 * NITROGEN_GAS, rel=1e-9)
    assert helium.without_margins["gas_m3"] == pytest.approx(helium.gas_m3, rel=1e-9)
