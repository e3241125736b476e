"""A change is felt as far as gas goes: the rooms of its networks, in the same transaction."""

import pytest

from service.changes.verify import verify
from service.errors import FieldsRefused, StillReferred
from service.store.live import record_by_tag


@pytest.fixture
def site(line):
    return line.a_site()


def tags(written):
    return {effect.tag for effect in written.effects}


def find(line, site, kind, tag):
    return line.read(record_by_tag, kind, site.id, tag)


def chain(line, count, **door):
    """Rooms in a row, with an open door between each and the next."""
    rooms = [
        line.a_room(tag=f"R{place}", floor_area_m2=20.0, height_m=2.5) for place in range(count)
    ]
    for place in range(count - 1):
        line.create(
            "opening",
            tag=f"O{place}",
            site="S",
            room=f"R{place}",
            other_room=f"R{place + 1}",
            kind="door",
            width_m=0.9,
            height_m=2.1,
            **{"normally_open": True, **door},
        )
    return rooms


def a_dewar(line, room, **fields):
    sort = {
        "capacity_l": 240.0, "kind": "pressurised-dewar", "tag": "V", "fluid": "nitrogen",
        "site": "S",
    }  # fmt: skip
    return line.create("vessel", room=room, **{**sort, **fields})


def opened(written, tag):
    return {
        finding["rule"]
        for effect in written.effects
        if effect.tag == tag
        for finding in effect.opened
    }


def test_a_vessel_is_felt_in_the_rooms_its_gas_can_reach_and_no_further(line, site):
    chain(line, 5)
    made = a_dewar(line, "R0")
    assert tags(made) == {"R0", "R1", "R2"}
    assert "neighbours/largest-vessel" in opened(made, "R1")
    assert "oxygen/largest-vessel" in opened(made, "R0")
    changed = line.change(made.record, capacity_l=10.0, contents_l=None)
    assert tags(changed) == {"R0", "R1", "R2"}
    assert tags(line.remove(changed.record)) == {"R0", "R1", "R2"}
    assert verify(line.database).sound


@pytest.mark.slow
def test_shutting_a_door_clears_what_came_through_it(line, site):
    chain(line, 2)
    a_dewar(line, "R0")
    door = find(line, site, "opening", "O0")
    shut = line.change(door, normally_open=False)
    (hall,) = [effect for effect in shut.effects if effect.tag == "R1"]
    assert {"neighbours/largest-vessel"} <= {each["rule"] for each in hall.cleared}
    assert hall.standing_after == "in-order"
    again = line.change(shut.record, normally_open=None)
    assert "neighbours/largest-vessel" in opened(again, "R1")
    removed = line.remove(again.record)
    assert tags(removed) == {"R0", "R1"}
    assert verify(line.database).sound


@pytest.mark.slow
def test_a_fan_of_the_neighbour_is_felt_in_the_network_of_the_source(line, site):
    chain(line, 3)
    a_dewar(line, "R0")
    fan = line.create(
        "ventilation-unit",
        tag="F",
        site="S",
        arrangement="supply",
        design_flow_m3_h=2000.0,
        outdoor_air_fraction=1.0,
        serves=[{"room": "R1", "share": 1.0}],
    )
    assert tags(fan) == {"R0", "R1", "R2"}


@pytest.mark.slow
def test_a_detector_is_felt_where_it_hangs(line, site):
    chain(line, 3)
    a_dewar(line, "R0")
    made = line.create("detector", tag="D", site="S", room="R0", gas="oxygen", height_m=0.5)
    assert tags(made) == {"R0"}
    assert verify(line.database).sound


@pytest.mark.slow
def test_a_bund_and_a_detector_that_shuts_a_line_are_felt_next_door(line, site):
    chain(line, 2)
    a_dewar(line, "R0")
    bund = line.create("control", tag="B", site="S", room="R0", kind="bund", area_m2=2.0)
    assert tags(bund) == {"R0", "R1"}
    assert tags(line.remove(bund.record)) == {"R0", "R1"}
    line.create("detector", tag="D", site="S", room="R0", gas="oxygen", height_m=0.5)
    line.create(
        "supply-line", tag="L", site="S", fluid="nitrogen", phase="liquid",
        rooms=[{"room": "R0"}], shutoff={"trigger": "D"},
    )  # fmt: skip
    moved = line.change(find(line, site, "detector", "D"), state="fault")
    assert tags(moved) == {"R0", "R1"}


