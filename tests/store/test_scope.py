"""No function of the store reads without being told what may be seen, and none goes beyond it."""

import importlib
import inspect
import pkgutil

import pytest
from sqlalchemy import Connection

import service.store
from service.store import history
from service.store.events import append_events, number_events
from service.store.findings import append_findings
from service.store.installation import ensure_installation
from service.store.keys import Key, add_key
from service.store.scope import EVERYTHING, Scope
from service.store.session import WriteSession
from tests.store.estate import MOMENT, a_record
from tests.store.test_history import append, assessment, event, finding, version

# What is below the queries and given a connection by them, and asked by no one else.
BELOW = {
    "service.store.heads.heads_for_writing",
    "service.store.upsert.insert_missing",
    "service.store.upsert.insert_or_replace",
    # Which form the tables have is no record of any site.
    "service.store.migrate.state_of",
}


#: A second room of the site, behind a door.
BESIDE = "01a4001a-7c00-7ff1-8c10-1dbefab4986d"


def public_functions():
    for module in pkgutil.walk_packages(service.store.__path__, "service.store."):
        loaded = importlib.import_module(module.name)
        for name, function in vars(loaded).items():
            own = inspect.isfunction(function) and function.__module__ == module.name
            if own and not name.startswith("_"):
                yield f"{module.name}.{name}", function


def parameters(function):
    return list(inspect.signature(function, eval_str=True).parameters.values())


FUNCTIONS = dict(public_functions())
READS = {
    name: function
    for name, function in FUNCTIONS.items()
    if name not in BELOW
    and any(parameter.annotation is Connection for parameter in parameters(function))
}
WRITES = {
    name: function
    for name, function in FUNCTIONS.items()
    if any(parameter.annotation is WriteSession for parameter in parameters(function))
}


def test_the_walk_finds_the_store():
    assert set(FUNCTIONS) >= BELOW
    assert len(READS) > 30
    assert len(WRITES) > 12


@pytest.mark.parametrize("name", READS)
def test_what_reads_is_given_a_scope_first(name):
    first, second, *_ = parameters(READS[name])
    assert (first.name, first.annotation) == ("scope", Scope)
    assert (second.name, second.annotation) == ("connection", Connection)


@pytest.mark.parametrize("name", WRITES)
def test_what_writes_is_given_the_session_first(name):
    first = parameters(WRITES[name])[0]
    assert (first.name, first.annotation) == ("session", WriteSession)


@pytest.fixture
def full(database, write, store, estate):
    """A site that has something of everything."""

    def job(session):
        site = estate.site.id
        position = append(session, site, wants=True)
        history.append_versions(session, [version(record, position) for record in estate.records])
        history.append_assessments(
            session, [assessment(estate.room, position, turns_at=MOMENT, method_version="0")]
        )
        append_findings(session, [finding(estate.room, position=position)])
        append_events(session, [event(site, position, 1)])
        number_events(session)
        ensure_installation(session)
        add_key(session, Key("k", "p", "d", "Ada", "reader", frozenset({site}), MOMENT))

    write(job)
    beside = a_record("room", estate.site.id, id=BESIDE)
    filled = a_record(
        "vessel",
        estate.site.id,
        fluid_id=estate.vessel.fields["fluid_id"],
        filling={"supply_line_id": estate.line.id},
    )
    door = a_record("opening", estate.site.id, room_id=estate.room.id, other_room_id=beside.id)
    store(beside, filled, door)
    return estate


