"""Automatic filling that does not stop: the full flow, until something independent closes."""

from dataclasses import replace
from datetime import timedelta
from math import exp

import pytest

from tests.audit.builders import (
    EARLIER,
    LATER,
    NITROGEN,
    NOW,
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
# Gas of a litre of liquid nitrogen at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]
NITROGEN_GAS = 0.806_08 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.028_013_5)
A_MINUTE = 1e-3 / 60.0  # [m3/s] of a litre a minute
RULE = "oxygen/overfill"
SHUT_OFF = {"independent_high_level": True, "closes_in": 60.0, "shut_off_test_due": LATER}


def automatic(litres=200.0, fluid=NITROGEN, **fields):
    """A freezer that a line keeps full, and that loses nothing meanwhile."""
    defaults = {"measured_evaporation": 0.0, "filled_by": "automatic", "kind": "freezer"}
    return a_vessel(litres, fluid, **{**defaults, **fields})


def overfills(room):
    return [case for case in assessed(room)[0].cases if case.release == "overfill"]


def test_the_full_flow_evaporates_for_as_long_as_it_is_followed():
    """10 L/min where none is recorded (common practice, no source), 96 h: 57,600 L."""
    case = case_of(a_room(1e6, vessels=(automatic(),)), "overfill")
    assert case.gas_m3 == pytest.approx(57_600 * NITROGEN_GAS, rel=1e-9)


def test_an_independent_high_level_that_is_tested_ends_it():
    """60 s at 10 L/min without air: C = C0 exp(-Vg/V) (methods D5)."""
    room = a_room(100, kind="pit", vessels=(automatic(**SHUT_OFF),))
    case = case_of(room, "overfill")
    assert case.at_s == 60.0
    assert case.gas_m3 == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)
    assert case.oxygen_pct == pytest.approx(20.95 * exp(-10 * NITROGEN_GAS / 100), rel=1e-9)


def test_a_recorded_flow_and_a_recorded_time_are_taken():
    vessel = automatic(**{**SHUT_OFF, "closes_in": 30.0, "fill_flow": 24 * A_MINUTE})
    case = case_of(a_room(1e4, vessels=(vessel,)), "overfill")
    assert case.gas_m3 == pytest.approx(12 * NITROGEN_GAS, rel=1e-9)


def test_an_unrecorded_time_to_close_is_a_minute():
    """Judging 1; common practice, no source."""
    vessel = automatic(**{**SHUT_OFF, "closes_in": None})
    case = case_of(a_room(1e4, vessels=(vessel,)), "overfill")
    assert case.gas_m3 == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)


@pytest.mark.parametrize(
    "flaw",
    [
        {"independent_high_level": None},
        {"independent_high_level": False},
        {"shut_off_test_due": None},
        {"shut_off_test_due": EARLIER},
        {"shut_off_test_due": NOW},
    ],
)
def test_a_shut_off_with_a_flaw_ends_nothing(flaw):
    vessel = automatic(**{**SHUT_OFF, **flaw})
    case = case_of(a_room(1e6, vessels=(vessel,)), "overfill")
    assert case.gas_m3 == pytest.approx(57_600 * NITROGEN_GAS, rel=1e-9)


def test_the_moment_its_test_falls_due_it_ends_nothing():
    room = a_room(1e6, vessels=(automatic(**{**SHUT_OFF, "shut_off_test_due": LATER}),))
    assert assessed(room)[0].turns_at == LATER
    gas = [
        next(
            case.gas_m3
            for case in assessed(room, at=LATER + timedelta(microseconds=late))[0].cases
            if case.release == "overfill"
        )
        for late in (-1, 0)
    ]
    assert gas == [
        pytest.approx(10 * NITROGEN_GAS, rel=1e-9),
        pytest.approx(57_600 * NITROGEN_GAS, rel=1e-9),
    ]


@pytest.mark.parametrize("filled_by", ["attended", "exchanged", None])
def test_what_a_person_fills_or_exchanges_does_not_run_over(filled_by):
    """None for attended or exchanged vessels (judging 1); unknown without a line is attended."""
    assert overfills(a_room(vessels=(automatic(filled_by=filled_by),))) == []


