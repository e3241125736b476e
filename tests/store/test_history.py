import json
from dataclasses import replace
from datetime import timedelta

import pytest
import sqlalchemy as sa

from service.store import events, findings, history
from service.store.events import StoredEvent, append_events, events_after, number_events
from service.store.heads import position_at, wanted_at
from service.store.history import ChangeEntry, StoredAssessment, chained
from service.store.live import delete_record, insert_record
from service.store.records import Record, body, canonical
from service.store.scope import EVERYTHING
from service.store.tables.registry import ROOM_STATE
from tests.store.estate import MOMENT, a_record

APPEND_ONLY = ("change", "record_version", "assessment_version", "finding_version", "event")


def append(session, site_id, *, wants=False):
    """Append a change to a site and return its position."""
    head = session.lock_heads([site_id])[site_id]
    entry = canonical({"at": head.position + 1})
    history.append_change(session, ChangeEntry(
        site_id=site_id, position=head.position + 1, recorded_at=session.moment, stated_at=MOMENT,
        key_id="key", request_id="request", operation="change-room", reason="why", wants=wants,
        entry=entry, chain_hash=chained(head.chain_hash, entry)))  # fmt: skip
    return head.position + 1


def version(record, position):
    return (record, record.kind, record.id, record.site_id, record.revision, position)


def assessment(room, position, **changes):
    status = {"standing": "attention", "worst_oxygen_pct": 14.2}
    return StoredAssessment(**{
        "room_id": room.id, "site_id": room.site_id, "from_position": position,
        "assessed_at": MOMENT, "basis_id": "basis", "basis_revision": 3, "method_version": "1",
        "inputs": canonical([room.id, 1]), "results": canonical({"g": [0.1, 0.2]}),
        "status": canonical(status), "turns_at": None, "cause": "change", "failed": False,
    } | changes)  # fmt: skip


def finding(room, **changes):
    return {
        "id": "f1", "site_id": room.site_id, "room_id": room.id, "rule": "oxygen/largest-vessel",
        "family": "oxygen", "subject_kind": "room", "subject_id": room.id, "subject_tag": "B-104",
        "gas": "oxygen", "number": 1, "position": 1, "state": "open", "severity": "major",
        "measure": 14.2, "limit": 18.0, "worse_is": "lower", "statement": "…", "evidence": {"a": 1},
        "remedy": None, "method": "mixing", "source": "EIGA", "opened_at": MOMENT,
        "changed_at": MOMENT, "cleared_at": None, "owner": None, "due_on": None,
        "expires_at": None, "reason": None, "key_id": None,
    } | changes  # fmt: skip


def event(site_id, position, number, event_id=None):
    return StoredEvent(event_id or f"{site_id}-{position}-{number}", site_id, position, number,
                       "rooms/x", "rimeward.room.assessed", b'{"b": 1.00, "a": 2}')  # fmt: skip


@pytest.fixture
def told(write, estate):
    """One row in each of the five tables of the past."""

    def job(session):
        position = append(session, estate.site.id, wants=True)
        history.append_versions(session, [version(estate.room, position)])
        history.append_assessments(session, [assessment(estate.room, position)])
        findings.append_findings(session, [finding(estate.room, position=position)])
        append_events(session, [event(estate.site.id, position, 1)])

    write(job)
    return estate


@pytest.mark.parametrize("table", APPEND_ONLY)
@pytest.mark.parametrize("statement", ["UPDATE {} SET site_id = 'x'", "DELETE FROM {}"])
def test_the_past_can_neither_be_changed_nor_deleted(database, told, table, statement):
    with (
        pytest.raises(sa.exc.DBAPIError, match="append-only"),
        database.writing() as connection,
    ):
        connection.exec_driver_sql(statement.format(table))
    with database.reading() as connection:
        count = connection.exec_driver_sql(f"SELECT count(*) FROM {table}").scalar_one()  # noqa: S608
    assert count == 1


