"""Rules on gas that does not mix: what keeps it out of a pit, and what would see it."""

from datetime import timedelta

import pytest

from service.audit.inputs import PitValues
from tests.audit.accident_rooms import with_layer, with_pit
from tests.audit.builders import (
    HELIUM,
    LATER,
    NOW,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    judged,
    severity,
)

SECOND = timedelta(seconds=1)


def in_a_pit(**fields):
    """A room of 6 m3 that is a pit, and 10 L of nitrogen: 6.92 m3 of gas (methods C1)."""
    vessel = a_vessel(10, measured_evaporation=0.0)
    return a_room(6, kind="pit", vessels=(vessel,), **fields)


def at_its_floor(**fields):
    """A unit that draws at the floor."""
    return a_unit(2000, terminal_height="low", **fields)


class TestPits:
    @pytest.mark.parametrize(
        ("entered", "worst"), [(True, "critical"), (None, "critical"), (False, "major")]
    )
    def test_a_pit_that_nobody_says_is_not_entered_is_critical(self, entered, worst):
        room = with_pit(10, pit=PitValues(2.0, 1.5, entered))
        assert severity(room, "layering/pit") == worst

    def test_that_it_is_entered_is_marked_as_assumed(self):
        found = assessed(with_pit(10, pit=PitValues(2.0, 1.5)))[0].assumed
        assert [each.value for each in found if each.field == "pit.entered"] == [True]

    @pytest.mark.parametrize("attended", [None, True, False])
    def test_that_nobody_usually_works_in_a_pit_lowers_nothing(self, attended):
        assert severity(in_a_pit(attended=attended), "layering/pit") == "critical"
        assert severity(in_a_pit(attended=attended, unaccompanied=True), "layering/pit") == "major"

    @pytest.mark.parametrize(
        ("unit", "broken"),
        [
            (at_its_floor(), False),
            (at_its_floor(measurement_due=NOW + SECOND), False),
            (at_its_floor(measurement_due=NOW), True),
            (at_its_floor(state="stopped"), True),
            (at_its_floor(arrangement="supply"), True),
            (a_unit(2000, terminal_height="high"), True),
            (a_unit(2000, terminal_height=None), True),
        ],
    )
    def test_only_extract_at_the_floor_that_runs_and_is_in_date_keeps_gas_out(self, unit, broken):
        found = judged(with_pit(10, units=(unit,)), "layering/pit")
        assert (found is not None) is broken

    @pytest.mark.parametrize(
        ("detector", "broken"),
        [
            (a_detector(height=0.0), False),
            (a_detector(height=0.0, gas="nitrogen"), False),
            (a_detector(height=0.0, gas="methane"), True),
            (a_detector(height=0.3), True),
            (a_detector(height=None), True),
            (a_detector(height=0.0, calibration_due=NOW), True),
            (a_detector(height=0.0, state="fault"), True),
        ],
    )
    def test_only_a_detector_in_the_pit_that_works_and_sees_the_gas_counts(self, detector, broken):
        found = judged(with_pit(10, detectors=(detector,)), "layering/pit")
        assert (found is not None) is broken

    def test_in_a_room_that_is_a_pit_a_low_detector_hangs_in_it(self):
        assert judged(in_a_pit(detectors=(a_detector(height=0.3),)), "layering/pit") is None
        assert judged(in_a_pit(detectors=(a_detector(height=2.0),)), "layering/pit")

    def test_a_pit_in_the_floor_of_a_pit_is_judged_by_itself(self):
        """4.34 L fill 3 m3 (methods F-3), and not the 6 m3 above."""
        vessel = a_vessel(5, measured_evaporation=0.0)
        assert judged(a_room(6, kind="pit", vessels=(vessel,)), "layering/pit") is None
        dug = a_room(6, kind="pit", vessels=(vessel,), pit=PitValues(2.0, 1.5, entered=True))
        assert judged(dug, "layering/pit").evidence["pit_m3"] == 3.0

    def test_gas_that_rises_fills_none(self):
        helium = a_vessel(50, HELIUM, measured_evaporation=0.0)
        assert judged(with_pit(10, vessels=(helium,)), "layering/pit") is None

    def test_it_turns_with_what_keeps_the_gas_out(self):
        room = with_pit(10, units=(at_its_floor(measurement_due=LATER - SECOND),))
        turns = assessed(room)[0].turns_at
        assert turns == LATER - SECOND
        assert judged(room, "layering/pit", at=turns)


@pytest.mark.parametrize(
    ("rule", "room", "height", "gas"),
    [
        ("layering/floor", lambda **fields: with_layer(16, **fields), 0.5, "nitrogen"),
        ("layering/ceiling", lambda **fields: with_layer(35, HELIUM, **fields), 4.8, "helium"),
    ],
)
def test_a_detector_that_sees_the_layer_makes_it_an_observation(rule, room, height, gas):
    def watched(**fields):
        return severity(room(detectors=(a_detector(**fields),)), rule)

    assert severity(room(), rule) == "minor"
    assert watched(height=height) == "observation"
    assert watched(height=height, gas=gas) == "observation"
    assert watched(height=height, gas="methane") == "minor"
    assert watched(height=2.0) == "minor"
    assert "a bound, not a concentration" in judged(room(), rule).statement