@pytest.mark.parametrize("vessel", [automatic(kind="cylinder"), automatic(state="withdrawn")])
def test_nor_does_what_is_not_filled_at_all(vessel):
    assert overfills(a_room(vessels=(vessel,))) == []


def test_ice_does_not_run_over():
    assert overfills(a_room(vessels=(some_ice(10, filled_by="automatic"),))) == []


def test_a_vent_outdoors_does_not_keep_it_off_the_floor():
    """`vent_to: outdoors` removes boil-off and filling alone (judging 1)."""
    room = a_room(1e6, vessels=(automatic(vent_to="outdoors"),))
    releases = {case.release for case in assessed(room)[0].cases}
    assert "overfill" in releases
    assert "filling" not in releases


def test_vessels_that_would_do_alike_are_one_case_and_one_flow():
    vessels = tuple(automatic(tag=tag, **SHUT_OFF) for tag in "ABC")
    room = a_room(1e4, vessels=vessels)
    case = case_of(room, "overfill")
    assert [vessel.tag for vessel in case.vessels] == ["A", "B", "C"]
    assert case.gas_m3 == pytest.approx(10 * NITROGEN_GAS, rel=1e-9)
    assert "any one of A, B and C" in judged(replace(room, gross_volume=30.0), RULE).statement


def test_vessels_that_would_not_are_cases_of_their_own():
    vessels = (automatic(tag="A", **SHUT_OFF), automatic(tag="B"), automatic(tag="C", **SHUT_OFF))
    found = [
        [vessel.tag for vessel in case.vessels]
        for case in overfills(a_room(1e4, vessels=vessels))
        if case.airflow == "as-measured"
    ]
    assert sorted(found) == [["A", "C"], ["B"]]


def test_it_starts_from_what_evaporates_meanwhile():
    """24 L a day into 20 m3/h counted take R/Q of the air; then a minute of 10 L without."""
    vessel = automatic(**{**SHUT_OFF, "measured_evaporation": 24 * PER_DAY})
    room = a_room(100, vessels=(vessel,), units=(a_unit(60),))
    start = NITROGEN_GAS / 20
    rate, flow = 10 * NITROGEN_GAS * 60, 20.0  # m3/h, more gas than air
    case = case_of(room, "overfill")
    assert case_of(room, "boil-off").oxygen_pct == pytest.approx(20.95 * (1 - start), rel=1e-8)
    # The exhaust is smaller than the release, and does nothing (methods D3).
    assert rate > flow
    expected = 20.95 * (1 - start) * exp(-rate / 60 / 100)
    assert case.oxygen_pct == pytest.approx(expected, rel=1e-8)


def guarded(litres_a_minute, volume=50.0, **fields):
    """A freezer whose filling is shut off after a minute."""
    vessel = automatic(fill_flow=litres_a_minute * A_MINUTE, **SHUT_OFF)
    return a_room(volume, vessels=(vessel,), **fields)


DETECTOR = a_detector(t90=1e-3)
VENTILATION = a_unit(900)


