"""Rules on ventilation units, beside their two rooms."""

from datetime import timedelta

import pytest

from tests.audit.builders import NOW, PER_HOUR, a_room, a_unit, a_vessel, assessed, judged, severity
from tests.audit.rule_rooms import an_outage, still, with_unit

SECOND = timedelta(seconds=1)


def beyond(*units, litres=20, **fields):
    """A room of 50 m3 that 5.00 L of nitrogen bring to 19.5 % (methods C-5)."""
    return a_room(50, vessels=(still(litres),), units=units, **fields)


class TestFlow:
    """Measured, in date, and proved."""

    def test_a_flow_never_measured_is_overdue(self):
        found = judged(
            with_unit(measured_flow=None, measurement_due=None), "ventilation/flow-overdue"
        )
        assert found.severity == "minor"
        assert found.statement.startswith("No measurement of the flow of F-600")

    @pytest.mark.parametrize("state", ["stopped", "failed"])
    def test_a_unit_that_stands_still_is_not_asked_for_its_flow(self, state):
        room = beyond(a_unit(state=state, measurement_due=None, flow_proved=None))
        assert judged(room, "ventilation/flow-overdue") is None
        assert judged(room, "ventilation/flow-not-proved") is None
        assert severity(room, "ventilation/stopped") == "observation"

    def test_an_empty_room_is_asked_for_nothing(self):
        units = (a_unit(measurement_due=None), a_unit(state="stopped", tag="F-2"))
        withdrawn = a_vessel(20, state="withdrawn")
        for room in (a_room(units=units), a_room(units=units, vessels=(withdrawn,))):
            assert "ventilation" not in {each.family for each in assessed(room)[0].judgements}

    def test_a_measurement_falls_due_at_its_moment_and_not_before(self):
        due = NOW + timedelta(hours=3)
        room = with_unit(measurement_due=due)
        assert assessed(room)[0].turns_at == due
        assert judged(room, "ventilation/flow-overdue", at=due - SECOND) is None
        assert judged(room, "ventilation/flow-overdue", at=due) is not None

    def test_a_flow_needs_no_proof_where_nature_gives_as_much(self):
        """0.2 air changes of 50 m3 are 10 m3/h, what a fan of 30 m3/h counts for: cp."""
        assert judged(beyond(a_unit(29, flow_proved=None)), "ventilation/flow-not-proved") is None
        assert judged(beyond(a_unit(31, flow_proved=None)), "ventilation/flow-not-proved")

    def test_a_flow_said_to_be_unproved_is_no_better_than_one_nobody_speaks_of(self):
        assert judged(beyond(a_unit(flow_proved=False)), "ventilation/flow-not-proved")
        assert judged(beyond(a_unit(flow_proved=True)), "ventilation/flow-not-proved") is None

    def test_a_unit_is_a_finding_of_each_room_that_it_serves(self):
        unit = a_unit(measured_flow=300 * PER_HOUR, share=0.5)
        rooms = [a_room(vessels=(still(1),), units=(unit,), tag=tag) for tag in ("A", "B")]
        found = [
            each
            for assessment in assessed(*rooms)
            for each in assessment.judgements
            if each.rule == "ventilation/below-design"
        ]
        assert [each.subject for each in found] == [unit.record, unit.record]
        assert found[0].measure == 0.5
        assert "180 m3/h or more" in found[0].remedy  # 0.8 of 600 less 300


class TestStopped:
    """What stands still says since when and what is missing; the cases judge what it does."""

    def test_a_planned_outage_is_said_while_it_lasts(self):
        room = with_unit(outages=(an_outage(timedelta(hours=2)),))
        found = judged(room, "ventilation/stopped")
        assert "planned outage" in found.statement
        assert "600 m3/h" in found.statement
        assert "until the outage ends" in found.remedy
        ends = NOW + timedelta(hours=2)
        assert assessed(room)[0].turns_at == ends
        assert judged(room, "ventilation/stopped", at=ends) is None

    def test_a_failed_unit_is_to_be_run(self):
        found = judged(with_unit(state="failed"), "ventilation/stopped")
        assert "recorded as failed" in found.statement
        assert found.remedy.startswith("Run F-600")


class TestNone:
    """No unit at all."""

    def test_a_unit_that_stands_still_is_said_once(self):
        room = beyond(a_unit(state="stopped"))
        assert judged(room, "ventilation/none") is None
        assert judged(room, "ventilation/stopped")

    @pytest.mark.parametrize("kind", ["lift", "vehicle"])
    def test_nobody_airs_a_lift(self, kind):
        assert judged(beyond(kind=kind), "ventilation/none") is None

    def test_what_nature_does_not_do_in_time_is_asked_of_a_fan(self):
        """Methods D4: 20 L take 27.69 % of 50 m3; 3 x 50 m3/h x ln(27.69/6.921) = 207.95."""
        assert "208 m3/h" in judged(beyond(), "ventilation/none").remedy

    def test_what_nature_does_in_time_is_called_an_assumption(self):
        assert "assumption" in judged(beyond(litres=5.02), "ventilation/none").remedy


class TestRestore:
    """Back in time."""

    def test_both_figures_and_what_is_missing_are_said(self):
        """Methods D4: ten litres take 104.0 m3/h, so 44.0 are missing."""
        found = judged(beyond(a_unit(60), litres=10), "ventilation/cannot-restore")
        assert found.worse_is == "lower"
        assert found.measure == pytest.approx(60)
        assert found.limit == pytest.approx(104.0, rel=1e-3)
        assert "44.0 m3/h more" in found.remedy

    def test_a_room_without_fans_is_said_to_have_none_instead(self):
        assert judged(beyond(litres=10), "ventilation/cannot-restore") is None

    def test_a_room_that_is_short_of_air_anyway_is_judged_by_its_cases(self):
        vessel = a_vessel(20, measured_evaporation=1e-5, filled_by="attended")
        room = a_room(50, vessels=(vessel,), units=(a_unit(60),))
        assert severity(room, "oxygen/boil-off") == "critical"
        assert judged(room, "ventilation/cannot-restore") is None


def test_a_unit_without_outdoor_air_is_said_only_where_that_is_recorded():
    assert judged(with_unit(outdoor_air_fraction=None), "ventilation/no-outdoor-air") is None
    found = judged(with_unit(outdoor_air_fraction=0.0), "ventilation/no-outdoor-air")
    assert found.evidence["outdoor_air_fraction"] == 0.0
