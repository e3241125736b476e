"""Changes carried out on both databases: what they leave, and what they refuse."""

import json
from functools import partial

import pytest

from service.changes.demo import load_demo, remove_demo
from service.changes.records import change_several, put_record
from service.changes.requested import RecordChange
from service.changes.verify import verify
from service.errors import (
    DuplicateTag,
    FieldsRefused,
    NotAllowed,
    ReadOnlyRecord,
    RecordNotFound,
    RevisionMoved,
    StillReferred,
)
from service.store.findings import list_findings
from service.store.heads import INSTALLATION, head_of
from service.store.history import assessment_now, changes_of
from service.store.live import count_records, list_records, record_by_tag
from service.store.scope import Scope
from service.store.session import WriteContext
from service.store.tables.registry import KINDS


def test_moving_a_vessel_recalculates_both_rooms(line):
    line.a_site()
    small, large = line.a_room(tag="small", volume_m3=40.0), line.a_room(tag="large", volume_m3=4e3)
    vessel = line.a_vessel(small)
    written = line.change(vessel, room="large")
    assert {effect.tag for effect in written.effects} == {"small", "large"}
    before, after = (next(e for e in written.effects if e.tag == tag) for tag in ("small", "large"))
    assert (before.worst_oxygen_after, before.standing_after) == (None, "in-order")
    assert before.worst_oxygen_before < after.worst_oxygen_after
    cleared = {finding["rule"] for finding in before.cleared}
    assert {"oxygen/largest-vessel", "detectors/missing"} <= cleared
    for room in (small, large):
        assert line.read(assessment_now, room.id).from_position == written.position


def test_a_change_of_nothing_leaves_no_row(line):
    site = line.a_site()
    vessel = line.a_vessel(line.a_room())
    before = line.read(head_of, site.id)
    written = line.change(vessel, capacity_l=30.0, room="R")
    assert not written.changed
    assert written.record.revision == 1
    assert line.read(head_of, site.id) == before


def test_an_entry_names_each_field_that_moved_and_withholds_names_of_people(line):
    site = line.a_site()
    room = line.a_room(contact="Ann Example")
    line.change(room, volume_m3=80.0, contact="Bo Example")
    entry = line.read(changes_of, site.id, after=0, limit=10)[-1]
    told = json.loads(entry.entry)["records"][0]
    assert told["fields"]["volume_m3"] == [90.0, 80.0]
    assert told["fields"]["contact"] == ["withheld", "withheld"]
    assert b"Example" not in entry.entry


@pytest.mark.parametrize(
    ("fields", "pointer"),
    [
        ({"contents_l": 36.1}, "/contents_l"),
        ({"contents_kg": 3.0}, "/contents_kg"),
        ({"room": "elsewhere"}, "/room"),
        ({"room_id": "01900000-0000-7000-8000-000000000000"}, "/room_id"),
        ({"fluid": "phlogiston"}, "/fluid"),
        ({"capacity_l": None}, "/capacity_l"),
        ({"kind": "dry-ice-box"}, "/capacity_kg"),
        ({"capacity_kg": 3.0}, "/capacity_l"),
        ({"colour": "blue"}, "/colour"),
    ],
)
def test_what_cannot_be_is_refused_by_its_field_and_stores_nothing(line, fields, pointer):
    site = line.a_site()
    vessel = line.a_vessel(line.a_room())
    before = line.read(head_of, site.id)
    with pytest.raises(FieldsRefused) as refused:
        line.change(vessel, **fields)
    assert pointer in [bad.pointer for bad in refused.value.errors]
    assert line.read(head_of, site.id) == before


def test_contents_of_a_fifth_above_the_capacity_are_taken(line):
    line.a_site()
    vessel = line.a_vessel(line.a_room())
    assert line.change(vessel, contents_l=36.0).record.fields["contents_l"] == 36.0