# What each read is asked for; every answer of it exists. A read that is not here fails the test
# below, so that a new one is thought of.
def asked_of(estate):
    site, room, vessel = estate.site.id, estate.room.id, estate.vessel.id
    page = {"sort": "id", "descending": False, "after": None, "limit": 100}
    of_room = {"room_id": room}
    return {
        "events.events_after": (0, 10),
        "events.events_at": (site, 1),
        "events.last_feed_no": (),
        "findings.count": ({},),
        "findings.count_history": ("f1",),
        "findings.finding_at": ("f1", 1),
        "findings.finding_history": ("f1",),
        "findings.findings_at": (room, 1),
        "findings.findings_of_rooms": ([room],),
        "findings.get_finding": ("f1",),
        "findings.list_findings": ({},),
        "heads.head_of": (site,),
        "heads.heads_of": (),
        "heads.position_at": (site, MOMENT),
        "heads.wanted_at": (site, 1),
        "history.assessment_at": (room, 1),
        "history.assessment_now": (room,),
        "history.assessments_now": ([room],),
        "history.assessments_of": (room, {"after": 0, "limit": 9}),
        "history.changes_of": (site, {"after": 0, "limit": 9}),
        "history.record_at": ("vessel", vessel, 1),
        "history.records_at": ("vessel", site, 1),
        "history.rooms_behind_wanted": ("1", 10),
        "history.rooms_turning": (MOMENT, 10),
        "history.version_of": ("vessel", vessel, 1),
        "history.versions_of": (site, 1),
        "installation.installation_of": (),
        "keys.get_key": ("k",),
        "keys.key_by_digest": ("d",),
        "keys.list_keys": (),
        "live.controls_of_vessels": ([vessel],),
        "live.count_records": ("vessel", of_room),
        "live.equipment_of": ([room],),
        "live.get_record": ("vessel", vessel),
        "live.get_records": ("vessel", [vessel]),
        "joined.rooms_joined_to": ([room],),
        "live.lines_around": ({"vessel_ids": [vessel], "detector_ids": [estate.detector.id]},),
        "live.list_records": ("vessel", of_room, page),
        "live.record_by_external_id": ("detector", site, "D/1"),
        "live.record_by_tag": ("vessel", site, estate.vessel.fields["tag"]),
        "live.referrers_of": ("room", room),
        "live.rooms_of_site": (site,),
        "live.rooms_with_fluid": (estate.vessel.fields["fluid_id"],),
        "live.sites_with_basis": (estate.site.fields["basis_id"],),
        "live.units_boosted_by": ([estate.detector.id],),
        "live.vessels_filled_by": ([estate.line.id],),
        "polling.room_position": (room,),
        "states.assessments_from": (site, 1),
        "states.findings_from": (site, 1),
        "states.live_findings": (site,),
        "states.room_states": ([room],),
        "summary.finding_counts": ([site],),
        "summary.room_counts": ([site], {"now": MOMENT, "method_version": "0"}),
        "summary.site_states": ([site], {"now": MOMENT}),
        "summary.summary_sites": ([site],),
        "summary.worst_rooms": ([site], 10),
    }


def answer(read, scope, connection, arguments):
    keywords = {}
    # A mapping in the last place, of a function with keywords of its own, is these.
    by_keyword = [p for p in parameters(read) if p.kind is p.KEYWORD_ONLY]
    if by_keyword and set(arguments[-1:] and arguments[-1]) == {p.name for p in by_keyword}:
        *arguments, keywords = arguments
    return read(scope, connection, *arguments, **keywords)


@pytest.mark.slow
def test_no_read_tells_anything_of_another_site(database, full, other_estate):
    asked = asked_of(full)
    assert {f"service.store.{name}" for name in asked} == set(READS)
    nowhere = Scope("key", "reader", frozenset({"a site without anything"}))
    ids = [record.id for record in full.records]
    with database.reading() as connection:
        for name, arguments in asked.items():
            read = READS[f"service.store.{name}"]
            assert answer(read, EVERYTHING, connection, arguments), name
            assert answer(read, full.scope, connection, arguments) or "installation" in name, name
            assert not answer(read, nowhere, connection, arguments), name
            told = repr(answer(read, other_estate.scope, connection, arguments))
            assert not any(record_id in told for record_id in ids), name


def test_lists_hold_the_sites_own_and_what_is_shared(database, shared, full, other_estate):
    page = {"sort": "id", "descending": False, "after": None, "limit": 100}
    list_records = READS["service.store.live.list_records"]
    nothing = Scope("key", "reader", frozenset())
    with database.reading() as connection:
        for kind, own in (("fluid", full.fluid), ("basis", full.basis), ("room", full.room)):
            found = list_records(full.scope, connection, kind, {}, **page)
            common = [record for record in shared.records if record.kind == kind]
            beside = [record for record in found if record.id == BESIDE]
            assert found == sorted([own, *common, *beside], key=lambda record: record.id)
            assert list_records(nothing, connection, kind, {}, **page) == common
