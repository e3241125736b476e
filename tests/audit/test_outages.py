"""Planned outages: what stands still by the clock, and when it is looked at again."""

from datetime import timedelta, timezone

import numpy as np
import pytest

from service.audit.columns import moments
from service.audit.inputs import Outage
from service.audit.outages import next_outage_turn, out_now
from tests.audit.builders import NOW, a_detector, a_room, a_unit, a_vessel, assessed

HOUR = timedelta(hours=1)
SECOND = timedelta(seconds=1)
MOMENT = moments([NOW])[0]


def outage(begins, ends):
    return Outage(NOW + begins * HOUR, NOW + ends * HOUR)


def table(*rows):
    """Rows of pairs of hours from now, padded with not-a-time."""
    width = max((len(row) for row in rows), default=0)
    sides = []
    for side in (0, 1):
        padded = [
            [NOW + pair[side] * HOUR for pair in row] + [None] * (width - len(row)) for row in rows
        ]
        flat = moments(moment for row in padded for moment in row)
        sides.append(flat.reshape(len(rows), width))
    return sides


def air_of(room, at=NOW):
    return assessed(room, at=at)[0].ventilation.outdoor_air_m3_h


def turn_of(room, at=NOW):
    return assessed(room, at=at)[0].turns_at


class TestTables:
    """Arrays of (rows, most outages)."""

    def test_an_outage_holds_from_its_beginning_until_just_before_its_end(self):
        begins, ends = table([(0, 1)], [(1, 2)], [(-1, 0)], [], [(-3, -2), (-1, 1)])
        assert out_now(begins, ends, MOMENT).tolist() == [True, False, False, False, True]

    def test_the_turn_is_the_next_beginning_or_end_strictly_later(self):
        begins, ends = table([(0, 1)], [(1, 2), (5, 6)], [(-1, 0)], [], [(-3, -2), (-1, 4)])
        hours = (next_outage_turn(begins, ends, MOMENT) - MOMENT) / np.timedelta64(1, "h")
        np.testing.assert_array_equal(hours, [1, 1, np.nan, np.nan, 4])

    def test_without_any_outage_nothing_is_out_and_nothing_turns(self):
        begins, ends = table([], [])
        assert out_now(begins, ends, MOMENT).tolist() == [False, False]
        assert np.isnat(next_outage_turn(begins, ends, MOMENT)).all()
        assert out_now(*table(), MOMENT).shape == (0,)


class TestUnits:
    """A unit in an outage moves no air."""

    def test_it_turns_when_the_outage_begins_and_again_when_it_ends(self):
        room = a_room(
            vessels=(a_vessel(1),),
            units=(a_unit(measurement_due=None, outages=(outage(2, 5),)),),
        )
        begins, ends = NOW + 2 * HOUR, NOW + 5 * HOUR
        assert turn_of(room) == begins
        assert air_of(room, begins - SECOND) == pytest.approx(600)
        # By nature 0.2 changes an hour of 70 m3 above the ground: common practice, no source.
        assert air_of(room, begins) == pytest.approx(14)
        assert turn_of(room, begins) == ends
        assert air_of(room, ends - SECOND) == pytest.approx(14)
        assert air_of(room, ends) == pytest.approx(600)
        assert turn_of(room, ends) is None

    def test_one_that_stands_still_anyway_turns_nothing(self):
        unit = a_unit(state="stopped", measurement_due=None, outages=(outage(2, 5),))
        assert turn_of(a_room(units=(unit,))) is None

    def test_the_zone_of_an_outage_makes_no_difference(self):
        zone = timezone(timedelta(hours=9))
        there = Outage((NOW + 2 * HOUR).astimezone(zone), (NOW + 5 * HOUR).astimezone(zone))
        room = a_room(units=(a_unit(measurement_due=None, outages=(there,)),))
        assert turn_of(room) == NOW + 2 * HOUR


class TestDetectors:
    """A detector in an outage sees nothing."""

    def test_it_turns_when_the_outage_begins_and_again_when_it_ends(self):
        detector = a_detector(outages=(outage(2, 5),))
        room = a_room(vessels=(a_vessel(20),), detectors=(detector,))
        assert turn_of(room) == NOW + 2 * HOUR
        assert turn_of(room, NOW + 2 * HOUR) == NOW + 5 * HOUR

    @pytest.mark.parametrize("state", ["fault", "off"])
    def test_one_that_sees_nothing_anyway_turns_nothing_by_an_outage(self, state):
        detector = a_detector(state=state, outages=(outage(2, 5),))
        assert turn_of(a_room(detectors=(detector,))) != NOW + 2 * HOUR


def test_a_shut_off_turns_when_its_test_is_overdue():
    due = NOW + 3 * HOUR
    vessel = a_vessel(20, filled_by="automatic", independent_high_level=True, shut_off_test_due=due)
    assert turn_of(a_room(vessels=(vessel,))) == due
    assert turn_of(a_room(vessels=(vessel,)), due) is None
