"""Everything in the room at once: one step lower, and shown only unless it may happen."""

from dataclasses import replace

import pytest

from tests.audit.builders import (
    ARGON,
    HELIUM,
    NITROGEN,
    OXYGEN,
    PER_DAY,
    a_basis,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    case_of,
    judged,
    severity,
    some_ice,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA


def gas_of(density, molar_mass):
    """Gas of a litre of liquid at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]"""
    return density / 1000.0 * GAS_CONSTANT * 293.15 / (101_325.0 * molar_mass)


NITROGEN_GAS = gas_of(806.08, 0.028_013_5)
ARGON_GAS = gas_of(1395.40, 0.039_948)
RULE = "oxygen/all-vessels"


def still(litres, fluid=NITROGEN, **fields):
    return a_vessel(litres, fluid, measured_evaporation=0.0, **fields)


def many(count, litres=3.0, **fields):
    return tuple(still(litres, tag=f"V{place:02d}", **fields) for place in range(count))


def test_everything_goes_at_once():
    """Methods C1 with all of the gas: C = C0 (1 - sum Vg/V)."""
    room = a_room(200, vessels=(still(20), still(30), still(40, ARGON)))
    case = case_of(room, "all-vessels")
    gas = 50 * NITROGEN_GAS + 40 * ARGON_GAS
    assert case.gas_m3 == pytest.approx(gas, rel=1e-9)
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - gas / 200), rel=1e-9)
    assert [vessel.tag for vessel in case.vessels] == [
        "V-20-nitrogen",
        "V-30-nitrogen",
        "V-40-argon",
    ]


def test_richer_and_poorer_gases_are_two_cases():
    room = a_room(200, vessels=(still(20), still(20, OXYGEN)))
    assert case_of(room, "all-vessels").fluids == ("nitrogen",)
    assert case_of(room, "all-vessels", hazard="oxygen-high").fluids == ("oxygen",)


def test_ice_and_purge_gas_are_no_part_of_it():
    room = a_room(200, vessels=(still(20), some_ice(50)), purge_flow=1e-4)
    assert case_of(room, "all-vessels").fluids == ("nitrogen",)


def test_the_loss_of_filling_is_that_of_each_vessel():
    """x 1.10 only for what is filled in the room (judging 1)."""
    room = a_room(200, vessels=(still(10, filled_by="attended"), still(20)))
    case = case_of(room, "all-vessels")
    assert case.gas_m3 == pytest.approx((11 + 20) * NITROGEN_GAS, rel=1e-9)


class TestOneStepLower:
    """Where a manifold is shared, all may go together: one step below the table."""

    # Litres of nitrogen in each of two vessels in 50 m3 for each mark.
    PAIRS = ((3.5, "first", "observation"), (12, "second", "minor"), (22, "third", "major"))

    @pytest.mark.parametrize(("litres", "mark", "expected"), PAIRS)
    def test_by_mark(self, litres, mark, expected):
        vessels = (still(litres, tag="A", manifold="M"), still(litres, tag="B", manifold="M"))
        room = a_room(50, vessels=vessels)
        assert ("first", "second", "third")[case_of(room, "all-vessels").mark - 1] == mark
        assert severity(room, RULE) == expected

    @pytest.mark.parametrize(("litres", "mark", "expected"), PAIRS)
    def test_without_a_manifold_it_is_an_observation(self, litres, mark, expected):
        room = a_room(50, vessels=(still(litres, tag="A"), still(litres, tag="B")))
        assert severity(room, RULE) == "observation"

    def test_safeguards_lower_it_from_there(self):
        vessels = (still(22, tag="A", manifold="M"), still(22, tag="B", manifold="M"))
        room = a_room(50, vessels=vessels, detectors=(a_detector(),))
        assert severity(room, RULE) == "minor"
        assert severity(replace(room, units=(a_unit(600),)), RULE) == "observation"

    def test_a_manifold_that_one_vessel_names_is_not_shared(self):
        room = a_room(50, vessels=(still(22, tag="A", manifold="M"), still(22, tag="B")))
        assert severity(room, RULE) == "observation"

    def test_nor_is_one_whose_other_vessel_is_withdrawn(self):
        vessels = (
            still(22, tag="A", manifold="M"),
            still(22, tag="B", manifold="M", state="withdrawn"),
            still(22, tag="C"),
        )
        assert severity(a_room(50, vessels=vessels), RULE) == "observation"

    def test_manifolds_of_two_rooms_make_none_of_their_own(self):
        rooms = [
            a_room(50, tag=tag, vessels=(still(22, tag="A", manifold="M"), still(22, tag="B")))
            for tag in ("P", "Q")
        ]
        found = [
            [each.severity for each in one.judgements if each.rule == RULE]
            for one in assessed(*rooms)
        ]
        assert found == [["observation"], ["observation"]]


class TestManyPortableVessels:
    """More than ten below 60 L (judging 1; common practice, no source)."""

    @pytest.mark.parametrize(("count", "expected"), [(10, "observation"), (11, "major")])
    def test_more_than_ten(self, count, expected):
        room = a_room(25, vessels=many(count, 6.0, mobile=True))
        assert case_of(room, "all-vessels").mark == 3
        assert severity(room, RULE) == expected

    @pytest.mark.parametrize(
        ("fields", "expected"),
        [
            ({"litres": 59.9, "mobile": True}, "major"),
            ({"litres": 60.0, "mobile": True}, "observation"),
            ({"litres": 6.0, "mobile": False}, "observation"),
            ({"litres": 6.0, "mobile": None}, "major"),
        ],
    )
    def test_that_are_carried_or_wheeled(self, fields, expected):
        room = a_room(25, vessels=many(11, **fields))
        assert severity(room, RULE) == expected

    def test_the_basis_says_how_many(self):
        room = a_room(25, vessels=many(5, 10.0, mobile=True), basis=a_basis(many_vessels=4))
        assert severity(room, RULE) == "major"


def test_one_vessel_is_no_finding_of_its_own():
    """What the largest vessel says already."""
    room = a_room(50, vessels=(still(45),))
    assert judged(room, RULE) is None
    assert severity(room, "oxygen/largest-vessel") == "critical"


def test_it_is_never_milder_than_the_largest_vessel_by_its_oxygen():
    room = a_room(90, vessels=(still(20), still(10, HELIUM), still(15, ARGON)))
    lowest = min(
        case.oxygen_pct for case in assessed(room)[0].cases if case.release == "largest-vessel"
    )
    assert case_of(room, "all-vessels").oxygen_pct < lowest


def test_it_starts_from_the_worst_of_what_evaporates():
    vessels = tuple(a_vessel(5, tag=tag, measured_evaporation=5 * PER_DAY) for tag in ("A", "B"))
    room = a_room(100, vessels=vessels, units=(a_unit(30),))
    before = case_of(room, "boil-off").oxygen_pct
    after = case_of(room, "all-vessels").oxygen_pct
    assert after == pytest.approx(before * (1 - 10 * NITROGEN_GAS / 100), rel=1e-8)
