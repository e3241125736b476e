"""Planned outages by the clock: from the moment they begin to the moment they end."""

from datetime import timedelta

import pytest

from service.audit.inputs import Outage
from tests.audit.builders import (
    LATER,
    NOW,
    PER_DAY,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
)

HOUR = timedelta(hours=1)
INSTANT = timedelta(microseconds=1)
BEGINS, ENDS = NOW + 2 * HOUR, NOW + 5 * HOUR
OUTAGE = (Outage(BEGINS, ENDS),)
AT_ONCE = "oxygen/largest-vessel"


def a_store(**fields):
    vessel = a_vessel(45, measured_evaporation=0.0)
    return a_room(50, vessels=(vessel,), **fields)


def moved(room, at):
    return assessed(room, at=at)[0].ventilation.outdoor_air_m3_h


@pytest.mark.parametrize(
    ("at", "runs"),
    [
        (NOW, True),
        (BEGINS - INSTANT, True),
        (BEGINS, False),
        (ENDS - INSTANT, False),
        (ENDS, True),
    ],
)
def test_a_unit_stands_still_from_the_beginning_to_the_end(at, runs):
    room = a_store(kind="pit", units=(a_unit(600, outages=OUTAGE),))
    assert moved(room, at) == pytest.approx(600.0 if runs else 0.0)


@pytest.mark.parametrize(("at", "found"), [(NOW, "major"), (BEGINS, "critical"), (ENDS, "major")])
def test_a_unit_in_an_outage_is_no_safeguard(at, found):
    room = a_store(units=(a_unit(600, outages=OUTAGE),))
    judgements = assessed(room, at=at)[0].judgements
    assert [each.severity for each in judgements if each.rule == AT_ONCE] == [found]


@pytest.mark.parametrize(
    ("at", "found"),
    [
        (BEGINS - INSTANT, "major"),
        (BEGINS, "critical"),
        (ENDS - INSTANT, "critical"),
        (ENDS, "major"),
    ],
)
def test_a_detector_in_an_outage_gives_no_detection(at, found):
    room = a_store(detectors=(a_detector(outages=OUTAGE),))
    judgements = assessed(room, at=at)[0].judgements
    assert [each.severity for each in judgements if each.rule == AT_ONCE] == [found]


@pytest.mark.parametrize("at", [BEGINS, ENDS - INSTANT])
def test_nor_does_it_alarm(at):
    room = a_store(detectors=(a_detector(outages=OUTAGE),))
    alarms = {case.alarm_s for case in assessed(room, at=at)[0].cases}
    assert alarms == {None}
    assert None not in {case.alarm_s for case in assessed(room)[0].cases}


def of_unit(*outages, **fields):
    return a_store(units=(a_unit(600, outages=outages, **fields),))


def of_detector(*outages, **fields):
    return a_store(detectors=(a_detector(outages=outages, **fields),))


@pytest.mark.parametrize("make", [of_unit, of_detector])
@pytest.mark.parametrize(
    ("at", "turn"),
    [(NOW, BEGINS), (BEGINS - INSTANT, BEGINS), (BEGINS, ENDS), (ENDS - INSTANT, ENDS)],
)
def test_the_turn_is_the_next_edge(make, at, turn):
    assert assessed(make(*OUTAGE), at=at)[0].turns_at == turn


@pytest.mark.parametrize("make", [of_unit, of_detector])
def test_after_the_last_edge_only_what_ages_turns(make):
    assert assessed(make(*OUTAGE), at=ENDS)[0].turns_at == LATER


@pytest.mark.parametrize("make", [of_unit, of_detector])
def test_at_each_turn_something_changes_and_nothing_before_it(make):
    room, at = make(*OUTAGE), NOW
    for _ in range(2):
        before = assessed(room, at=at)[0]
        just_before, after = (
            assessed(room, at=moment)[0] for moment in (before.turns_at - INSTANT, before.turns_at)
        )
        assert (just_before.cases, just_before.judgements) == (before.cases, before.judgements)
        assert (after.cases, after.judgements) != (before.cases, before.judgements)
        at = before.turns_at


