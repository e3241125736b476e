"""Rooms of the trade, worked through: what each must come to (common practice, no source).

Numbers in the comments are by hand: gas of a litre of nitrogen 0.692 m3 at 20 degrees Celsius
(methods A1), of a kilogram of dry ice 0.544 m3 (A-4).
"""

from dataclasses import replace
from datetime import timedelta

import pytest

from service.audit.assessment import STANDINGS
from service.audit.inputs import Outage
from tests.audit.builders import (
    EARLIER,
    LATER,
    NOW,
    PER_DAY,
    a_basis,
    a_control,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    findings_of,
    judged,
    severity,
    some_ice,
    standing_of,
)

A_MINUTE = 1e-3 / 60.0  # [m3/s] of a litre a minute
BASES = ("baseline", "us", "uk-eu")
# What a well-kept room records besides what is in it.
PAPERS = tuple(
    a_control(kind)
    for kind in (
        "signage",
        "procedure",
        "training",
        "personal-monitor",
        "alarm-response",
        "rescue",
        "lone-working",
        "protective-equipment",
        "access",
        "delivery-route",
    )
)


def at_least(standing):
    return STANDINGS[STANDINGS.index(standing) :]


def on_cases(room):
    """Severities of the rules on cases."""
    families = ("oxygen", "enrichment", "toxic", "flammable")
    return {
        each.rule: each.severity for each in assessed(room)[0].judgements if each.family in families
    }


def a_freezer(place, **fields):
    """400 L of nitrogen, filled by a line through a valve of its own, and tested."""
    defaults = {
        "kind": "freezer",
        "tag": f"F-{place:02d}",
        "measured_evaporation": 8 * PER_DAY,
        "filled_by": "automatic",
        "fill_flow": 30 * A_MINUTE,
        "independent_high_level": True,
        "closes_in": 60.0,
        "shut_off_test_due": LATER,
        "neck_plug": "vented",
        "mobile": False,
    }
    return a_vessel(400, **{**defaults, **fields})


def a_biobank(**fields):
    """Twelve freezers in 800 m3 net, ten air changes, two detectors, fans on standby power."""
    defaults = {
        "name": "Biobank",
        "floor_area": 1000 / 3.5,
        "height": 3.5,
        "occupied_fraction": 0.2,
        "attended": True,
        "vessels": tuple(a_freezer(place) for place in range(1, 13)),
        "units": (
            a_unit(
                8000,
                arrangement="balanced",
                standby_power=True,
                flow_proved=True,
                fail_alarm=True,
                terminal_height="low",
            ),
        ),
        "detectors": (
            a_detector(monitored=True, zeroed_at=101_325.0),
            a_detector(tag="D-2", height=1.4, monitored=True, zeroed_at=101_325.0),
        ),
        "controls": PAPERS,
    }
    return a_room(1000, **{**defaults, **fields})


class TestBiobank:
    """Well kept: in order or attention."""

    @pytest.mark.parametrize("tag", BASES)
    def test_it_is_in_order_or_wants_attention(self, tag):
        assert standing_of(a_biobank(basis=a_basis(tag))) in ("in-order", "attention")

    def test_a_whole_freezer_at_once_is_no_more_than_shown(self):
        """400 L, 440 with filling loss, are 305 m3 of 800: 13 %, with detection and clearing."""
        assert on_cases(a_biobank())["oxygen/largest-vessel"] == "observation"

    def test_all_of_it_is_no_more_than_shown(self):
        assert on_cases(a_biobank())["oxygen/all-vessels"] == "observation"

    def test_an_overfill_that_is_shut_off_crosses_no_mark(self):
        """30 L in a minute are 21 m3 of 800."""
        assert "oxygen/overfill" not in on_cases(a_biobank())

    def test_an_automatic_fill_that_does_not_stop_is_found(self):
        """The same freezers without the second level: 1246 m3/h of gas until someone comes.

        Detection and 2667 m3/h of air counted are two safeguards of three; the level is the third,
        and a finding of its own.
        """
        bare = tuple(
            a_freezer(place, independent_high_level=None, shut_off_test_due=None)
            for place in range(1, 13)
        )
        room = a_biobank(vessels=bare)
        assert severity(room, "oxygen/overfill") == "minor"
        assert severity(room, "vessels/fill-without-high-level") == "major"
        assert standing_of(room) in at_least("action")

    def test_nor_does_one_help_whose_test_is_overdue(self):
        vessels = tuple(a_freezer(place, shut_off_test_due=EARLIER) for place in range(1, 13))
        room = a_biobank(vessels=vessels)
        assert severity(room, "oxygen/overfill") == "minor"
        assert severity(room, "vessels/shut-off-untested") == "minor"
        assert standing_of(room) in at_least("attention")

    def test_without_its_detectors_the_same_fill_is_critical(self):
        bare = (a_freezer(1, independent_high_level=False),)
        room = a_biobank(vessels=bare, detectors=(), units=())
        assert severity(room, "oxygen/overfill") == "critical"
        assert standing_of(room) == "stop"

    def test_a_fan_that_stops_is_found(self):
        """96 L a day are 2.8 m3/h; natural air of 800 m3 x 0.2 holds it, but nothing clears."""
        room = a_biobank()
        stopped = replace(room, units=(replace(room.units[0], state="stopped"),))
        assert severity(stopped, "oxygen/largest-vessel") == "minor"
        assert severity(room, "oxygen/largest-vessel") == "observation"


