"""The course of a case: the very numbers of the assessment, and an integrator's between them."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from service.audit.curve import Choice, NoCase, NotComputed, curve_of
from service.audit.curve_times import times_of
from service.physics.ventilation import course
from tests.audit.builders import (
    ARGON,
    HYDROGEN,
    LITRE,
    NITROGEN,
    NOW,
    OXYGEN,
    PER_DAY,
    PER_HOUR,
    a_detector,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    some_ice,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA
PRESSURE = 101_325.0  # [Pa] of the standard atmosphere at 0 m
FRESH = 20.95

GUARDED = a_room(
    60.0,
    vessels=(
        a_vessel(80.0, tag="AUTO", filled_by="automatic", fill_flow=10 * LITRE / 60),
        a_vessel(30.0, ARGON, tag="ARGON", measured_evaporation=20 * PER_DAY),
    ),
    units=(a_unit(300, boost_flow=3000 * PER_HOUR, boost_trigger="detector-OX"),),
    detectors=(a_detector(tag="OX"),),
)
ICE = a_room(
    30.0,
    vessels=(some_ice(60.0),),
    units=(a_unit(60),),
    detectors=(a_detector(tag="CO2", gas="carbon-dioxide", alarms=(0.5, 1.5)),),
)
HYDROGEN_ROOM = a_room(40.0, vessels=(a_vessel(40.0, HYDROGEN), a_vessel(10.0, OXYGEN)))
# A site's own mixture, a tenth of it oxygen.
LEAN = a_fluid("lean", molar_mass=0.0284, condensed_density=840.0, oxygen_fraction=0.1)
ROOMS = {"guarded": GUARDED, "ice": ICE, "hydrogen": HYDROGEN_ROOM}


def curve(room, points=200, **choice):
    return curve_of(room, at=NOW, choice=Choice(**choice), points=points)


def of_case(room, case, points=200):
    vessels = {"vessel_id": case.vessels[0].id} if case.vessels else {}
    if case.variant is not None:
        vessels["variant"] = case.variant
    return curve(
        room, points, release=case.release, airflow=case.airflow, hazard=case.hazard,
        gas=case.gas, **vessels,
    )  # fmt: skip


def at_event(found, what):
    return next((point for point in found.points if what in point.events), None)


@pytest.mark.parametrize(
    "name",
    [pytest.param(name, marks=() if name == "hydrogen" else pytest.mark.slow) for name in ROOMS],
)
def test_each_case_has_the_extreme_and_the_times_of_the_assessment_exactly(name):
    room = ROOMS[name]
    cases = assessed(room)[0].cases
    assert {case.airflow for case in cases} >= {"as-measured", "design", "lost"}
    for case in cases:
        found = of_case(room, case)
        assert found.case == case
        by = {"oxygen-low": "lowest"}.get(case.hazard, "highest")
        worst = at_event(found, by)
        assert replace(worst, events=()) == found.extreme
        assert (worst.at_s, worst.oxygen_pct, worst.oxygen_kpa) == (
            case.at_s, case.oxygen_pct, case.oxygen_kpa,
        )  # fmt: skip
        assert (worst.gas_pct, worst.lower_limit_pct) == (case.peak_pct, case.lower_limit_pct)
        furthest = max(abs(point.oxygen_pct - FRESH) for point in found.points)
        assert furthest == abs(case.oxygen_pct - FRESH)
        for mark in case.marks:
            there = at_event(found, ("first-mark", "second-mark", "third-mark")[mark.place - 1])
            assert (None if there is None else there.at_s) == mark.at_s
        back = at_event(found, "back")
        assert (None if back is None else back.at_s) == case.recovered_s
        assert (None if found.alarm is None else found.alarm.at_s) == case.alarm_s


def test_the_course_is_that_of_an_integrator_through_all_segments():
    """SciPy's DOP853 of V dx/dt = x0 F - W x, F = Q - R and W = Q for air drawn out (methods D0).

    One vessel is empty after half a day, the other after two days; 60 m3/h drawn count a third.
    """
    vessels = (
        a_vessel(20.0, NITROGEN, tag="A", measured_evaporation=40 * PER_DAY),
        a_vessel(120.0, NITROGEN, tag="B", measured_evaporation=60 * PER_DAY),
    )
    room = a_room(50.0, kind="pit", vessels=vessels, units=(a_unit(60),))
    found = curve(room, 120, release="boil-off", airflow="as-measured")
    gas = GAS_CONSTANT * 293.15 / (PRESSURE * NITROGEN.molar_mass) * NITROGEN.condensed_density
    draws = 60.0 / 3600.0 / 3.0
    ends = [0.0, 43_200.0, 172_800.0, 345_600.0]
    rates = [100.0 * LITRE / 86_400.0 * gas, 60.0 * LITRE / 86_400.0 * gas, 0.0]
    state, checked = FRESH, 0
    for (begins, stops), rate in zip(pairwise(ends), rates, strict=True):
        solved = solve_ivp(
            lambda _, x, rate=rate: (FRESH * (draws - rate) - draws * x) / 50.0,
            (begins, stops), [state], "DOP853", rtol=1e-11, atol=1e-12, dense_output=True,
        )  # fmt: skip
        state = solved.y[0, -1]
        inside = [point for point in found.points if begins <= point.at_s <= stops]
        expected = solved.sol([point.at_s for point in inside])[0]
        assert_allclose([point.oxygen_pct for point in inside], expected, rtol=1e-7)
        checked += len(inside)
    assert checked > 100
    assert [point.at_s for point in found.points if "flow-changes" in point.events] == [
        end for end in ends[1:-1] if end <= found.ends_s
    ]


def test_oxygen_before_a_release_at_once_and_after_it_is_told_apart():
    """60 L of liquid are 60 L x 806.08 kg/m3 (CoolProp 8) of gas by the ideal gas law, pushed out.

    Displacement from clean air is x0 (1 - Vg/V); no boil-off goes before, so that it is clean.
    """
    vessel = a_vessel(60.0, vent_to="outdoors")
    found = curve(a_room(100.0, vessels=(vessel,)), release="largest-vessel")
    mass = 0.060 * 806.08
    gas = mass * GAS_CONSTANT * 293.15 / (PRESSURE * NITROGEN.molar_mass)
    assert found.before.oxygen_pct == FRESH
    assert found.points[0].at_s == 0.0
    assert found.points[0].oxygen_pct == pytest.approx(FRESH * (1.0 - gas / 100.0), rel=1e-9)


@pytest.mark.parametrize(
    "points", [2, 3, *(pytest.param(many, marks=pytest.mark.slow) for many in (5, 11, 2000)), 200]
)
@pytest.mark.parametrize("release", ["boil-off", "overfill", "largest-vessel"])
def test_there_are_never_more_points_than_asked_for_and_they_rise(release, points):
    for airflow in ("as-measured", "boosted"):
        found = curve(GUARDED, points, release=release, airflow=airflow)
        times = [point.at_s for point in found.points]
        assert 2 <= len(times) <= points
        assert (times[0], times[-1]) == (0.0, found.ends_s)
        assert times == sorted(set(times))
        if points >= 50:
            assert len(times) > 0.8 * points
            assert {"start"} <= set(found.points[0].events)


def test_points_are_dense_where_the_course_changes():
    """A room emptied once in 300 s moves 1 - exp(-10), next to all, in 3000 of 345 600 s."""
    run = course([[345_600.0]], release=0.05, supply=0.2, exhaust=0.0, volume=75.0)
    times = times_of(run, 345_600.0, [], 200)
    assert (times < 3000.0).sum() > 0.7 * times.size
    steps = np.abs(np.diff(-np.expm1(-times / 300.0)))
    assert steps.max() < 1.0 / 100.0


def test_a_course_that_nothing_moves_is_evenly_told():
    run = course([[600.0]], release=0.0, supply=0.2, exhaust=0.0, volume=75.0)
    assert_allclose(np.diff(times_of(run, 600.0, [], 11)), 60.0)


def test_exact_times_come_before_those_between_and_the_first_named_before_the_last():
    run = course([[100.0, 100.0]], release=[[0.1, 0.0]], supply=0.2, exhaust=0.0, volume=75.0)
    exact = [7.0, 150.0, 33.0]
    assert times_of(run, 200.0, exact, 2).tolist() == [0.0, 200.0]
    assert times_of(run, 200.0, exact, 4).tolist() == [0.0, 7.0, 150.0, 200.0]
    assert times_of(run, 200.0, exact, 6).tolist() == [0.0, 7.0, 33.0, 100.0, 150.0, 200.0]


def test_a_case_that_recovers_ends_there_and_one_that_does_not_after_the_sustained_time():
    """Sustained time of the baseline: 96 h (judging 7, common practice, no source)."""
    recovers = curve(GUARDED, release="largest-vessel", airflow="as-measured")
    assert recovers.ends_s == recovers.case.recovered_s
    assert recovers.points[-1].oxygen_pct == pytest.approx(19.5, rel=1e-8)
    lasts = curve(GUARDED, release="overfill", airflow="as-measured")
    assert lasts.case.recovered_s is None
    assert lasts.ends_s == 96 * 3600.0


def test_an_accident_that_crosses_no_mark_is_followed_until_a_hundredth_is_left():
    """A room cleared k times a second has exp(-k t) left: a hundredth at ln(100)/k."""
    room = a_room(
        200.0, kind="pit", vessels=(a_vessel(5.0, vent_to="outdoors"),), units=(a_unit(600),)
    )
    found = curve(room, release="largest-vessel", airflow="as-measured")
    assert found.case.mark == 0
    per_second = 600.0 / 3600.0 / 3.0 / 200.0
    assert found.ends_s == pytest.approx(np.log(100.0) / per_second, rel=1e-9)


def test_without_a_choice_it_is_the_case_that_decides():
    for room in ROOMS.values():
        assessment = assessed(room)[0]
        assert curve(room).case == assessment.cases[assessment.deciding]


def test_of_several_cases_the_nearest_to_a_mark_is_taken_unless_a_vessel_is_named():
    room = a_room(60.0, vessels=(a_vessel(20.0, tag="SMALL"), a_vessel(20.0, ARGON, tag="ARGON")))
    # The same litres of argon make more gas: 1395 kg/m3 and 39.9 g/mol against 806 and 28.0
    # (CoolProp 8).
    chosen = curve(room, release="largest-vessel", airflow="as-measured", hazard="oxygen-low")
    assert chosen.matching == 2
    assert chosen.case.fluids == ("argon",)
    named = curve(room, release="largest-vessel", airflow="as-measured", vessel_id="vessel-SMALL")
    assert (named.matching, named.case.fluids) == (1, ("nitrogen",))


@pytest.mark.parametrize(
    ("choice", "part", "there"),
    [
        ({"release": "spill"}, "release", {"boil-off", "largest-vessel", "all-vessels"}),
        ({"hazard": "toxic"}, "hazard", {"oxygen-low"}),
        ({"airflow": "boosted"}, "airflow", {"as-measured", "design", "lost"}),
        ({"gas": "carbon-dioxide"}, "gas", {"oxygen"}),
        ({"vessel_id": "vessel-X"}, "vessel_id", {"vessel-V-50-nitrogen"}),
        ({"release": "spill", "vessel_id": "vessel-X"}, "release", {"boil-off", "largest-vessel",
         "all-vessels"}),
    ],
)  # fmt: skip
def test_a_case_that_is_not_there_says_which_part_and_what_there_is(choice, part, there):
    with pytest.raises(NoCase) as refused:
        curve(a_room(vessels=(a_vessel(),)), **choice)
    assert refused.value.part == part
    assert set(refused.value.there) == there


def test_an_empty_room_has_no_case():
    with pytest.raises(NoCase) as refused:
        curve(a_room())
    assert refused.value.part is None


def test_a_room_that_cannot_be_computed_says_why():
    with pytest.raises(NotComputed, match="closing time"):
        curve(a_room(vessels=(a_vessel(closes_in=-1.0),)))


def test_the_first_detector_that_counts_gives_the_alarm_and_people_follow():
    """Baseline: 30 s to react and 1 m/s (judging 7, common practice, no source); way out 5 m."""
    late = a_detector(tag="LATE", t90=120.0)
    gone = a_detector(tag="GONE", t90=1.0, state="fault")
    room = a_room(60.0, vessels=(a_vessel(40.0),), detectors=(late, gone, a_detector(tag="SOON")))
    found = curve(room, release="largest-vessel", airflow="as-measured")
    assert found.alarm.detector.tag == "SOON"
    assert at_event(found, "alarm").at_s == found.alarm.at_s == found.case.alarm_s
    assert found.out_s == pytest.approx(found.alarm.at_s + 35.0)
    assert at_event(found, "out").at_s == found.out_s


def test_without_a_warning_nobody_is_told_to_be_out():
    found = curve(a_room(60.0, vessels=(a_vessel(40.0),)), release="largest-vessel")
    assert (found.alarm, found.out_s, found.case.margin_s) == (None, None, None)


def test_a_toxic_gas_is_told_by_its_fraction_and_the_oxygen_it_takes():
    """Carbon dioxide has no oxygen of its own: the rest of the air is air of 20.95 %."""
    found = curve(ICE, hazard="toxic", release="spill")
    for point in found.points:
        assert (point.lower_limit_pct, point.released_pct) == (None, None)
        assert point.oxygen_pct == pytest.approx(FRESH * (1.0 - point.gas_pct / 100.0), rel=1e-8)
        assert point.oxygen_kpa == pytest.approx(point.oxygen_pct * PRESSURE / 1e5, rel=1e-8)


def test_a_flammable_gas_is_told_by_its_share_of_the_limit_too():
    """Hydrogen burns from 4 % on (judging 7, baseline: IEC 60079-20-1, from memory)."""
    found = curve(HYDROGEN_ROOM, hazard="flammable", release="largest-vessel")
    assert at_event(found, "highest") is not None
    for point in found.points:
        assert point.lower_limit_pct == pytest.approx(point.gas_pct / 4.0 * 100.0, rel=1e-8)


def test_oxygen_has_no_other_gas_to_tell_but_what_was_let_go():
    """What is let go takes the place of air: x = x0 (1 - G) + xg G (a balance of volumes).

    Nitrogen and argon bring no oxygen; oxygen brings nothing else.
    """
    for room, choice, brought in (
        (GUARDED, {"hazard": "oxygen-low"}, 0.0),
        (HYDROGEN_ROOM, {"hazard": "oxygen-high"}, 100.0),
        (a_room(vessels=(a_vessel(40.0, LEAN),)), {"hazard": "oxygen-low"}, 10.0),
    ):
        found = curve(room, **choice)
        assert {(p.gas_pct, p.lower_limit_pct) for p in found.points} == {(None, None)}
        assert found.extreme.released_pct > 1.0
        for point in (found.before, found.extreme, *found.points):
            share = point.released_pct / 100.0
            expected = FRESH * (1.0 - share) + brought * share
            # Ten figures of a share near 1 leave so much of what is not there.
            assert point.oxygen_pct == pytest.approx(expected, rel=1e-7, abs=1e-8)
