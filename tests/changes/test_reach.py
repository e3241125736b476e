"""Which rooms a change reaches: controls by their vessel, openings on both their sides."""

from functools import partial

import pytest

from service.changes.kinds import rooms_reached
from service.changes.neighbourhood import rooms_alone
from service.changes.records import change_several
from service.changes.requested import RecordChange
from service.changes.room_values import values_of_rooms
from service.errors import FieldsRefused, StillReferred
from service.store.scope import Scope
from service.store.session import WriteContext


@pytest.fixture
def site(line):
    return line.a_site()


def reached(written):
    return {effect.tag for effect in written.effects}


def controls_in(line, room):
    """The tags of the controls that an assessment of a room reads."""

    def job(session):
        around = rooms_alone(session, [room.id])
        (values,) = values_of_rooms(around.records, [room.id])
        return {control.record.tag: control.vessel_id for control in values.controls}

    return line.run(job)


def a_control(line, **fields):
    sort = {"kind": "procedure", "site": "S", "tag": "C"}
    return line.create("control", **{**sort, **fields})


def test_a_control_recalculates_the_room_it_names_and_the_one_it_leaves(line, site):
    first, second = line.a_room(tag="first"), line.a_room(tag="second")
    made = a_control(line, room="first")
    assert reached(made) == {"first"}
    assert reached(line.change(made.record, reference="folder 7")) == {"first"}
    assert reached(line.change(made.record, room="second")) == {"first", "second"}
    assert (controls_in(line, first), controls_in(line, second)) == ({}, {"C": None})
    assert reached(line.remove(made.record)) == {"second"}


def test_a_control_of_a_vessel_recalculates_the_room_where_that_stands(line, site):
    line.a_room(tag="other")
    room = line.a_room(tag="R")
    vessel = line.a_vessel(room)
    made = a_control(line, vessel="V", kind="bund", area_m2=2.0)
    assert reached(made) == {"R"}
    assert made.record.site_id == site.id
    assert controls_in(line, room) == {"C": vessel.id}
    assert reached(line.change(made.record, area_m2=3.0)) == {"R"}
    moved = line.change(made.record, room="other", vessel=None)
    assert reached(moved) == {"R", "other"}
    back = line.change(made.record, room=None, vessel_id=vessel.id)
    assert reached(back) == {"R", "other"}
    assert reached(line.remove(made.record)) == {"R"}


def test_moving_a_vessel_takes_its_controls_along(line, site):
    first, second = line.a_room(tag="first"), line.a_room(tag="second")
    vessel = line.a_vessel(first)
    a_control(line, vessel="V")
    for room, tag in ((second, "second"), (None, None), (first, "first")):
        moved = line.change(vessel, room=tag)
        assert tag is None or tag in reached(moved)
        for each in (first, second):
            expected = {"C": vessel.id} if each is room else {}
            assert controls_in(line, each) == expected, (tag, each.fields["tag"])


def test_a_vessel_that_comes_indoors_is_judged_with_its_controls(line, site, monkeypatch):
    """In the same transaction, not only when it is next loaded."""
    room = line.a_room()
    vessel = line.create(
        "vessel", site="S", tag="V", fluid="nitrogen", kind="tank", capacity_l=50.0
    ).record
    assert reached(a_control(line, vessel="V")) == set()
    seen = []

    def watched(records, room_ids):
        values = values_of_rooms(records, room_ids)
        seen.extend(control.record.tag for each in values for control in each.controls)
        return values

    monkeypatch.setattr("service.changes.assess.values_of_rooms", watched)
    line.change(vessel, room_id=room.id)
    assert seen == ["C"]


