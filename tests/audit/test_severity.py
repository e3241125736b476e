"""The severity table, cell by cell, and which safeguards count in it.

The cells are this service's own practice: common practice, no source.
"""

from dataclasses import replace
from datetime import timedelta
from math import log

import pytest

from tests.audit.builders import (
    EARLIER,
    HELIUM,
    LATER,
    METHANE,
    NITROGEN,
    NOW,
    OXYGEN,
    PER_DAY,
    a_basis,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    case_of,
    judged,
    severity,
)

AT_ONCE = "oxygen/largest-vessel"
BOIL_OFF = "oxygen/boil-off"

# Litres of nitrogen let go in 50 m3 that end below 19.5, 18 and 10 %.
LITRES = {"first": 6, "second": 20, "third": 45}
DETECTION = {"detectors": (a_detector(),)}
# Brings 50 m3 back from no oxygen at all within the hour: ln(20.95/1.45) x 50 x 3 = 400 m3/h.
VENTILATION = {"units": (a_unit(600),)}


def at_once(mark="third", fluid=NITROGEN, **fields):
    vessel = a_vessel(LITRES[mark], fluid, measured_evaporation=0.0)
    return a_room(50, vessels=(vessel,), **fields)


@pytest.mark.parametrize(
    ("mark", "none", "some", "every"),
    [
        ("first", "minor", "observation", "observation"),
        ("second", "major", "minor", "observation"),
        ("third", "critical", "major", "minor"),
    ],
)
def test_a_release_at_once_by_mark_and_safeguards(mark, none, some, every):
    assert severity(at_once(mark), AT_ONCE) == none
    assert severity(at_once(mark, **DETECTION), AT_ONCE) == some
    assert severity(at_once(mark, **VENTILATION), AT_ONCE) == some
    assert severity(at_once(mark, **DETECTION, **VENTILATION), AT_ONCE) == every


def test_the_statement_says_whom_detection_protects():
    assert "those who would enter" in judged(at_once(**DETECTION), AT_ONCE).statement
    assert "those who would enter" not in judged(at_once(), AT_ONCE).statement


@pytest.mark.parametrize(
    ("flaw", "value"),
    [
        ("gas", "helium"),
        ("state", "fault"),
        ("state", "off"),
        ("calibration_due", NOW),
        ("calibration_due", None),
        ("silenced_since", NOW),
        ("height", 1.3),
        ("height", 0.1),
        ("height", 2.3),
        ("height", None),
        ("placed", "entrance"),
        ("alarms", (23.5,)),
        ("alarms", (4.0,)),
        ("alarms", ()),
    ],
)
def test_a_detector_with_a_flaw_is_no_safeguard(flaw, value):
    assert severity(at_once(detectors=(a_detector(**{flaw: value}),)), AT_ONCE) == "critical"


@pytest.mark.parametrize("unknown", [None, False])
def test_a_detector_that_nobody_outside_hears_or_sees_is_no_safeguard(unknown):
    unheard = a_detector(heard_outside=unknown, display_outside=unknown)
    assert severity(at_once(detectors=(unheard,)), AT_ONCE) == "critical"
    seen = a_detector(heard_outside=unknown, display_outside=True)
    assert severity(at_once(detectors=(seen,)), AT_ONCE) == "major"


@pytest.mark.parametrize("flaw", [{"power_backed": None}, {"power_backed": False}])
def test_with_the_air_as_measured_a_detector_needs_no_power_of_its_own(flaw):
    assert severity(at_once(detectors=(a_detector(**flaw),)), AT_ONCE) == "major"


@pytest.mark.parametrize(
    ("height", "holds"), [(0.19, False), (0.2, True), (1.0, True), (1.01, False)]
)
def test_cold_heavy_gas_is_met_low(height, holds):
    """0.2 to 1.0 m: common practice, no source."""
    room = at_once(detectors=(a_detector(height=height),))
    assert (severity(room, AT_ONCE) == "major") is holds


@pytest.mark.parametrize(
    ("height", "holds"), [(1.99, False), (2.0, True), (2.5, True), (0.5, False)]
)
def test_helium_is_met_at_the_ceiling(height, holds):
    """Within 0.5 m of a ceiling of 2.5 m: common practice, no source."""
    room = at_once(fluid=HELIUM, detectors=(a_detector(height=height),))
    assert (severity(room, AT_ONCE) == "major") is holds


def test_a_ceiling_of_unknown_height_follows_from_volume_and_floor():
    room = at_once(fluid=HELIUM, height=None, detectors=(a_detector(height=2.3),))
    assert severity(room, AT_ONCE) == "major"
    assert severity(replace(room, floor_area=None), AT_ONCE) == "critical"


