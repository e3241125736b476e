"""Rules on vessels, beside their two rooms."""

from datetime import timedelta

import pytest

from tests.audit.builders import (
    LITRE,
    NOW,
    PER_DAY,
    a_room,
    assessed,
    judged,
    severity,
    some_ice,
    standing_of,
)
from tests.audit.rule_rooms import with_vessel

SECOND = timedelta(seconds=1)
COUNTED = {"state": "empty", "count_due": NOW + SECOND}


class TestAmounts:
    """Not too full, by any reading."""

    def test_an_overfilled_box_of_ice_is_told_in_kilograms(self):
        found = judged(a_room(vessels=(some_ice(10, contents_mass=11.0),)), "vessels/overfilled")
        assert found.measure == pytest.approx(1.1)
        assert "11.0 kg, 110 % of its capacity of 10 kg" in found.statement
        assert "Draw off 1.00 kg" in found.remedy

    def test_the_more_it_is_overfilled_the_worse(self):
        room = with_vessel(contents_volume=55 * LITRE)
        found = judged(room, "vessels/overfilled")
        assert (found.worse_is, found.measure, found.limit) == ("higher", 1.1, 1.0)

    @pytest.mark.parametrize("fields", [{"state": "withdrawn"}, COUNTED])
    def test_what_is_not_there_is_not_overfilled(self, fields):
        assert judged(with_vessel(contents_volume=0.06, **fields), "vessels/overfilled") is None

    def test_room_to_expand_is_asked_of_liquid_only(self):
        room = with_vessel(kind="cylinder", gross_volume=50 * LITRE, measured_evaporation=None)
        assert judged(room, "vessels/ullage") is None

    def test_what_may_be_filled_in_is_said(self):
        found = judged(with_vessel(100, gross_volume=100 * LITRE), "vessels/ullage")
        assert "at most 95.0 L" in found.remedy


class TestEvaporation:
    """A vacuum that ages."""

    @pytest.mark.parametrize(
        ("times", "found"),
        [(1.25, None), (1.26, "observation"), (2.0, "observation"), (2.01, "minor")],
    )
    def test_twice_its_rating_is_a_nonconformity(self, times, found):
        room = with_vessel(rated_evaporation=PER_DAY, measured_evaporation=times * PER_DAY)
        assert severity(room, "vessels/evaporation-above-rated") == found

    def test_without_a_measurement_nothing_is_said(self):
        room = with_vessel(rated_evaporation=PER_DAY, measured_evaporation=None)
        assert judged(room, "vessels/evaporation-above-rated") is None


class TestWayOut:
    """The gas has a way out."""

    @pytest.mark.parametrize("kind", ["open-dewar", "freezer", "cryostat"])
    def test_a_sealed_neck_stops_the_room(self, kind):
        room = with_vessel(kind=kind, neck_plug="sealed", relief_fitted=None)
        assert severity(room, "vessels/neck-sealed") == "critical"
        assert standing_of(room) == "stop"

    @pytest.mark.parametrize("kind", ["pressurised-dewar", "tank", "magnet"])
    def test_a_vessel_that_holds_pressure_may_be_closed(self, kind):
        room = with_vessel(kind=kind, neck_plug="sealed", filled_by="attended")
        assert judged(room, "vessels/neck-sealed") is None

    def test_a_relief_device_beside_the_neck_lets_the_gas_out(self):
        room = with_vessel(kind="cryostat", neck_plug="sealed", relief_fitted=True)
        assert judged(room, "vessels/neck-sealed") is None

    @pytest.mark.parametrize("kind", ["pressurised-dewar", "tank", "cryostat", "magnet"])
    def test_a_relief_device_removed_is_worse_than_one_nobody_recorded(self, kind):
        removed = with_vessel(kind=kind, relief_fitted=False)
        unknown = with_vessel(kind=kind, relief_fitted=None)
        assert severity(removed, "vessels/relief-missing") == "critical"
        assert severity(unknown, "vessels/relief-missing") == "observation"
        assert "as recorded" in judged(removed, "vessels/relief-missing").statement
        assert "Nobody recorded" in judged(unknown, "vessels/relief-missing").statement

    def test_an_open_dewar_needs_no_relief_device(self):
        room = with_vessel(kind="open-dewar", relief_fitted=False)
        assert judged(room, "vessels/relief-missing") is None

    def test_what_is_counted_as_empty_cannot_burst(self):
        for rule, fields in (
            ("vessels/neck-sealed", {"kind": "freezer", "neck_plug": "sealed"}),
            ("vessels/relief-missing", {"relief_fitted": False}),
        ):
            fields = {"relief_fitted": None, **fields}
            assert judged(with_vessel(**fields, **COUNTED), rule) is None
            assert judged(with_vessel(**fields, state="empty"), rule), "never counted"

    def test_an_inspection_without_an_interval_is_not_overdue(self):
        room = with_vessel(relief_inspected=True, relief_inspection_due=None)
        assert judged(room, "vessels/relief-inspection-overdue") is None


class TestFilling:
    """Filling that stops."""

    def test_a_high_level_that_was_never_tested_is_minor_and_none_at_all_is_major(self):
        fitted = with_vessel(filled_by="automatic", independent_high_level=True)
        none = with_vessel(filled_by="automatic", independent_high_level=False)
        assert severity(fitted, "vessels/shut-off-untested") == "minor"
        assert judged(fitted, "vessels/fill-without-high-level") is None
        assert severity(none, "vessels/fill-without-high-level") == "major"
        assert judged(none, "vessels/shut-off-untested") is None

    @pytest.mark.parametrize("by", ["attended", "exchanged", None])
    def test_a_vessel_that_somebody_fills_needs_none(self, by):
        room = with_vessel(filled_by=by)
        assert judged(room, "vessels/fill-without-high-level") is None
        assert judged(room, "vessels/shut-off-untested") is None

    def test_what_runs_over_is_said_by_its_flow(self):
        recorded = with_vessel(filled_by="automatic", fill_flow=25 * LITRE / 60)
        assert "25.0 L/min" in judged(recorded, "vessels/fill-without-high-level").statement
        # Where none is recorded: common practice, no source.
        usual = judged(with_vessel(filled_by="automatic"), "vessels/fill-without-high-level")
        assert "10.0 L/min" in usual.statement
        assert usual.evidence["flow_recorded"] is False


@pytest.mark.parametrize(
    ("rule", "fields", "due"),
    [
        ("vessels/relief-inspection-overdue", {"relief_inspected": True}, "relief_inspection_due"),
        (
            "vessels/shut-off-untested",
            {"filled_by": "automatic", "independent_high_level": True},
            "shut_off_test_due",
        ),
    ],
)
def test_what_is_tested_falls_due_at_its_moment_and_not_before(rule, fields, due):
    moment = NOW + timedelta(hours=3)
    room = with_vessel(**fields, **{due: moment})
    assert assessed(room)[0].turns_at == moment
    assert judged(room, rule, at=moment - SECOND) is None
    assert judged(room, rule, at=moment) is not None
    assert assessed(room, at=moment)[0].turns_at is None