def test_outages_that_meet_or_overlap_are_one():
    later = Outage(ENDS - HOUR, ENDS + HOUR)
    touching = Outage(ENDS + HOUR, ENDS + 2 * HOUR)
    room = a_store(kind="pit", units=(a_unit(600, outages=(*OUTAGE, later, touching)),))
    moments = (BEGINS, ENDS, ENDS + HOUR, ENDS + 2 * HOUR)
    assert [moved(room, at) for at in moments] == pytest.approx([0.0, 0.0, 0.0, 600.0])


def test_two_outages_are_each_kept():
    second = Outage(ENDS + HOUR, ENDS + 2 * HOUR)
    room = a_store(kind="pit", units=(a_unit(600, outages=(second, *OUTAGE)),))
    moments = (NOW, BEGINS, ENDS, ENDS + HOUR, ENDS + 2 * HOUR)
    assert [moved(room, at) for at in moments] == pytest.approx([600.0, 0.0, 600.0, 0.0, 600.0])
    assert [assessed(room, at=at)[0].turns_at for at in moments[:4]] == [
        BEGINS,
        ENDS,
        ENDS + HOUR,
        ENDS + 2 * HOUR,
    ]


def test_an_outage_of_nothing_stops_nothing():
    room = a_store(kind="pit", units=(a_unit(600, outages=(Outage(BEGINS, BEGINS),)),))
    assert moved(room, BEGINS) == pytest.approx(600.0)


@pytest.mark.parametrize("state", ["stopped", "failed"])
def test_a_unit_that_does_not_run_is_not_started_by_the_end_of_an_outage(state):
    room = a_store(kind="pit", units=(a_unit(600, state=state, outages=OUTAGE),))
    assert moved(room, ENDS) == 0.0
    assert assessed(room)[0].turns_at is None


@pytest.mark.parametrize("state", ["fault", "off"])
def test_nor_is_a_detector(state):
    room = a_store(detectors=(a_detector(state=state, calibration_due=None, outages=OUTAGE),))
    judgements = assessed(room, at=ENDS)[0].judgements
    assert [each.severity for each in judgements if each.rule == AT_ONCE] == ["critical"]


def test_a_unit_that_an_outage_stops_does_not_boost():
    vessel = a_vessel(100, measured_evaporation=96 * PER_DAY, filled_by="attended", fill_flow=1e-9)
    unit = a_unit(30, boost_flow=1.0, boost_trigger="detector-D-1", outages=OUTAGE)
    room = a_room(50, vessels=(vessel,), units=(unit,), detectors=(a_detector(),))
    found = [
        {case.airflow for case in assessed(room, at=at)[0].cases} for at in (NOW, BEGINS, ENDS)
    ]
    assert ["boosted" in airflows for airflows in found] == [True, False, True]


def test_its_design_is_still_shown():
    """`design` is every unit at its design flow (judging 2)."""
    room = a_room(
        50,
        kind="pit",
        vessels=(a_vessel(20, measured_evaporation=0.0),),
        units=(a_unit(600, outages=OUTAGE),),
    )
    found = {
        case.airflow: case.recovered_s
        for case in assessed(room, at=BEGINS)[0].cases
        if case.release == "largest-vessel"
    }
    assert found["as-measured"] is None
    assert found["design"] is not None


def test_outages_of_two_rooms_do_not_mix():
    stopped = a_store(kind="pit", tag="P", units=(a_unit(600, outages=OUTAGE),))
    runs = a_store(kind="pit", tag="Q", units=(a_unit(300),))
    found = [each.ventilation.outdoor_air_m3_h for each in assessed(stopped, runs, at=BEGINS)]
    assert found == pytest.approx([0.0, 300.0])