def test_methane_is_watched_at_the_ceiling_and_low():
    low, high = a_detector(height=0.5, tag="low"), a_detector(height=2.4, tag="high")
    found = [
        severity(at_once(fluid=METHANE, detectors=detectors), AT_ONCE)
        for detectors in ((low,), (high,), (low, high))
    ]
    assert found == ["critical", "critical", "major"]


def test_an_oxygen_detector_without_an_alarm_for_enrichment_is_none_for_it():
    rich = at_once(fluid=OXYGEN, detectors=(a_detector(alarms=(19.5, 18.0)),))
    assert severity(rich, "enrichment/largest-vessel") == "critical"
    told = at_once(fluid=OXYGEN, detectors=(a_detector(alarms=(19.5, 23.5)),))
    assert severity(told, "enrichment/largest-vessel") == "major"


class TestVentilation:
    """Measured in date, holds what lasts, and brings the room back within the hour."""

    @pytest.mark.parametrize(
        "flaw",
        [
            {"state": "stopped"},
            {"measurement_due": EARLIER},
            {"measurement_due": None},
            {"measured_flow": None},
        ],
    )
    def test_a_unit_with_a_flaw_is_no_safeguard(self, flaw):
        assert severity(at_once(units=(a_unit(900, **flaw),)), AT_ONCE) == "critical"

    @pytest.mark.parametrize(("flow", "holds"), [(395, False), (406, True)])
    def test_it_brings_the_room_back_in_time(self, flow, holds):
        """From no oxygen to 19.5 %: ln(20.95/1.45) = 2.6706 air changes of 50 m3, times three."""
        vessel = a_vessel(80, measured_evaporation=0.0)
        room = a_room(50, vessels=(vessel,), units=(a_unit(flow),))
        assert (severity(room, AT_ONCE) == "major") is holds

    def test_natural_air_is_no_safeguard(self):
        basis = a_basis(
            "uk-eu",
            natural_air_changes_per_h={"above_ground": 10.0, "below_ground": 10.0, "enclosed": 0.0},
        )
        assert severity(at_once(basis=basis), AT_ONCE) == "critical"

    def test_it_must_hold_what_lasts(self):
        """12 m3/h of gas into an exhaust of 200 m3/h counted: 6 % of air is gone; 20: 10 %."""
        holds, fails = (
            a_room(
                50,
                vessels=(
                    a_vessel(60, measured_evaporation=litres * PER_DAY, filled_by="attended"),
                ),
                units=(a_unit(600),),
            )
            for litres in (12 / 0.692 * 24, 20 / 0.692 * 24)
        )
        assert severity(holds, AT_ONCE) == "major"
        assert severity(fails, AT_ONCE) == "critical"


class TestNobodyInside:
    """Recorded as unaccompanied: all of it in a lift or vehicle, one of three in a pit."""

    @pytest.mark.parametrize("kind", ["lift", "vehicle"])
    def test_alone_it_is_all_of_a_lift_or_vehicle(self, kind):
        assert severity(at_once(kind=kind), AT_ONCE) == "critical"
        assert severity(at_once(kind=kind, unaccompanied=False), AT_ONCE) == "critical"
        assert severity(at_once(kind=kind, unaccompanied=True), AT_ONCE) == "minor"

    def test_in_a_pit_it_is_one_of_three(self):
        alone = at_once(kind="pit", unaccompanied=True)
        assert severity(alone, AT_ONCE) == "major"
        every = at_once(kind="pit", unaccompanied=True, **DETECTION, **VENTILATION)
        assert severity(every, AT_ONCE) == "minor"
        two = at_once(kind="pit", **DETECTION, **VENTILATION)
        assert severity(two, AT_ONCE) == "major"

    @pytest.mark.parametrize("kind", ["room", "corridor", "walk-in"])
    def test_it_is_nothing_anywhere_else(self, kind):
        assert severity(at_once(kind=kind, unaccompanied=True), AT_ONCE) == "critical"

    def test_that_nobody_is_usually_there_lowers_nothing(self):
        assert severity(at_once(attended=False, most_people=0), AT_ONCE) == "critical"


# 10 L of nitrogen, 6.92 m3 of gas, over two days into a closed room: C0 exp(-Vg/V).
VOLUMES = {"first": 69.2, "second": 20.0, "third": 7.0}


def lost(mark, told=None, **fields):
    """A room whose fan holds its boil-off, and which has no air at all without power."""
    vessel = a_vessel(10, measured_evaporation=5 * PER_DAY)
    return a_room(
        VOLUMES[mark],
        kind="walk-in",
        vessels=(vessel,),
        units=(a_unit(60, fail_alarm=told),),
        **fields,
    )


