"""Findings over time: opened, changed, cleared, returned, accepted, lapsed."""

from dataclasses import replace
from datetime import timedelta
from itertools import count

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.audit.assessment import SEVERITIES, Judgement
from service.audit.findings import Finding, counts, reconcile, standing
from tests.audit.builders import NOW, a_reference, a_room

DAY = timedelta(days=1)
ROOM = a_room()


def a_judgement(**fields):
    defaults = {
        "rule": "oxygen/largest-vessel",
        "family": "oxygen",
        "subject": ROOM.record,
        "gas": "oxygen",
        "severity": "major",
        "measure": 14.0,
        "limit": 19.5,
        "worse_is": "lower",
        "statement": "Oxygen would fall to 14 %.",
        "evidence": {"oxygen_pct": 14.0, "cases": [{"mark": 2}]},
        "remedy": "Less.",
        "method": "mixing/displacement",
        "source": "common practice, no source",
    }
    return Judgement(**{**defaults, **fields})


class History:
    """The findings of a room, step by step."""

    def __init__(self):
        self.versions: list[Finding] = []
        self.position = 0
        self._ids = (f"finding-{number}" for number in count(1))

    @property
    def newest(self):
        return list({each.id: each for each in self.versions}.values())

    @property
    def only(self):
        (finding,) = self.newest
        return finding

    def look(self, *judgements, at=NOW):
        self.position += 1
        news = reconcile(
            self.newest,
            judgements,
            room=ROOM,
            at=at,
            position=self.position,
            reopen_days=30,
            new_id=lambda: next(self._ids),
        )
        self.versions += news
        return news

    def people_say(self, **fields):
        """What a route would write: a new version by a person."""
        self.versions.append(replace(self.only, number=self.only.number + 1, **fields))


def accepted(measure=14.0, **fields):
    """A history whose one finding is accepted for ninety days."""
    history = History()
    history.look(a_judgement(measure=measure, **fields))
    history.people_say(state="accepted", expires_at=NOW + 90 * DAY, reason="A study is under way.")
    return history


def test_what_is_new_is_opened():
    (finding,) = History().look(a_judgement())
    assert (finding.id, finding.number, finding.position) == ("finding-1", 1, 1)
    assert (finding.state, finding.opened_at, finding.changed_at) == ("open", NOW, NOW)
    assert finding.room_id == ROOM.record.id
    assert finding.site_id == ROOM.site.id
    assert (finding.subject_kind, finding.subject_id, finding.subject_tag) == (
        "room",
        ROOM.record.id,
        ROOM.record.tag,
    )


def test_nothing_new_makes_no_version():
    history = History()
    history.look(a_judgement())
    assert history.look(a_judgement(), at=NOW + DAY) == ()


def test_figures_that_agree_to_a_part_in_a_thousand_million_are_the_same():
    history = History()
    history.look(a_judgement())
    near = a_judgement(
        measure=14.0 * (1 + 5e-10),
        evidence={"oxygen_pct": 14.0 * (1 - 5e-10), "cases": [{"mark": 2}]},
    )
    assert history.look(near) == ()


@pytest.mark.parametrize(
    "change",
    [
        {"severity": "critical"},
        {"measure": 14.0 * (1 + 2e-9)},
        {"measure": None},
        {"statement": "Other."},
        {"evidence": {"oxygen_pct": 14.0, "cases": [{"mark": 3}]}},
        {"evidence": {"oxygen_pct": 14.0, "cases": []}},
        {"evidence": {"oxygen_pct": 14.0}},
    ],
)
def test_what_is_judged_differently_is_the_next_version(change):
    history = History()
    (before,) = history.look(a_judgement())
    (after,) = history.look(a_judgement(**change), at=NOW + DAY)
    assert (after.id, after.number) == (before.id, 2)
    assert (after.opened_at, after.changed_at) == (NOW, NOW + DAY)


@pytest.mark.parametrize(
    "other", [{"gas": None}, {"rule": "oxygen/boil-off"}, {"subject": a_reference("vessel", "V")}]
)
def test_another_rule_subject_or_gas_is_another_finding(other):
    history = History()
    assert len(history.look(a_judgement(), a_judgement(**other))) == 2


