"""The air that may be counted."""

from datetime import timedelta

import pytest

from tests.audit.builders import (
    EARLIER,
    PER_HOUR,
    a_basis,
    a_room,
    a_unit,
    assessed,
)


def air_of(*units, volume=100.0, **fields):
    return assessed(a_room(volume, units=units, **fields))[0].ventilation


def moved(*units, **fields):
    return air_of(*units, **fields).outdoor_air_m3_h


def test_a_third_of_what_a_fan_moves_is_counted():
    """ACGIH mixing factor 3 (from memory)."""
    found = air_of(a_unit(600))
    assert found.outdoor_air_m3_h == pytest.approx(600)
    assert found.credited_m3_h == pytest.approx(200)
    assert found.air_changes_per_h == pytest.approx(6)


def test_a_tracer_test_gives_a_unit_its_own_factor():
    assert air_of(a_unit(600, mixing_factor=1.5)).credited_m3_h == pytest.approx(400)


def test_only_outdoor_air_and_only_the_share_of_the_room_count():
    assert moved(a_unit(1000, outdoor_air_fraction=0.25, share=0.5)) == pytest.approx(125)


@pytest.mark.parametrize("state", ["stopped", "failed"])
def test_a_unit_that_does_not_run_counts_for_nothing(state):
    assert moved(a_unit(600, state=state), kind="pit") == 0.0


def test_a_unit_never_measured_counts_for_three_quarters_of_its_design():
    """Common practice, no source."""
    unit = a_unit(600, measured_flow=None, measurement_due=None)
    assert moved(unit) == pytest.approx(450)


@pytest.mark.parametrize(("design", "measured", "counts"), [(600, 500, 500), (400, 500, 400)])
@pytest.mark.parametrize("due", [EARLIER, None])
def test_an_overdue_measurement_counts_as_the_lower_of_design_and_measurement(
    design, measured, counts, due
):
    unit = a_unit(
        measured_flow=measured * PER_HOUR, design_flow=design * PER_HOUR, measurement_due=due
    )
    assert moved(unit) == pytest.approx(counts)


def test_a_measurement_in_date_counts_even_above_the_design():
    assert moved(a_unit(700, design_flow=600 * PER_HOUR)) == pytest.approx(700)


def test_a_unit_without_any_flow_counts_for_nothing():
    assert moved(a_unit(design_flow=None, measured_flow=None), kind="pit") == 0.0


def test_an_exhaust_of_unknown_outdoor_share_counts_and_a_supply_does_not():
    """What is blown in may be the room's own air; common practice, no source."""
    assert moved(a_unit(600, outdoor_air_fraction=None)) == pytest.approx(600)
    for arrangement in ("supply", "balanced", None):
        unit = a_unit(600, outdoor_air_fraction=None, arrangement=arrangement)
        assert moved(unit, kind="pit") == 0.0


def test_supply_and_exhaust_of_one_room_are_not_added():
    """What one blows in the other draws out (methods D0)."""
    units = (
        a_unit(300, tag="S", arrangement="supply"),
        a_unit(500, tag="E", arrangement="exhaust"),
    )
    assert moved(*units) == pytest.approx(500)


def test_natural_air_and_fans_are_never_added():
    """0.2 air changes above the ground, 0.1 below: common practice, no source."""
    assert air_of(a_unit(30)).credited_m3_h == pytest.approx(20)
    assert air_of(a_unit(90)).credited_m3_h == pytest.approx(30)
    assert air_of(below_ground=True).credited_m3_h == pytest.approx(10)
    assert air_of(below_ground=None).credited_m3_h == pytest.approx(10)
    assert air_of(basis=a_basis("uk-eu")).credited_m3_h == pytest.approx(100)


@pytest.mark.parametrize("kind", ["walk-in", "pit", "lift", "vehicle"])
def test_an_enclosed_room_has_no_natural_air(kind):
    assert air_of(kind=kind).credited_m3_h == 0.0


@pytest.mark.parametrize("kind", ["room", "corridor"])
def test_other_rooms_have(kind):
    assert air_of(kind=kind).credited_m3_h == pytest.approx(20)


def test_the_moment_a_measurement_falls_due_its_flow_is_the_lower_one():
    unit = a_unit(500, design_flow=400 * PER_HOUR, measurement_due=EARLIER)
    room = a_room(100, units=(unit,))
    flows = [
        assessed(room, at=EARLIER + timedelta(seconds=late))[0].ventilation.outdoor_air_m3_h
        for late in (-1, 0)
    ]
    assert flows == pytest.approx([500, 400])
