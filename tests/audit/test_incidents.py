"""What published investigations tell of, in general terms: each kind is found (judging 8)."""

from datetime import timedelta

import pytest

from service.audit.inputs import PitValues
from tests.audit.builders import (
    LATER,
    LITRE,
    NITROGEN,
    NOW,
    a_detector,
    a_line,
    a_magnet,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    severity,
)


def rules(room):
    return {each.rule: each.severity for each in assessed(room)[0].judgements}


def test_an_automatic_fill_that_does_not_stop():
    vessel = a_vessel(
        150, kind="freezer", filled_by="automatic", fill_flow=8 * LITRE / 60.0,
        independent_high_level=False,
    )  # fmt: skip
    found = rules(a_room(90, vessels=(vessel,), units=(a_unit(600),)))
    assert found["oxygen/overfill"] == "critical"
    assert found["vessels/fill-without-high-level"] == "major"


def test_a_lone_worker_with_the_fan_off_and_the_detector_silenced():
    room = a_room(
        25,
        vessels=(a_vessel(40),),
        units=(a_unit(600, state="stopped"),),
        detectors=(a_detector(silenced_since=NOW - timedelta(hours=5)),),
    )
    found = rules(room)
    assert found["oxygen/largest-vessel"] == "critical"
    assert found["detectors/silenced"] == "major"
    assert found["ventilation/stopped"] == "observation"
    assert found["controls/missing"] == "minor"


def test_gas_from_a_line_left_open_into_a_pit():
    line = a_line(phase="gas", bore=0.006, source_pressure=6e5)
    pit = PitValues(3.0, 2.0, entered=True)
    room = a_room(800, lines=(line,), pit=pit, units=(a_unit(3000),))
    assert rules(room)["layering/pit"] == "critical"
    shallow = a_room(800, lines=(line,), pit=PitValues(3.0, 2.0, entered=False), units=())
    assert rules(shallow)["layering/pit"] == "major"
    low = a_unit(3000, arrangement="exhaust", terminal_height="low")
    assert "layering/pit" not in rules(a_room(800, lines=(line,), pit=pit, units=(low,)))
    watched = a_detector(height=0.0)
    room = a_room(800, lines=(line,), pit=pit, detectors=(watched,))
    assert "layering/pit" not in rules(room)


def test_a_closed_damper_behind_a_running_fan():
    room = a_room(30, vessels=(a_vessel(20),), units=(a_unit(600, flow_proved=False),))
    assert rules(room)["ventilation/flow-not-proved"] == "minor"


def test_an_iced_or_sealed_neck():
    vessel = a_vessel(25, kind="open-dewar", neck_plug="sealed", relief_fitted=None)
    assert rules(a_room(vessels=(vessel,)))["vessels/neck-sealed"] == "critical"


def test_a_relief_that_was_removed():
    vessel = a_vessel(200, relief_fitted=False)
    assert rules(a_room(vessels=(vessel,)))["vessels/relief-missing"] == "critical"


def test_an_alarm_that_was_silenced_for_weeks():
    detector = a_detector(silenced_since=NOW - timedelta(days=30))
    assert rules(a_room(detectors=(detector,)))["detectors/silenced"] == "major"


def test_a_quench_pipe_that_is_blocked():
    magnet = a_magnet(
        1500, has_pipe=True, pipe_inspected=True, pipe_inspection_due=LATER, outlet_clear=False
    )
    found = rules(a_room(120, vessels=(magnet,)))
    assert found["vessels/quench-pipe-blocked"] == "major"
    assert found["oxygen/quench"] == "critical"


@pytest.mark.parametrize(
    ("kind", "unaccompanied", "worst"),
    [
        ("lift", None, "critical"),
        ("lift", False, "critical"),
        ("lift", True, "minor"),
        ("vehicle", None, "critical"),
        ("vehicle", True, "minor"),
    ],
)
def test_a_passenger_in_a_lift_or_vehicle_with_a_dewar(kind, unaccompanied, worst):
    """Sealed small volumes: no natural air, and nobody inside counts as all (judging 2 and 4).

    The third mark is critical without a safeguard, and minor with all.
    """
    dewar = a_vessel(30, NITROGEN, measured_evaporation=0.0, mobile=True, working_pressure=2e5)
    room = a_room(8, kind=kind, vessels=(dewar,), unaccompanied=unaccompanied)
    assert assessed(room)[0].ventilation.credited_m3_h == 0.0
    for release in ("largest-vessel", "spill", "line-break"):
        assert severity(room, f"oxygen/{release}") == worst, release