def test_a_renamed_or_revised_subject_keeps_its_finding():
    history = History()
    history.look(a_judgement())
    (after,) = history.look(a_judgement(subject=replace(ROOM.record, tag="B-105", revision=2)))
    assert (after.id, after.subject_tag) == ("finding-1", "B-105")


def test_what_no_longer_holds_is_cleared_once():
    history = History()
    history.look(a_judgement())
    (cleared,) = history.look(at=NOW + DAY)
    assert (cleared.state, cleared.cleared_at, cleared.number) == ("cleared", NOW + DAY, 2)
    assert history.look(at=NOW + 2 * DAY) == ()


@pytest.mark.parametrize(("days", "same"), [(30, True), (31, False)])
def test_back_within_thirty_days_it_is_the_same_finding(days, same):
    history = History()
    history.look(a_judgement())
    history.look()
    (again,) = history.look(a_judgement(), at=NOW + days * DAY)
    assert (again.id == "finding-1") is same
    assert (again.state, again.cleared_at) == ("open", None)
    assert again.number == (3 if same else 1)


def test_of_two_that_were_cleared_the_later_returns():
    history = History()
    history.look(a_judgement())
    history.look()
    history.look(a_judgement(), at=NOW + 40 * DAY)
    history.look(at=NOW + 41 * DAY)
    (again,) = history.look(a_judgement(), at=NOW + 42 * DAY)
    assert again.id == "finding-2"


def test_an_acknowledged_finding_stays_acknowledged_while_it_changes():
    history = History()
    history.look(a_judgement())
    history.people_say(state="acknowledged", owner="E. Hansen", due_on="2027-04-01")
    (after,) = history.look(a_judgement(severity="critical"))
    assert (after.state, after.owner, after.due_on) == ("acknowledged", "E. Hansen", "2027-04-01")


def test_an_acknowledgement_ends_with_the_clearing():
    history = History()
    history.look(a_judgement())
    history.people_say(state="acknowledged", owner="E. Hansen", due_on="2027-04-01")
    history.look()
    (again,) = history.look(a_judgement())
    assert again.state == "open"


class TestAcceptance:
    """It covers what was accepted, no more, and until it lapses."""

    def test_it_holds_while_nothing_worsens(self):
        history = accepted()
        assert history.look(a_judgement(), at=NOW + DAY) == ()
        (after,) = history.look(a_judgement(measure=15.0), at=NOW + DAY)
        assert after.state == "accepted"

    @pytest.mark.parametrize(("worse_is", "measure"), [("lower", 13.9), ("higher", 14.1)])
    def test_it_opens_again_when_the_measure_worsens(self, worse_is, measure):
        history = accepted(worse_is=worse_is)
        (after,) = history.look(a_judgement(worse_is=worse_is, measure=measure))
        assert (after.state, after.reason, after.expires_at) == ("open", None, None)

    def test_it_opens_again_when_the_severity_rises(self):
        (after,) = accepted().look(a_judgement(severity="critical"))
        assert after.state == "open"

    def test_it_covers_what_was_accepted_and_not_what_has_improved_since(self):
        history = accepted(measure=14.0)
        history.look(a_judgement(measure=16.0))
        (back,) = history.look(a_judgement(measure=14.5))
        assert back.state == "accepted"
        (beyond,) = history.look(a_judgement(measure=13.9))
        assert beyond.state == "open"

    def test_it_covers_the_severity_that_was_accepted(self):
        history = accepted(severity="major")
        history.look(a_judgement(severity="minor"))
        (back,) = history.look(a_judgement(severity="major"))
        assert back.state == "accepted"

    @pytest.mark.parametrize(("late", "state"), [(-1, None), (0, "open")])
    def test_it_lapses_at_its_moment(self, late, state):
        news = accepted().look(a_judgement(), at=NOW + 90 * DAY + timedelta(seconds=late))
        assert [each.state for each in news] == ([state] if state else [])

    def test_it_outlives_a_clearing(self):
        history = accepted()
        history.look(at=NOW + DAY)
        (back,) = history.look(a_judgement(), at=NOW + 2 * DAY)
        assert (back.id, back.state, back.reason) == (
            "finding-1",
            "accepted",
            "A study is under way.",
        )

    def test_after_a_clearing_it_does_not_cover_worse(self):
        history = accepted()
        history.look(a_judgement(measure=16.0), at=NOW + DAY)
        history.look(at=NOW + DAY)
        (back,) = history.look(a_judgement(measure=13.0), at=NOW + 2 * DAY)
        assert back.state == "open"
        assert back.expires_at is None

    def test_once_open_again_it_is_gone(self):
        history = accepted()
        history.look(a_judgement(measure=13.0))
        (after,) = history.look(a_judgement(measure=14.0))
        assert after.state == "open"

    def test_a_finding_without_a_measure_is_covered_by_its_severity(self):
        history = accepted(measure=None)
        assert history.look(a_judgement(measure=None), at=NOW + DAY) == ()
        (after,) = history.look(a_judgement(measure=1.0))
        assert after.state == "open"