def a_basement(**fields):
    """One 50 L dewar in 120 m3 gross below the ground, nothing else, nothing known of it."""
    vessel = a_vessel(50, measured_evaporation=None, filled_by=None, vent_to=None)
    return a_room(
        120,
        name="Basement",
        below_ground=True,
        occupied_fraction=None,
        temperature=None,
        elevation=None,
        way_out=None,
        vessels=(vessel,),
        **fields,
    )


class TestBasement:
    """One 50 L dewar, no air and no detector: action."""

    @pytest.mark.parametrize("tag", BASES)
    def test_it_needs_action(self, tag):
        assert standing_of(a_basement(basis=a_basis(tag))) == "action"

    def test_it_says_what_is_missing(self):
        found = {each.rule for each in assessed(a_basement())[0].judgements}
        assert {"oxygen/largest-vessel", "detectors/missing"} <= found

    def test_in_half_the_room_it_is_told_to_stop(self):
        """55 L with filling loss are 38 m3 of 48 net: below 10 %."""
        assert standing_of(replace(a_basement(), gross_volume=60.0, floor_area=24.0)) == "stop"


def a_walk_in(**fields):
    """50 kg of dry ice in a cold room of 30 m3 without air, and an oxygen detector."""
    return a_room(
        30,
        name="Cold room",
        kind="walk-in",
        temperature=277.15,
        vessels=(some_ice(50),),
        **{"detectors": (a_detector(),), **fields},
    )


class TestWalkIn:
    """Dry ice and only an oxygen detector: stop or action for the carbon dioxide."""

    @pytest.mark.parametrize("tag", BASES)
    def test_it_is_action_or_worse_for_carbon_dioxide(self, tag):
        room = a_walk_in(basis=a_basis(tag))
        assert standing_of(room) in at_least("action")
        found = judged(room, "toxic/boil-off")
        assert found.gas == "carbon-dioxide"
        assert "carbon dioxide" in found.statement
        assert found.severity in ("major", "critical")

    def test_an_oxygen_detector_makes_no_difference_to_it(self):
        assert severity(a_walk_in(), "toxic/spill") == severity(
            a_walk_in(detectors=()), "toxic/spill"
        )

    def test_the_findings_carry_the_gas(self):
        found = findings_of(a_walk_in())
        assert "carbon-dioxide" in {finding.gas for finding in found}

    def test_with_a_fan_enough_for_it_the_case_that_lasts_is_held(self):
        """1 kg an hour is 0.514 m3/h at 4 degrees: 103 m3/h at 0.5 %, 310 for mixing."""
        fan = a_unit(320, standby_power=True)
        room = a_walk_in(units=(fan,))
        assert "toxic/boil-off" not in on_cases(room)
        assert "toxic/boil-off" in on_cases(a_walk_in(units=(replace(fan, measured_flow=0.08),)))

    def test_five_kilograms_in_a_large_room_are_nothing(self):
        room = a_room(500, vessels=(some_ice(5, mobile=False),), units=(a_unit(1000),))
        assert on_cases(room) == {}


class TestCleanAir:
    """At 3,000 m it has less oxygen than any limit by pressure, and raises nothing."""

    @pytest.mark.parametrize("tag", BASES)
    @pytest.mark.parametrize("elevation", [0.0, 1370.0, 3000.0])
    def test_an_empty_room_raises_nothing(self, tag, elevation):
        room = a_room(60, elevation=elevation, basis=a_basis(tag))
        assert assessed(room)[0].judgements == ()
        assert standing_of(room) == "in-order"

    @pytest.mark.parametrize("tag", BASES)
    def test_nor_does_one_with_a_detector_and_a_running_fan(self, tag):
        """No vessel; the cell was zeroed up there (70.1 kPa, methods B-2)."""
        room = a_room(
            60,
            elevation=3000.0,
            basis=a_basis(tag),
            detectors=(a_detector(zeroed_at=70_108.5),),
            units=(a_unit(600, flow_proved=True, standby_power=True, fail_alarm=True),),
        )
        assert assessed(room)[0].judgements == ()
        assert standing_of(room) == "in-order"