@pytest.mark.parametrize("table", APPEND_ONLY)
def test_the_past_cannot_be_replaced_or_emptied_at_once(database, told, table):
    """INSERT OR REPLACE of SQLite deletes, TRUNCATE of PostgreSQL does not fire row triggers."""
    replacing = f"INSERT OR REPLACE INTO {table} SELECT * FROM {table}"  # noqa: S608
    statement = replacing if database.dialect == "sqlite" else f"TRUNCATE {table}"
    with (
        pytest.raises(sa.exc.DBAPIError, match="append-only"),
        database.writing() as connection,
    ):
        connection.exec_driver_sql(statement)


def test_an_event_gets_its_place_in_the_feed_once_and_nothing_else(database, told):
    def update(assignment):
        with database.writing() as connection:
            return connection.exec_driver_sql(f"UPDATE event SET {assignment}").rowcount  # noqa: S608

    if database.dialect == "postgresql":
        with pytest.raises(sa.exc.DBAPIError, match="append-only"):
            update("feed_no = 1, subject = 'x'")
        assert update("feed_no = 1") == 1
    for assignment in ("feed_no = 2", "feed_no = NULL", "subject = 'x'"):
        with pytest.raises(sa.exc.DBAPIError, match="append-only"):
            update(assignment)


def test_the_feed_numbers_every_event_once_in_order_within_its_site(database, write):
    def job(site_id):
        def append_some(session):
            position = append(session, site_id)
            append_events(session, [event(site_id, position, n) for n in (1, 2)])

        return append_some

    for site_id in ("b", "a", "b"):
        write(job(site_id))
    if database.dialect == "postgresql":
        with database.reading() as connection:
            assert events_after(EVERYTHING, connection, 0, 10) == []
        assert write(lambda s: number_events(s, 4)) == 4
        assert write(number_events) == 2
    assert write(number_events) == 0
    write(job("a"))
    write(number_events)
    with database.reading() as connection:
        feed = events_after(EVERYTHING, connection, 0, 100)
        later = events_after(EVERYTHING, connection, 2, 3)
        assert events.last_feed_no(EVERYTHING, connection) == 8
        assert [e.number for e in events.events_at(EVERYTHING, connection, "b", 2)] == [1, 2]
    assert [e.feed_no for e in feed] == list(range(1, 9))
    assert [e.feed_no for e in later] == [3, 4, 5]
    for site_id in ("a", "b"):
        places = [(e.position, e.number) for e in feed if e.site_id == site_id]
        assert places == [(1, 1), (1, 2), (2, 1), (2, 2)]
    assert feed[0].body == b'{"b": 1.00, "a": 2}'


def test_a_moment_is_the_position_that_held_then(database, write, clock):
    moments = []
    for wants in (False, True, False):
        clock.advance(timedelta(minutes=1))
        moments.append(clock.now())
        write(lambda s, wants=wants: append(s, "site", wants=wants))

    def at(moment):
        with database.reading() as connection:
            return position_at(EVERYTHING, connection, "site", moment)

    tick = timedelta(microseconds=1)
    assert [at(moments[0] - tick), at(moments[0]), at(moments[1] - tick)] == [0, 1, 1]
    assert [at(moments[1]), at(moments[2]), at(moments[2] + timedelta(days=1))] == [2, 3, 3]
    with database.reading() as connection:
        assert [wanted_at(EVERYTHING, connection, "site", p) for p in range(4)] == [0, 0, 2, 2]


def test_a_change_comes_back_as_it_was_appended(database, told):
    with database.reading() as connection:
        (change,) = history.changes_of(EVERYTHING, connection, told.site.id, after=0, limit=5)
        assert history.changes_of(EVERYTHING, connection, told.site.id, after=1, limit=5) == []
    assert change.entry == b'{"at":1}'
    assert change.chain_hash == chained("0" * 64, change.entry)
    assert (change.operation, change.reason, change.wants, change.stated_at) == (
        "change-room", "why", True, MOMENT,
    )  # fmt: skip


