"""Air that an alarm boosts: as measured until then, more from there on, and shown only."""

from dataclasses import replace
from math import exp, log

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.audit.builders import (
    EARLIER,
    HELIUM,
    NITROGEN,
    PER_DAY,
    PER_HOUR,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    case_of,
    severity,
    standing_of,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA
# Gas of a litre of liquid nitrogen at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]
NITROGEN_GAS = 0.806_08 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.028_013_5)
QUICK = a_detector(t90=1e-3, alarms=(19.5,))


def boosted_unit(flow=30.0, to=600.0, trigger="detector-D-1", **fields):
    return a_unit(
        flow,
        mixing_factor=1.0,
        **{"boost_flow": to * PER_HOUR, "boost_trigger": trigger, **fields},
    )


def evaporating(litres_a_day=24.0, unit=None, detectors=(QUICK,), **fields):
    """A vessel that never runs out, into 50 m3 with an exhaust of 30 m3/h, all of it counted."""
    vessel = a_vessel(
        100,
        measured_evaporation=litres_a_day * PER_DAY,
        filled_by="attended",
        fill_flow=1e-9,
    )
    return a_room(
        50,
        vessels=(vessel,),
        units=(unit or boosted_unit(),),
        detectors=detectors,
        **{"kind": "pit", **fields},
    )


def airflows(room):
    return {case.airflow for case in assessed(room)[0].cases}


def test_the_boost_begins_at_the_alarm():
    """96 L a day are 2.77 m3/h: exhaust of 30, and from 19.5 % on 600 (methods D2, D6)."""
    room = evaporating(96)
    rate = 4 * NITROGEN_GAS
    measured, boosted = (case_of(room, "boil-off", air) for air in ("as-measured", "boosted"))
    steady, limit = rate / 30, 1 - 19.5 / 20.95
    alarm = 50 / 30 * 3600 * log(steady / (steady - limit))
    assert measured.alarm_s == pytest.approx(alarm, rel=1e-4)
    assert boosted.alarm_s == pytest.approx(alarm, rel=1e-4)
    # At the alarm the room is at the mark, and what lasts there is less than the boost clears.
    assert boosted.oxygen_pct == pytest.approx(19.5, abs=1e-3)
    assert measured.oxygen_pct == pytest.approx(20.95 * (1 - steady), rel=1e-9)
    assert boosted.at_s == pytest.approx(alarm, rel=1e-4)


def test_from_the_alarm_on_the_room_tends_to_what_the_boost_allows():
    """An hour after a release at once: exp(-Q t/V), 30 m3/h until the alarm and 300 after."""
    vessel = a_vessel(20, measured_evaporation=0.0)
    detector = replace(QUICK, delay=600.0)
    room = a_room(
        50, kind="pit", vessels=(vessel,), units=(boosted_unit(to=300.0),), detectors=(detector,)
    )
    lowest = 20 * NITROGEN_GAS / 50
    at_alarm = lowest * exp(-30 / 50 / 6)
    expected = 600 + 50 / 300 * 3600 * log(at_alarm / (1 - 19.5 / 20.95))
    case = case_of(room, "largest-vessel", "boosted")
    assert case.alarm_s == pytest.approx(600, abs=1e-2)
    assert case.recovered_s == pytest.approx(expected, rel=1e-5)


def test_until_the_alarm_it_is_the_air_as_measured():
    room = evaporating(200, detectors=(replace(QUICK, delay=7200.0),))
    measured, boosted = (case_of(room, "boil-off", air) for air in ("as-measured", "boosted"))
    assert measured.to_danger_s < measured.alarm_s
    assert boosted.alarm_s == measured.alarm_s
    assert boosted.to_deficient_s == measured.to_deficient_s
    assert boosted.to_danger_s == measured.to_danger_s
    assert boosted.gas_m3 == pytest.approx(measured.gas_m3, rel=1e-9)
    assert boosted.oxygen_pct > measured.oxygen_pct


def test_a_person_boosts_it_after_the_time_to_react():
    """30 s after the alarm (common practice, no source)."""
    by_hand = evaporating(96, unit=boosted_unit(trigger="manual"))
    by_itself = evaporating(96)
    times = [case_of(room, "boil-off", "boosted").at_s for room in (by_hand, by_itself)]
    assert times[0] - times[1] == pytest.approx(30.0, abs=1e-6)


@pytest.mark.parametrize(
    "detector",
    [
        replace(QUICK, state="off"),
        replace(QUICK, silenced_since=EARLIER),
        replace(QUICK, calibration_due=EARLIER),
        replace(QUICK, height=1.3),
        replace(QUICK, alarms=(4.0,)),
        replace(QUICK, gas="helium"),
        replace(QUICK, delay=400_000.0),
    ],
)
@pytest.mark.parametrize("trigger", ["detector-D-1", "manual"])
def test_a_trigger_that_never_alarms_boosts_nothing(detector, trigger):
    room = evaporating(96, unit=boosted_unit(trigger=trigger), detectors=(detector,))
    measured, boosted = (case_of(room, "boil-off", air) for air in ("as-measured", "boosted"))
    assert boosted.oxygen_pct == measured.oxygen_pct
    assert boosted.recovered_s == measured.recovered_s