def test_a_reference_never_reaches_another_site(line):
    line.a_site("S")
    line.a_site("T")
    vessel = line.a_vessel(line.a_room("S"))
    foreign = line.a_room("T", tag="far")
    for fields in ({"room_id": foreign.id}, {"room": "far"}):
        with pytest.raises(FieldsRefused):
            line.change(vessel, **fields)
    with pytest.raises(FieldsRefused, match="site"):
        line.create(
            "ventilation-unit", site="S", tag="U", serves=[{"room_id": foreign.id, "share": 1.0}]
        )


def test_a_volume_follows_from_floor_and_height_until_it_is_given(line):
    line.a_site()
    room = line.create("room", site="S", tag="R", floor_area_m2=20.0, height_m=2.5).record
    assert (room.fields["volume_m3"], room.fields["volume_derived"]) == (50.0, True)
    room = line.change(room, height_m=3.0).record
    assert room.fields["volume_m3"] == 60.0
    room = line.change(room, volume_m3=55.0).record
    room = line.change(room, height_m=2.0).record
    assert (room.fields["volume_m3"], room.fields["volume_derived"]) == (55.0, False)
    with pytest.raises(FieldsRefused):
        line.change(room, volume_m3=None, floor_area_m2=None)


def test_tags_are_one_in_upper_and_lower_case_within_a_site(line):
    line.a_site("S")
    line.a_site("T")
    line.a_room("S", tag="B-104")
    with pytest.raises(DuplicateTag):
        line.a_room("S", tag="b-104")
    assert line.a_room("T", tag="b-104").fields["tag"] == "b-104"
    with pytest.raises(DuplicateTag):
        line.create("fluid", site="S", tag="Nitrogen", **_mixture())


def test_a_record_that_others_name_cannot_go_before_them(line):
    line.a_site()
    room = line.a_room()
    vessel = line.a_vessel(room)
    with pytest.raises(StillReferred, match="vessel V"):
        line.remove(room)
    line.remove(vessel)
    assert line.remove(room).removed


def test_a_room_that_goes_leaves_its_findings_cleared(line):
    site = line.a_site()
    room = line.a_room(volume_m3=20.0)
    vessel = line.a_vessel(room)
    gone = [RecordChange("remove", kind, one.id, {}) for kind, one in
            (("room", room), ("vessel", vessel))]  # fmt: skip
    line.run(partial(change_several, changes=gone))
    assert line.read(count_records, "room", {"site_id": site.id}) == 0
    states = {row["state"] for row in line.read(list_findings, {"site_id": site.id})}
    assert states == {"cleared"}
    assert verify(line.database).sound


def test_several_changes_are_made_together_or_not_at_all(line):
    site = line.a_site()
    before = line.read(head_of, site.id)
    changes = [
        RecordChange("create", "room", None, {"site": "S", "tag": "R", "volume_m3": 90.0}),
        RecordChange(
            "create",
            "vessel",
            None,
            {"site": "S", "tag": "V", "room": "R", "fluid": "argon", "kind": "tank",
             "capacity_l": 9.0, "contents_l": 99.0},
        ),
    ]  # fmt: skip
    with pytest.raises(FieldsRefused) as refused:
        line.run(partial(change_several, changes=changes))
    assert [bad.pointer for bad in refused.value.errors] == ["/changes/1/fields/contents_l"]
    assert line.read(head_of, site.id) == before
    right = {**changes[1].fields, "contents_l": 9.0}
    together = line.run(
        partial(change_several, changes=[changes[0], RecordChange("create", "vessel", None, right)])
    )
    assert together.positions == {site.id: before.position + 1}
    assert [effect.tag for effect in together.effects] == ["R"]


def test_a_change_for_a_revision_that_is_gone_is_refused(line):
    line.a_site()
    room = line.a_room()
    line.change(room, volume_m3=80.0)
    change = RecordChange("change", "room", room.id, {"volume_m3": 70.0}, if_revision=1)
    with pytest.raises(RevisionMoved):
        line.run(partial(change_several, changes=[change]))