def a_lift(**fields):
    """A 25 L dewar on its way down, in 6 m3."""
    return a_room(
        6,
        name="Lift",
        kind="lift",
        height=2.3,
        floor_area=6 / 2.3,
        most_people=1,
        vessels=(a_vessel(25),),
        **fields,
    )


class TestLift:
    """A passenger in a lift with a dewar: stop; alone, far milder."""

    def test_with_a_passenger_it_is_told_to_stop(self):
        room = a_lift()
        assert severity(room, "oxygen/largest-vessel") == "critical"
        assert standing_of(room) == "stop"
        assert "Let nobody ride" in judged(room, "oxygen/largest-vessel").remedy

    @pytest.mark.parametrize("recorded", [None, False])
    def test_what_nobody_recorded_is_a_passenger(self, recorded):
        assert standing_of(a_lift(unaccompanied=recorded)) == "stop"

    def test_unaccompanied_the_same_is_minor(self):
        room = a_lift(unaccompanied=True)
        assert severity(room, "oxygen/largest-vessel") == "minor"
        assert standing_of(room) != "stop"

    def test_that_nobody_is_usually_there_is_no_such_record(self):
        assert standing_of(replace(a_lift(), attended=False, most_people=0)) == "stop"


def a_laboratory(**fields):
    """Two 50 L dewars used at 10 L a day, in 120 m3 with an exhaust of 900 m3/h."""
    vessels = tuple(
        a_vessel(50, tag=tag, measured_evaporation=PER_DAY, use=10 * PER_DAY, filled_by="attended")
        for tag in ("D-A", "D-B")
    )
    defaults = {
        "name": "Laboratory",
        "vessels": vessels,
        "units": (a_unit(900, standby_power=True),),
        "detectors": (a_detector(),),
        "attended": True,
        "most_people": 1,
    }
    return a_room(120, **{**defaults, **fields})


class TestEvents:
    """What published investigations tell of, in general terms (judging 8)."""

    def test_a_lone_worker_with_the_fan_off_and_the_detector_silenced(self):
        """55 L are 38 m3 of 120: below 18 %. Fan and detector were what kept it mild."""
        kept = a_laboratory()
        neglected = replace(
            kept,
            units=(replace(kept.units[0], state="stopped"),),
            detectors=(replace(kept.detectors[0], silenced_since=EARLIER),),
        )
        assert severity(kept, "oxygen/largest-vessel") == "observation"
        assert severity(neglected, "oxygen/largest-vessel") == "major"
        assert standing_of(neglected) in at_least("action")
        assert severity(neglected, "detectors/silenced") == "major"

    def test_either_alone_is_found_too(self):
        kept = a_laboratory()
        off = replace(kept, units=(replace(kept.units[0], state="stopped"),))
        silenced = replace(kept, detectors=(replace(kept.detectors[0], silenced_since=EARLIER),))
        assert severity(off, "oxygen/largest-vessel") == "minor"
        assert severity(silenced, "oxygen/largest-vessel") == "minor"

    def test_the_fan_stopped_by_an_outage_is_off(self):
        kept = a_laboratory()
        outage = Outage(NOW - timedelta(hours=1), NOW + timedelta(hours=1))
        off = replace(kept, units=(replace(kept.units[0], outages=(outage,)),))
        assert severity(off, "oxygen/largest-vessel") == "minor"

    @pytest.mark.parametrize(
        ("weeks", "found"), [(0.0, None), (1 / 168 - 1e-6, None), (1 / 168, "major"), (3, "major")]
    )
    def test_an_alarm_silenced_for_weeks(self, weeks, found):
        """An hour is allowed (common practice, no source)."""
        room = a_laboratory()
        since = NOW - timedelta(weeks=weeks)
        silenced = replace(room, detectors=(replace(room.detectors[0], silenced_since=since),))
        assert severity(silenced, "detectors/silenced") == found

    def test_gas_left_running_into_a_pit(self):
        """Purge gas of 5 m3/h into 20 m3 that nothing airs: no oxygen within four days."""
        room = a_room(20, kind="pit", purge_flow=5 / 3600.0)
        assert severity(room, "oxygen/boil-off") == "critical"
        assert standing_of(room) == "stop"