class TestSafeguards:
    """Detection, ventilation and a shut-off count; the table of judging 4."""

    def test_a_shut_off_that_leaves_the_room_above_danger_is_one(self):
        """10 L in 50 m3 leave 18.24 %: first mark, some safeguard."""
        room = guarded(10)
        assert case_of(room, "overfill").mark == 1
        assert severity(room, RULE) == "observation"

    def test_a_shut_off_that_lets_the_room_below_danger_is_none(self):
        """12 L in 50 m3: 17.74 %, and nobody is told."""
        room = guarded(12)
        assert case_of(room, "overfill").mark == 2
        assert severity(room, RULE) == "critical"

    def test_without_a_shut_off_and_an_alarm_people_are_not_out(self):
        """1 L/min without end into 240 m3/h counted, of which no measurement is in date."""
        vessel = automatic(fill_flow=1 * A_MINUTE)
        room = a_room(200, vessels=(vessel,), units=(a_unit(720, measurement_due=None),))
        case = case_of(room, "overfill")
        # Exhaust: Cs = C0 (1 - R/Q) (methods D2), 17.3 %.
        assert case.oxygen_pct == pytest.approx(20.95 * (1 - 60 * NITROGEN_GAS / 240), rel=1e-8)
        assert case.mark == 2
        assert severity(room, RULE) == "critical"
        heard_inside = replace(DETECTOR, heard_outside=False)
        assert severity(replace(room, detectors=(heard_inside,)), RULE) == "major"
        assert severity(replace(room, detectors=(DETECTOR,)), RULE) == "minor"
        measured = replace(room, units=(a_unit(720),))
        assert severity(measured, RULE) == "major"
        assert severity(replace(measured, detectors=(heard_inside,)), RULE) == "minor"

    @pytest.mark.parametrize(
        ("detectors", "units", "expected"),
        [
            ((), (), "critical"),
            ((DETECTOR,), (), "major"),
            ((), (VENTILATION,), "critical"),
            ((DETECTOR,), (VENTILATION,), "major"),
        ],
    )
    def test_filling_without_end_reaches_the_third_mark(self, detectors, units, expected):
        """30 L/min is 1246 m3/h of gas, and the fan could not clear 300 m3 of it in an hour."""
        vessel = automatic(fill_flow=30 * A_MINUTE)
        room = a_room(300, vessels=(vessel,), detectors=detectors, units=units)
        assert case_of(room, "overfill").mark == 3
        assert severity(room, RULE) == expected

    def test_all_three_safeguards_make_the_first_mark_an_observation(self):
        room = guarded(10, detectors=(DETECTOR,), units=(VENTILATION,))
        assert severity(room, RULE) == "observation"

    def test_in_a_lift_nobody_inside_is_all(self):
        room = guarded(12, volume=20.0, kind="lift")
        assert severity(room, RULE) == "critical"
        assert severity(replace(room, unaccompanied=True), RULE) == "minor"


def test_a_shut_off_that_is_tested_is_never_worse_than_none():
    room = a_room(60, vessels=(automatic(),))
    with_one = replace(room, vessels=(automatic(**SHUT_OFF),))
    untested = replace(room, vessels=(automatic(**{**SHUT_OFF, "shut_off_test_due": None}),))
    assert severity(room, RULE) == severity(untested, RULE) == "critical"
    # 10 L in 60 m3 leave 18.66 %, the first mark, with a shut-off that holds.
    assert severity(with_one, RULE) == "observation"


def test_the_remedy_names_a_flow_that_holds():
    """Restricted to that flow, the room crosses no mark."""
    room = a_room(60, vessels=(automatic(),), units=(a_unit(900, standby_power=True),))
    remedy = judged(room, RULE).remedy
    assert "independent high level" in remedy
    allowed = float(remedy.split("to ")[1].split(" L/min")[0])
    assert 0.0 < allowed < 10.0
    held = replace(room, vessels=(automatic(fill_flow=allowed * A_MINUTE),))
    assert case_of(held, "overfill").mark == 0


def test_filling_with_oxygen_that_does_not_stop_enriches():
    """Beyond 30 %, the third mark (common practice, no source)."""
    room = a_room(100, vessels=(automatic(200, OXYGEN),))
    assert case_of(room, "overfill", hazard="oxygen-high").mark == 3
    assert severity(room, "enrichment/overfill") == "critical"


def test_its_case_counts_as_measured_alone():
    room = a_room(100, vessels=(automatic(),), units=(a_unit(600, boost_flow=1.0),))
    counts = {case.airflow: case.counts for case in overfills(room)}
    assert counts == {"as-measured": True, "design": False, "lost": False}


def test_the_basis_says_the_usual_flow():
    room = a_room(
        1e4, vessels=(automatic(**SHUT_OFF),), basis=a_basis(default_fill_flow_l_min=20.0)
    )
    assert case_of(room, "overfill").gas_m3 == pytest.approx(20 * NITROGEN_GAS, rel=1e-9)