@pytest.mark.slow
def test_the_same_change_twice_leaves_other_rooms_alone(line, site):
    chain(line, 3)
    made = a_dewar(line, "R0")
    assert tags(line.change(made.record, name="Dewar")) == {"R0", "R1", "R2"}
    # What says nothing new is no change, and reaches nobody.
    same = line.change(find(line, site, "vessel", "V"), name="Dewar")
    assert same.effects == ()


@pytest.mark.slow
def test_a_line_and_what_feeds_it_are_felt_where_it_runs(line, site):
    room = line.a_room(tag="A", floor_area_m2=10.0, height_m=2.5)
    line.a_room(tag="B")
    tank = a_dewar(line, None, kind="tank", tag="TANK", capacity_l=3000.0).record
    supply = line.create(
        "supply-line",
        tag="L",
        site="S",
        source_vessel="TANK",
        fluid="nitrogen",
        phase="liquid",
        rooms=[{"room": "A"}],
        bore_mm=10.0,
        source_pressure_kpa=300.0,
    )
    assert tags(supply) == {"A"}
    assert "oxygen/line-break" in opened(supply, "A")
    assert tags(line.change(tank, capacity_l=5.0, contents_l=None)) == {"A"}
    filled = a_dewar(
        line, "B", kind="freezer", filling={"by": "attended", "supply_line": "L"}, tag="F"
    )
    assert tags(filled) == {"B"}
    # It fills a vessel there, so that it can break there as well.
    assert tags(line.change(find(line, site, "supply-line", "L"), bore_mm=12.0)) == {"A", "B"}
    assert room.id in {each["room_id"] for each in supply.record.fields["rooms"]}
    assert verify(line.database).sound


@pytest.mark.slow
def test_what_names_a_line_or_is_named_by_one_stays(line, site):
    line.a_room(tag="A")
    tank = a_dewar(line, None, kind="tank", tag="TANK").record
    detector = line.create("detector", tag="D", site="S", room="A", gas="oxygen").record
    supply = line.create(
        "supply-line", tag="L", site="S", source_vessel="TANK", fluid="nitrogen", phase="liquid",
        rooms=[{"room": "A"}], shutoff={"trigger": "D"},
    ).record  # fmt: skip
    assert supply.fields["shutoff"]["trigger"] == detector.id
    a_dewar(line, "A", kind="freezer", filling={"supply_line_id": supply.id}, tag="F")
    for record in (tank, detector, supply, find(line, site, "room", "A")):
        with pytest.raises(StillReferred):
            line.remove(record)


@pytest.mark.parametrize(
    ("fields", "pointer"),
    [
        ({"fluid": "argon"}, "/source_vessel_id"),
        ({"rooms": []}, "/rooms"),
        ({"rooms": [{"room": "A"}, {"room": "A"}]}, "/rooms"),
        ({"rooms": [{"room": "NOWHERE"}]}, "/rooms/0/room"),
        ({"source_vessel": "NOWHERE"}, "/source_vessel"),
        ({"shutoff": {"trigger": "E"}}, "/shutoff/trigger"),
        ({"shutoff": {"trigger": "NOBODY"}}, "/shutoff/trigger"),
        ({"fluid": None}, "/fluid"),
    ],
)
def test_a_line_that_contradicts_itself_is_refused_at_its_place(line, site, fields, pointer):
    line.a_room(tag="A")
    line.a_room(tag="B")
    a_dewar(line, None, kind="tank", tag="TANK")
    line.create("detector", tag="E", site="S", room="B", gas="oxygen")
    sound = {
        "tag": "L", "site": "S", "source_vessel": "TANK", "fluid": "nitrogen", "phase": "liquid",
        "rooms": [{"room": "A"}],
    }  # fmt: skip
    with pytest.raises(FieldsRefused) as refused:
        line.create("supply-line", **{**sound, **fields})
    assert pointer in {error.pointer for error in refused.value.errors}