def test_a_room_a_vessel_and_its_control_are_made_at_once(line, site):
    changes = [
        RecordChange("create", kind, None, {"site": "S", "tag": tag, **fields})
        for kind, tag, fields in (
            ("room", "R", {"volume_m3": 80.0}),
            ("vessel", "V", {"room": "R", "fluid": "argon", "kind": "tank", "capacity_l": 9.0}),
            ("control", "C", {"vessel": "V", "kind": "training"}),
            ("opening", "O", {"room": "R", "kind": "window"}),
        )
    ]
    together = line.run(partial(change_several, changes=changes))
    assert reached(together) == {"R"}
    room, vessel, control, opening = (item.record for item in together.items)
    assert controls_in(line, room) == {"C": vessel.id}
    with pytest.raises(StillReferred, match="control C"):
        line.remove(vessel)
    gone = [RecordChange("remove", each.kind, each.id, {}) for each in (vessel, control)]
    assert reached(line.run(partial(change_several, changes=gone))) == {"R"}
    with pytest.raises(StillReferred, match="opening O"):
        line.remove(room)
    line.remove(opening)
    assert line.remove(room).removed


def test_an_opening_recalculates_both_its_rooms_and_keeps_them(line, site):
    first, second = line.a_room(tag="first"), line.a_room(tag="second")
    made = line.create(
        "opening", tag="O", room_id=first.id, other_room="second", kind="door", net_flow_m3_h=-30.0
    )
    assert made.record.site_id == site.id
    assert reached(made) == {"first", "second"}
    assert reached(line.change(made.record, normally_open=True)) == {"first", "second"}
    for room in (first, second):
        with pytest.raises(StillReferred, match="opening O"):
            line.remove(room)
    assert reached(line.remove(made.record)) == {"first", "second"}
    assert line.remove(second).removed


def test_openings_and_controls_never_reach_another_site(line, site):
    other = line.a_site("T")
    own, far = line.a_room("S", tag="own"), line.a_room("T", tag="far")
    vessel = line.a_vessel(far, tag="far-vessel")
    limited = WriteContext("k", Scope("k", "recorder", frozenset({site.id})))
    for kind, fields in (
        ("opening", {"room_id": own.id, "other_room_id": far.id, "kind": "door"}),
        ("opening", {"room_id": own.id, "other_room": "far", "kind": "door"}),
        ("control", {"vessel_id": vessel.id, "kind": "access", "site": "S"}),
        ("control", {"vessel": "far-vessel", "kind": "access", "site": "S"}),
    ):
        with pytest.raises(FieldsRefused):
            line.create(kind, tag="X", **fields)
    with pytest.raises(FieldsRefused):
        line.create("control", limited, tag="X", vessel_id=vessel.id, kind="access")
    made = line.create("control", tag="X", vessel_id=vessel.id, kind="access").record
    assert made.site_id == other.id


def test_a_control_whose_vessel_is_not_loaded_reaches_no_room(line, site):
    room = line.a_room()
    vessel = line.a_vessel(room)
    control = a_control(line, vessel="V").record
    assert rooms_reached(control, {vessel.id: vessel}) == {room.id}
    assert rooms_reached(control, {}) == frozenset()


def test_a_fluid_and_the_vessel_of_it_are_made_and_go_at_once(line, site):
    """What is referred to is written before what refers to it, and taken away after it."""
    room = line.a_room()
    mixture = {
        "molar_mass_g_mol": 30.0, "boiling_k": 80.0, "condensed_density_kg_m3": 900.0,
        "oxygen_fraction": 0.0, "solid": False, "hazards": ["asphyxiant"], "settles": "low",
    }  # fmt: skip
    basis = {"site": "S", "tag": "own", "derived_from": "us"}
    changes = [
        RecordChange("create", "fluid", None, {"site": "S", "tag": "mix", **mixture}),
        RecordChange("create", "vessel", None, {"room": "R", "site": "S", "tag": "V",
                     "fluid": "mix", "kind": "tank", "capacity_l": 9.0}),
        RecordChange("create", "basis", None, basis),
        RecordChange("change", "site", site.id, {"basis": "own"}),
    ]  # fmt: skip
    made = line.run(partial(change_several, changes=changes))
    fluid, vessel, own, _ = (item.record for item in made.items)
    assert "R" in reached(made)
    line.change(made.items[3].record, basis="baseline")
    gone = [RecordChange("remove", each.kind, each.id, {})
            for each in (own, fluid, room, vessel, site)]  # fmt: skip
    removed = line.run(partial(change_several, changes=gone))
    assert [item.removed for item in removed.items] == [True] * 5