def test_an_external_id_creates_once_and_changes_after(line):
    line.a_site()
    fields = {"site": "S", "tag": "R", "volume_m3": 90.0}
    put = partial(put_record, kind="room", external_id="erp/17")
    assert line.run(partial(put, fields=fields)).created
    again = line.run(partial(put, fields={**fields, "volume_m3": 80.0}))
    assert (again.created, again.changed, again.record.revision) == (False, True, 2)
    assert not line.run(partial(put, fields={**fields, "volume_m3": 80.0})).changed


def test_what_comes_with_the_service_is_read_only(line):
    shipped = line.read(record_by_tag, "basis", None, "baseline")
    with pytest.raises(ReadOnlyRecord):
        line.change(shipped, values={"mixing_factor": 1.0})
    assert line.read(head_of, INSTALLATION).position == 1


def test_a_basis_of_a_site_gives_values_with_sources_and_moves_its_rooms(line):
    site = line.a_site()
    line.a_vessel(line.a_room(volume_m3=120.0))
    own = line.create("basis", site="S", tag="own", derived_from="us", values={}).record
    with pytest.raises(FieldsRefused) as refused:
        line.change(own, values={"mixing_factor": 0.5})
    assert {bad.pointer for bad in refused.value.errors} == {
        "/values/mixing_factor",
        "/sources/mixing_factor",
    }
    line.change(site, basis="own")
    source = {"oxygen_deficient_pct": "agreed by the safety committee"}
    written = line.change(own, values={"oxygen_deficient_pct": 20.5}, sources=source)
    assert [effect.tag for effect in written.effects] == ["R"]
    assert written.effects[0].changed or written.effects[0].opened
    with pytest.raises(FieldsRefused):
        line.change(own, tag="other")


def test_a_change_of_too_many_rooms_is_left_to_the_sweep(line, database, clock, memory):
    site = line.a_site()
    for number in range(3):
        line.a_room(tag=f"R-{number}")
    line.writer._rooms_per_change = 2
    written = line.change(site, elevation_m=900.0)
    assert written.recalculating
    assert written.effects == ()
    head = line.read(head_of, site.id)
    assert head.wanted_position == head.position == written.position


def test_a_key_limited_to_sites_reaches_no_other(line):
    line.a_site("S")
    other = line.a_site("T")
    room = line.a_room("S")
    limited = WriteContext("k", Scope("k", "recorder", frozenset({other.id})))
    with pytest.raises(RecordNotFound):
        line.change(room, limited, volume_m3=10.0)
    with pytest.raises(FieldsRefused, match="site"):
        line.create("room", limited, site="S", tag="X", volume_m3=10.0)
    with pytest.raises(NotAllowed):
        line.create("site", limited, tag="U")
    # Its only site need not be said.
    made = line.create("room", limited, tag="X", volume_m3=10.0)
    assert made.site_id == other.id


@pytest.mark.slow
def test_the_demo_estate_goes_without_a_trace(line):
    assert line.run(load_demo) > 20
    sites = line.read(list_records, "site", {}, sort="tag", descending=False, after=None, limit=10)
    assert {site.fields["demo"] for site in sites} == {True}
    assert line.read(count_records, "room", {}) > 0
    line.run(remove_demo)
    for kind in KINDS:
        own = [{"site_id": site.id} for site in sites]
        assert [line.read(count_records, kind, filters) for filters in own] == [0] * len(sites)
    assert verify(line.database).sound


def _mixture():
    return {
        "molar_mass_g_mol": 30.0,
        "boiling_k": 80.0,
        "condensed_density_kg_m3": 900.0,
        "oxygen_fraction": 0.0,
        "solid": False,
        "hazards": ["asphyxiant"],
        "settles": "low",
        "sources": {"properties": "made up for a test"},
    }