@pytest.mark.parametrize(
    ("mark", "none", "every"),
    [
        ("first", "minor", "observation"),
        # Without an alarm nobody is out before the second mark, which counts as the third.
        ("second", "critical", "observation"),
        ("third", "critical", "minor"),
    ],
)
def test_boil_off_without_power_by_mark_and_detection(mark, none, every):
    assert severity(lost(mark), BOIL_OFF) == none
    assert severity(lost(mark, **DETECTION), BOIL_OFF) == every


@pytest.mark.parametrize(
    ("mark", "none", "every"),
    [
        ("first", "observation", "observation"),
        ("second", "major", "observation"),
        ("third", "major", "observation"),
    ],
)
def test_an_alarm_when_the_fan_fails_is_one_step_lower(mark, none, every):
    assert severity(lost(mark, told=True), BOIL_OFF) == none
    assert severity(lost(mark, told=True, **DETECTION), BOIL_OFF) == every


def test_people_who_are_out_in_time_leave_the_second_mark_a_second_mark():
    """The alarm is heard inside only: no safeguard, but people are out before 18 %."""
    room = lost("second", detectors=(a_detector(heard_outside=None),))
    assert severity(room, BOIL_OFF) == "major"


@pytest.mark.parametrize("flaw", [{"power_backed": None}, {"power_backed": False}])
def test_a_detector_without_power_of_its_own_is_none_without_power(flaw):
    assert severity(lost("second", detectors=(a_detector(**flaw),)), BOIL_OFF) == "critical"


def test_a_way_out_longer_than_the_time_left_is_not_out_in_time():
    room = lost("second", **DETECTION)
    case = case_of(room, "boil-off", "lost")
    assert case.margin_s == pytest.approx(case.to_danger_s - case.alarm_s - 30 - 5, rel=1e-9)
    far = replace(room, way_out=case.to_danger_s)
    assert severity(far, BOIL_OFF) == "critical"


def test_a_fan_on_standby_power_keeps_its_air():
    room = lost("third")
    backed = replace(room, units=(replace(room.units[0], standby_power=True),))
    assert severity(backed, BOIL_OFF) is None


@pytest.mark.parametrize(
    ("mark", "expected"), [("first", "major"), ("second", "critical"), ("third", "critical")]
)
def test_what_evaporates_without_any_accident_is_never_milder(mark, expected):
    room = replace(lost(mark, **DETECTION), units=())
    assert severity(room, BOIL_OFF) == expected


def test_a_severity_table_of_the_basis_is_followed():
    table = {
        "first": ["observation"] * 3,
        "second": ["minor"] * 3,
        "third": ["minor"] * 3,
    }
    basis = a_basis(severity_table=table)
    assert severity(at_once("third", basis=basis), AT_ONCE) == "minor"
    assert severity(replace(lost("first"), units=(), basis=basis), BOIL_OFF) == "major"


def test_where_danger_equals_deficient_people_have_until_between_danger_and_critical():
    """At 1600 m the marks are 19.5, 19.5 and 12.13 %: the time tests use 15.81 % (methods B-7)."""
    vessel = a_vessel(10, measured_evaporation=5 * PER_DAY)
    room = a_room(90, kind="walk-in", elevation=1600.0, vessels=(vessel,), units=(a_unit(60),))
    case = case_of(room, "boil-off", "lost")
    assert case.mark == 2
    assert 15.82 < case.oxygen_pct < 19.5
    # The second mark is crossed, but not the level that people must be out by.
    assert severity(room, BOIL_OFF) == "major"


@pytest.mark.parametrize("t90", [1.0, 30.0])
def test_a_detector_where_nothing_moves_reads_what_is_there(t90):
    """A pit without air keeps its gas, and the reading comes up to it and stays."""
    vessel = a_vessel(20, measured_evaporation=0.0)
    room = a_room(50, kind="pit", vessels=(vessel,), detectors=(a_detector(t90=t90),))
    case = case_of(room)
    tau, at_alarm = t90 / log(10.0), (20.95 - 19.5) / (20.95 - case.oxygen_pct)
    assert case.alarm_s == pytest.approx(-tau * log(1.0 - at_alarm), rel=1e-8)
    assert severity(room, AT_ONCE) == "minor"


def test_a_silence_that_has_not_begun_is_none_yet():
    soon = a_detector(silenced_since=NOW + timedelta(hours=1), calibration_due=LATER)
    assert severity(at_once(detectors=(soon,)), AT_ONCE) == "major"