def a_finding(severity, state):
    history = History()
    (finding,) = history.look(a_judgement(severity=severity))
    return replace(finding, state=state)


@pytest.mark.parametrize(
    ("severity", "now", "when_accepted"),
    [
        ("observation", "in-order", "in-order"),
        ("minor", "attention", "in-order"),
        ("major", "action", "attention"),
        ("critical", "stop", "action"),
    ],
)
def test_the_standing_is_that_of_the_worst_finding(severity, now, when_accepted):
    """Common practice, no source."""
    assert standing([a_finding(severity, "open")], False) == now
    assert standing([a_finding(severity, "acknowledged")], False) == now
    assert standing([a_finding(severity, "accepted")], False) == when_accepted
    assert standing([a_finding(severity, "cleared")], False) == "in-order"


def test_a_room_that_cannot_be_computed_is_at_least_in_need_of_action():
    assert standing([], True) == "action"
    assert standing([a_finding("critical", "open")], True) == "stop"


def test_findings_are_counted_as_the_status_shows_them():
    findings = [
        a_finding("critical", "open"),
        a_finding("major", "acknowledged"),
        a_finding("minor", "accepted"),
        a_finding("minor", "cleared"),
        a_finding("observation", "open"),
    ]
    assert counts(findings) == {
        "critical": 1,
        "major": 1,
        "minor": 0,
        "observation": 1,
        "accepted": {"critical": 0, "major": 0, "minor": 1},
    }


judgements = st.lists(
    st.builds(
        a_judgement,
        rule=st.sampled_from(["oxygen/largest-vessel", "oxygen/boil-off", "detectors/missing"]),
        severity=st.sampled_from(SEVERITIES),
        measure=st.none() | st.floats(0, 21),
    ),
    unique_by=lambda judgement: judgement.rule,
    max_size=3,
)


@given(st.lists(st.tuples(judgements, st.integers(0, 20)), max_size=8))
def test_whatever_happens_what_stands_is_what_is_judged(steps):
    history, at = History(), NOW
    for found, days in steps:
        at += days * DAY
        news = history.look(*found, at=at)
        assert len({each.id for each in news}) == len(news)
        assert all(each.position == history.position for each in news)
        assert history.look(*found, at=at) == ()
        standing_now = {each.rule: each for each in history.newest if each.state != "cleared"}
        assert standing_now.keys() == {each.rule for each in found}
        assert all(standing_now[each.rule].severity == each.severity for each in found)


@given(st.lists(st.tuples(judgements, st.integers(0, 20)), max_size=8))
def test_the_versions_of_a_finding_are_numbered_without_a_gap(steps):
    history, at = History(), NOW
    for found, days in steps:
        at += days * DAY
        history.look(*found, at=at)
    for finding in history.newest:
        numbers = [each.number for each in history.versions if each.id == finding.id]
        assert numbers == list(range(1, len(numbers) + 1))
