"""Rules on supply lines: which shut-off would end a break, and since when none is trusted."""

import pytest

from tests.audit.accident_rooms import with_its_detector, with_line
from tests.audit.builders import (
    LATER,
    a_detector,
    a_line,
    a_room,
    a_shut_line,
    a_vessel,
    assessed,
    judged,
    severity,
)


def of_lines(room):
    return {
        each.rule.split("/")[1]: each.severity
        for each in assessed(room)[0].judgements
        if each.family == "supply-lines"
    }


def test_a_line_of_which_nothing_but_a_shut_off_is_recorded_has_all_of_its_findings():
    line = a_line(has_shut_off=True)
    assert of_lines(a_room(500, lines=(line,))) == {
        "shut-off-sees-no-break": "observation",
        "shut-off-fails-open": "minor",
        "shut-off-untested": "minor",
        "unrestricted": "observation",
    }


def test_a_line_without_any_shut_off_is_not_asked_for_its_test():
    assert of_lines(a_room(500, lines=(a_line(),))) == {
        "shut-off-missing": "observation",
        "unrestricted": "observation",
    }


@pytest.mark.parametrize("trigger", ["high-level", "manual", None])
def test_what_sees_no_break_shuts_none(trigger):
    room = with_line(trigger=trigger)
    assert severity(room, "supply-lines/shut-off-sees-no-break") == "observation"


@pytest.mark.parametrize(
    "fields", [{"state": "fault"}, {"calibration_due": None}, {"placed": "entrance"}]
)
def test_a_detector_that_does_not_hold_shuts_none(fields):
    assert severity(with_its_detector(**fields), "supply-lines/shut-off-trigger") == "minor"


def test_a_detector_of_another_room_shuts_none_here():
    elsewhere = a_detector(tag="D-9").record.id
    room = a_room(500, lines=(a_shut_line(trigger=elsewhere),), detectors=(a_detector(),))
    found = judged(room, "supply-lines/shut-off-trigger")
    assert found.evidence["detector_elsewhere"] is True
    assert "another room" in found.statement


def test_nothing_comes_out_of_a_line_whose_source_is_gone():
    outdoors = a_vessel(100, kind="tank", state="withdrawn")
    assert of_lines(a_room(500, lines=(a_line(source=outdoors),))) == {}


def test_a_finding_is_about_the_line():
    room = with_line(trigger="manual")
    found = judged(room, "supply-lines/shut-off-sees-no-break")
    assert found.subject == room.lines[0].record


def test_the_test_of_a_shut_off_turns_when_it_is_due():
    room = with_line()
    assert of_lines(room) == {}
    assert assessed(room)[0].turns_at == LATER
    assert judged(room, "supply-lines/shut-off-untested", at=LATER).severity == "minor"