def test_records_are_read_as_they_stood(database, write, estate):
    site, room = estate.site.id, estate.room
    second = replace(room, revision=2, fields={**room.fields, "name": "Cold store"})
    other = a_record("room", site)

    def steps(session):
        for versions in (
            [version(room, 1)],
            [version(second, 2), version(other, 2)],
            [(None, "room", room.id, site, 3, 3)],
        ):
            append(session, site)
            history.append_versions(session, versions)

    write(steps)
    with database.reading() as connection:

        def at(position):
            one = history.record_at(EVERYTHING, connection, "room", room.id, position)
            return one, history.records_at(EVERYTHING, connection, "room", site, position)

        assert at(0) == (None, [])
        assert at(1) == (room, [room])
        assert at(2) == (second, sorted([second, other], key=lambda record: record.id))
        assert at(3) == (None, [other])
        assert history.version_of(EVERYTHING, connection, "room", room.id, 1) == room
        assert history.version_of(EVERYTHING, connection, "room", room.id, 3) is None
        assert history.version_of(EVERYTHING, connection, "vessel", room.id, 1) is None
        kept = history.versions_of(EVERYTHING, connection, site, 2)
        (removal,) = history.versions_of(EVERYTHING, connection, site, 3)
    bodies = {each.record_id: each.body for each in kept}
    assert bodies == {record.id: canonical(body(record)) for record in (second, other)}
    assert removal.body is None


def test_what_is_shared_is_read_at_a_position_of_the_installation(database, write, shared):
    def job(session):
        append(session, "installation")
        history.append_versions(session, [version(shared.fluid, 1)])

    write(job)
    with database.reading() as connection:
        assert history.records_at(EVERYTHING, connection, "fluid", None, 1) == [shared.fluid]
        (kept,) = history.versions_of(EVERYTHING, connection, "installation", 1)
    assert json.loads(kept.body)["site_id"] is None


def test_assessments_come_back_to_the_byte_and_as_of_any_position(database, write, estate):
    first = assessment(estate.room, 1)
    second = assessment(estate.room, 3, status=b'{ "standing":"ok","worst_oxygen_pct":20.50}',
                        failed=True, turns_at=MOMENT)  # fmt: skip
    write(lambda s: history.append_assessments(s, [first]))
    write(lambda s: history.append_assessments(s, [second]))
    room = estate.room.id
    with database.reading() as connection:
        found = [history.assessment_at(EVERYTHING, connection, room, p) for p in range(5)]
        assert found == [None, first, first, second, second]
        assert history.assessment_now(EVERYTHING, connection, room) == second
        assert history.assessments_now(EVERYTHING, connection, [room, "none"]) == [second]
        assert history.assessments_of(EVERYTHING, connection, room, after=1, limit=9) == [second]
        state = connection.execute(sa.select(ROOM_STATE)).one()
    assert (state.position, state.standing, state.worst_oxygen_pct, state.failed) == (
        3, "ok", 20.5, True,
    )  # fmt: skip
    write(lambda s: [delete_record(s, record) for record in (
        estate.control, estate.opening, estate.unit, estate.line, estate.vessel, estate.detector,
        estate.room)])  # fmt: skip
    with database.reading() as connection:
        assert history.assessment_now(EVERYTHING, connection, room) is None
        assert history.assessment_at(EVERYTHING, connection, room, 2) == first


def test_rooms_turn_oldest_first(database, write, estate):
    rooms = [a_record("room", estate.site.id) for _ in range(4)]
    due = [MOMENT + timedelta(minutes=m) for m in (3, 1, 2)]

    def job(session):
        for room in rooms:
            insert_record(session, room)
        history.append_assessments(session, [
            assessment(room, 1, turns_at=moment)
            for room, moment in zip(rooms, [*due, None], strict=True)])  # fmt: skip

    write(job)
    with database.reading() as connection:

        def turning(minutes, limit=9):
            moment = MOMENT + timedelta(minutes=minutes)
            return history.rooms_turning(EVERYTHING, connection, moment, limit)

        assert turning(0.5) == []
        assert turning(2) == [rooms[1].id, rooms[2].id]
        assert turning(9, limit=2) == [rooms[1].id, rooms[2].id]


