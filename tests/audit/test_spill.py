"""A box of dry ice emptied on the floor: a share of it an hour, never at once."""

from dataclasses import replace
from math import exp, log

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from tests.audit.builders import (
    LATER,
    PER_HOUR,
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
# Gas of a kilogram of carbon dioxide at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]
ICE_GAS = GAS_CONSTANT * 293.15 / (101_325.0 * 0.044_009_8)
TOXIC, OXYGEN = "toxic/spill", "oxygen/spill"
OF_CARBON_DIOXIDE = a_detector(gas="carbon-dioxide", alarms=(0.5, 1.5))


def spilt(kilograms=10.0, **fields):
    """A box that loses nothing until it tips."""
    return some_ice(kilograms, **{"measured_loss": 0.0, "mobile": True, **fields})


def spills(room):
    return [case for case in assessed(room)[0].cases if case.release == "spill"]


def test_ice_on_the_floor_goes_at_three_tenths_of_its_mass_an_hour():
    """Loose dry ice: 0.3 of the mass an hour (methods G8, G-10), so gone after 3.33 h."""
    case = case_of(a_room(1000, vessels=(spilt(10),)), "spill", hazard="toxic")
    assert case.gas_m3 == pytest.approx(10 * ICE_GAS, rel=1e-9)
    assert case.at_s == pytest.approx(3600 / 0.3, rel=1e-9)


def test_the_room_fills_and_clears_as_an_integrator_says():
    """V dX/dt = R - Q X (methods D2), by SciPy's DOP853, from 0.05 %."""
    room = a_room(200, vessels=(spilt(50),), units=(a_unit(150, mixing_factor=1.0),))
    rate, flow = 0.3 * 50 * ICE_GAS / 3600, 150 * PER_HOUR
    filling = solve_ivp(
        lambda _, x: (rate - flow * x) / 200,
        (0.0, 12_000.0),
        [0.0005],
        "DOP853",
        rtol=1e-11,
        atol=1e-15,
    )
    peak = filling.y[0, -1]
    case = case_of(room, "spill", hazard="toxic")
    assert case.peak_pct == pytest.approx(100 * peak, rel=1e-8)
    back = 12_000 + 200 / flow * log(peak / 0.005)
    assert case.recovered_s == pytest.approx(back, rel=1e-8)


def test_a_basis_may_say_how_fast_loose_ice_goes():
    basis = a_basis(loose_ice_share_per_h=0.5)
    room = a_room(1000, vessels=(spilt(10),), basis=basis)
    assert case_of(room, "spill", hazard="toxic").at_s == pytest.approx(7200, rel=1e-9)


@pytest.mark.parametrize(("mobile", "tips"), [(True, True), (None, True), (False, False)])
def test_a_box_tips_unless_it_is_known_not_to(mobile, tips):
    room = a_room(vessels=(spilt(mobile=mobile),))
    assert bool(spills(room)) is tips


def test_liquid_is_spilt_at_once_and_ice_in_time():
    """Judging 1: a pool is gone within seconds, and so all of it counts as let go."""
    (liquid,) = spills(a_room(vessels=(a_vessel(50, mobile=True),)))[:1]
    assert liquid.required_reason == "It is let go at once, so that no fan can hold it."
    # Methods C-1: 50 L in 70 m3, by displacement: 20.95 % (1 - 34.601 / 70).
    assert liquid.oxygen_pct == pytest.approx(20.95 * (1.0 - 34.601 / 70.0), rel=3e-3)
    assert "spill/pool-on-floor" in liquid.method
    assert "dry-ice/share-per-hour" not in liquid.method


def test_the_pool_is_told_with_the_spill():
    """Methods G-4: 50 L on 5 m2 of concrete at 20 degrees Celsius are gone in 15.3 s."""
    room = a_room(70, floor_area=5.0, height=14.0, vessels=(a_vessel(50, mobile=True),))
    found = judged(room, "oxygen/spill")
    assert found.evidence["pool_m2"] == 5.0
    assert found.evidence["pool_gone_s"] == pytest.approx(15.34, rel=5e-3)
    assert "spilt on the floor" in found.statement


@pytest.mark.parametrize(
    "fields", [{"mobile": False}, {"kind": "freezer", "mobile": True}, {"kind": "tank"}]
)
def test_what_cannot_tip_is_not_spilt(fields):
    assert spills(a_room(vessels=(a_vessel(50, **{"mobile": None, **fields}),))) == []


def test_whether_it_can_tip_is_assumed_where_nobody_says():
    room = a_room(vessels=(a_vessel(50, mobile=None),))
    assert spills(room)
    assert "mobile" in {each.field for each in assessed(room)[0].assumed}


def test_only_the_largest_box_is_emptied():
    room = a_room(vessels=(spilt(5), spilt(20), spilt(40, mobile=False)))
    case = case_of(room, "spill", hazard="toxic")
    assert [vessel.tag for vessel in case.vessels] == ["ICE-20"]
    assert case.gas_m3 == pytest.approx(20 * ICE_GAS, rel=1e-9)


def test_a_box_holds_what_was_counted_where_the_basis_goes_by_that():
    basis = a_basis(contents="recorded")
    ice = spilt(20, contents_mass=5.0, count_due=LATER)
    case = case_of(a_room(vessels=(ice,), basis=basis), "spill", hazard="toxic")
    assert case.gas_m3 == pytest.approx(5 * ICE_GAS, rel=1e-9)
    full = case_of(a_room(vessels=(ice,)), "spill", hazard="toxic")
    assert full.gas_m3 == pytest.approx(20 * ICE_GAS, rel=1e-9)


def test_ice_is_never_let_go_at_once():
    releases = {case.release for case in assessed(a_room(vessels=(some_ice(50),)))[0].cases}
    assert releases == {"boil-off", "spill"}


def test_it_starts_from_what_the_boxes_lose_by_themselves():
    """2 % of 30 kg an hour into 100 m3/h counted, and then 30 % of it: X = R/Q."""
    ice = some_ice(30, mobile=True, filled_by="attended")
    room = a_room(5, vessels=(ice,), units=(a_unit(100, mixing_factor=1.0),))
    before = case_of(room, "boil-off", hazard="toxic")
    after = case_of(room, "spill", hazard="toxic")
    assert before.peak_pct == pytest.approx(0.02 * 30 * ICE_GAS, rel=1e-6)
    assert after.peak_pct == pytest.approx(0.30 * 30 * ICE_GAS, rel=1e-6)
    quick = replace(room, basis=a_basis(loose_ice_share_per_h=0.02))
    start = case_of(quick, "spill", hazard="toxic")
    assert start.mean_15min_pct == pytest.approx(before.peak_pct, rel=1e-6)


class TestPeopleAreOut:
    """What is seen and heard warns from its start: out after 30 s and the way (judging 4)."""

    def room(self, **fields):
        """1.5 % is passed after V/R x 0.015: 10 kg in 100 m3 give 1.64 m3/h, so about 53 min."""
        return a_room(100, kind="walk-in", vessels=(spilt(10),), **fields)

    def test_people_who_see_it_are_out_before_the_second_mark(self):
        case = case_of(self.room(), "spill", hazard="toxic")
        assert case.mark == 3
        second = case.marks[1].at_s
        rate = 0.3 * 10 * ICE_GAS / 3600
        # No air: 1 - X = (1 - X0) exp(-R t/V) (methods D5).
        assert second == pytest.approx(100 / rate * log((1 - 0.0005) / (1 - 0.015)), rel=1e-8)
        assert case.alarm_s is None
        assert case.margin_s == pytest.approx(second - 30 - 5, rel=1e-9)

    def test_a_second_mark_reached_after_people_are_out_stays_a_second_mark(self):
        room = replace(self.room(), vessels=(spilt(5),))
        assert case_of(room, "spill", hazard="toxic").mark == 2
        assert severity(room, TOXIC) == "major"

    def test_a_second_mark_reached_before_they_are_out_counts_as_the_third(self):
        room = replace(self.room(), vessels=(spilt(5),))
        far = replace(room, way_out=case_of(room, "spill", hazard="toxic").marks[1].at_s)
        assert severity(far, TOXIC) == "critical"

    def test_an_alarm_that_comes_later_makes_it_no_worse(self):
        room = replace(self.room(), vessels=(spilt(5),))
        slow = replace(OF_CARBON_DIOXIDE, delay=7200.0)
        found = replace(room, detectors=(slow,))
        assert severity(found, TOXIC) == "major"
        assert case_of(found, "spill", hazard="toxic").margin_s == pytest.approx(
            case_of(room, "spill", hazard="toxic").margin_s
        )

    def test_a_detector_of_its_gas_in_time_is_a_safeguard(self):
        room = replace(self.room(), vessels=(spilt(5),))
        assert severity(replace(room, detectors=(OF_CARBON_DIOXIDE,)), TOXIC) == "minor"
        assert severity(replace(room, detectors=(a_detector(),)), TOXIC) == "major"


def test_air_that_holds_the_spill_is_what_the_case_asks_for():
    """All but steady at 0.3 x 10 kg an hour: Q = R/X, three times for mixing (methods E3).

    The mark of an accident is a mean of 15 min at 0.5 %.
    """
    room = a_room(5, kind="walk-in", vessels=(spilt(10),))
    required = case_of(room, "spill", hazard="toxic").required_m3_h
    assert required == pytest.approx(3 * 0.3 * 10 * ICE_GAS / 0.005, rel=1e-6)
    marks = [
        case_of(replace(room, units=(a_unit(required * share),)), "spill", hazard="toxic").mark
        for share in (1 + 1e-6, 1 - 1e-4)
    ]
    assert marks == [0, 1]


def test_the_oxygen_of_it_is_a_case_too():
    """No air, 82 kg: C = C0 exp(-Vg/V) (methods D5)."""
    room = a_room(100, kind="walk-in", vessels=(spilt(82),))
    case = case_of(room, "spill")
    assert case.oxygen_pct == pytest.approx(20.95 * exp(-82 * ICE_GAS / 100), rel=1e-8)
    assert severity(room, OXYGEN) == "major"


@pytest.mark.parametrize("kilograms", [2.0, 10.0, 80.0])
def test_the_remedy_names_an_amount_that_holds(kilograms):
    """Keep at most so much in a box: put into the room, it crosses no mark."""
    room = a_room(100, vessels=(spilt(kilograms),), units=(a_unit(150, standby_power=True),))
    found = judged(room, TOXIC)
    if found is None:
        assert case_of(room, "spill", hazard="toxic").mark == 0
        return
    allowed = float(found.remedy.split("at most ")[1].split(" kg")[0])
    assert 0.0 < allowed < kilograms
    assert judged(replace(room, vessels=(spilt(allowed),)), TOXIC) is None


def test_means_of_a_spill_are_the_highest_of_any_window():
    """By DOP853 with the integral as a second state, over windows that end at any time."""
    ice = spilt(20)
    room = a_room(60, vessels=(ice,), units=(a_unit(100, mixing_factor=1.0),))
    rate, flow = 0.3 * 20 * ICE_GAS / 3600, 100 * PER_HOUR

    def balance(time, state):
        let_go = rate if time < 12_000 else 0.0
        return [(let_go - flow * state[0]) / 60, state[0]]

    first = solve_ivp(
        balance, (0, 12_000), [0.0005, 0.0], "DOP853", rtol=1e-11, atol=1e-15, dense_output=True
    )
    second = solve_ivp(
        balance,
        (12_000, 60_000),
        first.y[:, -1],
        "DOP853",
        rtol=1e-11,
        atol=1e-15,
        dense_output=True,
    )

    def area(times):
        return np.where(
            times <= 12_000, first.sol(np.minimum(times, 12_000))[1], second.sol(times)[1]
        )

    case = case_of(room, "spill", hazard="toxic")
    for window, mean in ((900, case.mean_15min_pct), (28_800, case.mean_8h_pct)):
        ends = np.linspace(window, 59_000, 20_001)
        highest = np.max((area(ends) - area(ends - window)) / window)
        assert mean == pytest.approx(100 * highest, rel=1e-6)