@pytest.mark.parametrize(
    "unit",
    [
        boosted_unit(trigger=None),
        boosted_unit(trigger="detector-elsewhere"),
        boosted_unit(boost_flow=None),
        boosted_unit(to=20.0),
        boosted_unit(state="stopped"),
        boosted_unit(state="failed"),
        boosted_unit(outdoor_air_fraction=0.0),
    ],
)
def test_only_a_unit_that_is_boosted_to_more_makes_such_a_case(unit):
    """Only where a unit has a boost (judging 2)."""
    assert "boosted" not in airflows(evaporating(96, unit=unit))
    assert "boosted" in airflows(evaporating(96))


def test_of_two_units_the_later_trigger_counts():
    """The cautious side: nothing is boosted before all of it is."""
    early, late = replace(QUICK), a_detector(tag="D-2", t90=1e-3, alarms=(18.5,))
    units = (
        boosted_unit(tag="A"),
        boosted_unit(tag="B", trigger="detector-D-2"),
    )
    room = replace(evaporating(400, detectors=(early, late)), units=units)
    silent = replace(early, silenced_since=EARLIER)
    alone = replace(evaporating(400, detectors=(silent, late)), units=units)
    both, only_late = (case_of(each, "boil-off", "boosted") for each in (room, alone))
    # In the second, the first unit's own trigger never alarms, and so nothing is told of either.
    assert both.oxygen_pct == pytest.approx(18.5, abs=1e-2)
    assert only_late.oxygen_pct == case_of(alone, "boil-off").oxygen_pct


def test_what_is_boosted_is_the_share_of_outdoor_air_that_serves_the_room():
    """600 m3/h x 0.5 outdoor x 0.5 of it here / 2 for mixing: 75 m3/h counted."""
    unit = replace(boosted_unit(), outdoor_air_fraction=0.5, share=0.5, mixing_factor=2.0)
    vessel = a_vessel(20, measured_evaporation=0.0)
    room = a_room(50, kind="pit", vessels=(vessel,), units=(unit,), detectors=(QUICK,))
    hours = 50 / 75 * log(20 * NITROGEN_GAS / 50 / (1 - 19.5 / 20.95))
    case = case_of(room, "largest-vessel", "boosted")
    assert case.recovered_s == pytest.approx(3600 * hours, rel=1e-4)


def test_it_is_shown_and_never_counts():
    room = evaporating(96)
    found = [case for case in assessed(room)[0].cases if case.airflow == "boosted"]
    assert {case.release for case in found} == {
        "boil-off",
        "filling",
        "largest-vessel",
        "all-vessels",
    }
    assert not any(case.counts for case in found)
    plain = replace(room, units=(replace(room.units[0], boost_flow=None, boost_trigger=None),))
    assert standing_of(room) == standing_of(plain)
    assert severity(room, "oxygen/boil-off") == severity(plain, "oxygen/boil-off")


def test_without_margins_each_boosted_case_stands_beside_its_own():
    room = evaporating(96, occupied_fraction=0.5)
    for case in assessed(room)[0].cases:
        assert case.without_margins["net_volume_m3"] == 50.0
        assert case.without_margins["oxygen_pct"] >= case.oxygen_pct - 1e-9


def test_helium_is_boosted_by_the_detector_at_the_ceiling():
    vessel = a_vessel(40, HELIUM, measured_evaporation=0.0)
    for height, quicker in ((2.4, True), (0.5, False)):
        detector = replace(QUICK, height=height)
        room = a_room(50, vessels=(vessel,), units=(boosted_unit(),), detectors=(detector,))
        measured, boosted = (
            case_of(room, "largest-vessel", air).recovered_s for air in ("as-measured", "boosted")
        )
        assert (boosted < measured) is quicker


@pytest.mark.slow
@settings(max_examples=15)
@given(
    st.floats(5.0, 400.0),
    st.floats(0.0, 3000.0),
    st.sampled_from(["supply", "exhaust", "balanced"]),
    st.booleans(),
)
def test_a_boost_is_never_worse_than_none(litres_a_day, delay, arrangement, exchanged):
    unit = boosted_unit(arrangement=arrangement)
    room = evaporating(litres_a_day, unit=unit, detectors=(replace(QUICK, delay=delay),))
    if exchanged:
        room = replace(room, vessels=(replace(room.vessels[0], filled_by="exchanged"),))
    cases = assessed(room)[0].cases
    measured = {
        (case.release, case.hazard): case for case in cases if case.airflow == "as-measured"
    }
    boosted = [case for case in cases if case.airflow == "boosted"]
    assert len(boosted) == len(measured)
    for case in boosted:
        plain = measured[case.release, case.hazard]
        assert case.oxygen_pct >= plain.oxygen_pct - 1e-8
        assert case.alarm_s == plain.alarm_s
        # One that the boost keeps inside its mark has nothing to come back from.
        if plain.recovered_s is not None and case.mark > 0:
            assert case.recovered_s <= plain.recovered_s * (1 + 1e-9)


def test_rooms_beside_each_other_have_boosts_of_their_own():
    """A trigger by another room's detector of the same tag starts nothing here."""
    with_alarm, without = evaporating(96), evaporating(96, detectors=())
    alone = [assessed(room)[0] for room in (with_alarm, without)]
    assert list(assessed(with_alarm, without)) == alone


def test_nitrogen_from_two_vessels_keeps_its_members():
    vessels = tuple(
        a_vessel(30, NITROGEN, tag=tag, measured_evaporation=60 * PER_DAY) for tag in "AB"
    )
    room = replace(evaporating(), vessels=vessels)
    case = case_of(room, "boil-off", "boosted")
    assert [vessel.tag for vessel in case.vessels] == ["A", "B"]
    assert case.fluids == ("nitrogen",)