def test_the_sweep_finds_rooms_of_another_method_behind_or_never_judged(database, write, estate):
    rooms = [a_record("room", estate.site.id) for _ in range(3)]

    def job(session):
        for room in rooms:
            insert_record(session, room)
        append(session, estate.site.id)
        history.append_assessments(session, [
            assessment(estate.room, 1), assessment(rooms[0], 1, method_version="0"),
            assessment(rooms[1], 1)])  # fmt: skip

    write(job)

    def behind():
        with database.reading() as connection:
            found = history.rooms_behind_wanted(EVERYTHING, connection, "1", 10)
        assert {site for site, _ in found} == {estate.site.id}
        return {room for _, room in found}

    assert behind() == {rooms[0].id, rooms[2].id}
    write(lambda s: append(s, estate.site.id, wants=True))
    write(lambda s: history.append_assessments(s, [assessment(rooms[1], 2)]))
    assert behind() == {estate.room.id, rooms[0].id, rooms[2].id}


def test_findings_are_read_as_they_are_and_as_they_were(database, write, estate):
    room = estate.room
    first = finding(room)
    cleared = finding(room, number=2, position=2, state="cleared", cleared_at=MOMENT)
    anew = finding(room, id="f2", position=3)
    calibration = anew | {"id": "f3", "gas": None, "family": "detectors", "severity": "minor"}
    write(lambda s: findings.append_findings(s, [first]))
    write(lambda s: findings.append_findings(s, [cleared, anew]))
    write(lambda s: findings.append_findings(s, [calibration]))
    with database.reading() as c:
        assert findings.findings_of_rooms(EVERYTHING, c, [room.id]) == [anew, calibration]
        assert findings.get_finding(EVERYTHING, c, "f1") == cleared
        assert findings.finding_history(EVERYTHING, c, "f1") == [first, cleared]
        for place in (room.id, estate.site.id):
            held = [findings.findings_at(EVERYTHING, c, place, p) for p in range(4)]
            assert held == [[], [first], [cleared], [cleared, anew, calibration]]
        matching = {
            (): 3, ("family", "oxygen"): 2, ("state", "open"): 2, ("state", ("open", "cleared")): 3,
            ("severity", "minor"): 1, ("gas", None): 1, ("label.wing", "B"): 3,
            ("label.wing", "C"): 0, ("older_than", MOMENT): 0, ("room_id", room.id): 3,
            ("older_than", "2027-03-01T09:00:00Z"): 3, ("site_id", "x"): 0,
        }  # fmt: skip
        for filters, count in matching.items():
            asked = dict([filters]) if filters else {}
            assert findings.count(EVERYTHING, c, asked) == count, filters
            assert len(findings.list_findings(EVERYTHING, c, asked)) == count
        page = findings.list_findings(EVERYTHING, c, {}, sort="severity", limit=2)
        after = (page[-1]["severity"], page[-1]["id"])
        rest = findings.list_findings(EVERYTHING, c, {}, sort="severity", after=after)
    assert [found["id"] for found in (*page, *rest)] == ["f1", "f2", "f3"]


def test_a_finding_with_another_column_is_refused(write, estate):
    with pytest.raises(ValueError, match="other columns"):
        write(lambda s: findings.append_findings(s, [finding(estate.room, color="red")]))


def test_findings_outlive_their_room(database, write, told):
    rows = (
        told.control, told.opening, told.unit, told.line, told.vessel, told.detector, told.room,
    )  # fmt: skip
    write(lambda s: [delete_record(s, record) for record in rows])
    with database.reading() as connection:
        assert findings.get_finding(EVERYTHING, connection, "f1")["room_id"] == told.room.id


def test_a_record_is_still_whole_when_it_comes_from_its_version(database, told):
    with database.reading() as connection:
        found = history.record_at(EVERYTHING, connection, "room", told.room.id, 1)
    assert isinstance(found, Record)
    assert canonical(body(found)) == canonical(body(told.room))
