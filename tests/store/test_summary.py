"""The queries of the summary: the finding that decides, and by which index they find it."""

import pytest

from service.audit.findings import Finding
from service.audit.findings import standing as standing_of
from service.store import history
from service.store.findings import append_findings
from service.store.live import insert_record
from service.store.records import canonical
from service.store.scope import EVERYTHING
from service.store.summary import finding_counts, site_states, worst_rooms
from service.store.tables.history import FINDING_STATES, SEVERITIES
from tests.store.estate import MOMENT, a_record
from tests.store.plans import ON_SQLITE, plan_of
from tests.store.test_history import append, assessment, finding, version

STEPS = ("in-order", "attention", "action", "stop")


@pytest.fixture
def judged(write, estate):
    """Give a site whose room has some findings."""

    def with_findings(*rows):
        def job(session):
            position = append(session, estate.site.id)
            history.append_versions(session, [version(estate.room, position)])
            history.append_assessments(session, [assessment(estate.room, position)])
            append_findings(session, [finding(estate.room, **row) for row in rows])

        write(job)
        return estate.site.id

    return with_findings


def standing_by(severity, state):
    """The standing that the audit gives a room with this finding alone."""
    made = dict.fromkeys(Finding.__dataclass_fields__) | {"severity": severity, "state": state}
    return STEPS.index(standing_of([Finding(**made)]))


PAIRS = [
    (severity, state) for severity in SEVERITIES for state in FINDING_STATES if state != "cleared"
]


@pytest.mark.parametrize("first", PAIRS, ids="-".join)
def test_the_finding_told_is_the_one_that_sets_the_standing(database, judged, first):
    rows = [
        {"id": f"f{number}", "severity": severity, "state": state}
        for number, (severity, state) in enumerate(
            [first, ("minor", "open"), ("major", "accepted")]
        )
    ]
    site = judged(*rows, {"id": "a-cleared", "severity": "critical", "state": "cleared"})
    with database.reading() as connection:
        (room,) = worst_rooms(EVERYTHING, connection, [site], 10)
    steps = {row["id"]: standing_by(row["severity"], row["state"]) for row in rows}
    # The oldest of those that take it as far.
    assert room.finding["id"] == max(rows, key=lambda row: steps[row["id"]])["id"]


# Each room as it stands in the list: its standing, its lowest oxygen, its findings.
WORST_FIRST = [
    ("stop", 17.0, [("critical", "open"), ("critical", "acknowledged")]),
    ("stop", 16.0, [("critical", "open"), ("major", "open")]),
    ("stop", 12.0, [("critical", "open"), ("minor", "open"), ("minor", "open")]),
    ("stop", 11.0, [("critical", "open"), ("minor", "open"), ("observation", "open")]),
    ("stop", 11.5, [("critical", "open"), ("minor", "open")] + [("observation", "open")] * 3),
    # What is accepted or cleared counts for nothing here.
    ("stop", 10.0, [("critical", "open"), ("critical", "accepted"), ("major", "cleared")]),
    ("action", 5.0, [("major", "open")] * 4),
    ("attention", 4.0, []),
]


def test_the_worst_rooms_are_ordered_by_standing_then_by_findings_then_by_oxygen(
    database, write, estate
):
    rooms = [a_record("room", estate.site.id) for _ in WORST_FIRST]
    numbers = iter(range(99))

    def job(session):
        position = append(session, estate.site.id)
        for room, (standing, oxygen, found) in reversed(list(zip(rooms, WORST_FIRST, strict=True))):
            insert_record(session, room)
            status = canonical({"standing": standing, "worst_oxygen_pct": oxygen})
            history.append_assessments(session, [assessment(room, position, status=status)])
            rows = [
                finding(room, id=f"w{next(numbers)}", severity=severity, state=state)
                for severity, state in found
            ]
            append_findings(session, rows)

    write(job)
    with database.reading() as connection:
        worst = worst_rooms(EVERYTHING, connection, [estate.site.id], 10)
        fewer = worst_rooms(EVERYTHING, connection, [estate.site.id], 3)
    assert [room.room_id for room in worst] == [room.id for room in rooms]
    assert fewer == worst[:3]


@ON_SQLITE
def test_findings_of_the_worst_rooms_are_counted_by_the_index(database, judged):
    site = judged({})
    with database.reading() as connection:
        plan = plan_of(connection, lambda: worst_rooms(EVERYTHING, connection, [site], 10))
    assert [step for step in plan if "SCAN finding" in step] == []
    assert any("ix_finding_of_site (site_id=? AND state=?" in step for step in plan), plan


@ON_SQLITE
def test_findings_that_are_cleared_are_skipped_by_the_index(database, judged):
    site = judged({})
    with database.reading() as connection:
        plan = plan_of(connection, lambda: finding_counts(EVERYTHING, connection, [site]))
    assert any("ix_finding_of_site (site_id=? AND state=?)" in step for step in plan), plan


@ON_SQLITE
def test_whether_a_summary_has_changed_is_told_without_a_walk_through_the_rooms(database, judged):
    judged({})
    with database.reading() as connection:
        plan = plan_of(connection, lambda: site_states(EVERYTHING, connection, None, now=MOMENT))
    assert [step for step in plan if "SCAN room" in step] == []
    assert any("ix_room_state_turns_at" in step for step in plan), plan
