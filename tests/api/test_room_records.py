"""Openings, controls and what a room, unit, vessel and detector say more, over HTTP."""

import pytest

from service.api.resources import RESOURCES
from tests.api.estate import (
    a_control,
    a_detector,
    a_room,
    a_supply_line,
    a_unit,
    a_vessel,
    an_opening,
)


def test_an_object_is_answered_whole_and_patched_by_member(ask, estate):
    magnet = ask.made(
        "vessels",
        a_vessel(
            estate.north.room,
            "M-1",
            kind="magnet",
            fluid="helium",
            quench={"duration_s": "0.5 min", "pipe": {"bore_mm": 150}},
            relief={"fitted": True, "set_pressure_kpa": "30 psig"},
        ),
    )
    pipe = {"bore_mm": 150.0, "length_m": None, "inspected_on": None, "inspect_every_days": None,
            "outlet_clear": None}  # fmt: skip
    assert magnet["quench"] == {"duration_s": 30.0, "share_to_room": None, "pipe": pipe}
    # A pound to the square inch is 6.894757 kPa (NIST SP 811, appendix B).
    assert magnet["relief"]["set_pressure_kpa"] == pytest.approx(30 * 6.894757, rel=1e-6)
    readings = {reading["pointer"] for reading in magnet["read_as"]}
    assert readings == {"/quench/duration_s", "/relief/set_pressure_kpa"}
    path = f"/v1/vessels/{magnet['id']}"
    sent = {"quench": {"pipe": {"bore_mm": None, "outlet_clear": False}}, "relief": None}
    answer = ask("PATCH", path, sent, key="recorder")
    assert answer.status_code == 200, answer.text
    changed = ask.body(path)
    assert changed["quench"]["pipe"] == pipe | {"bore_mm": None, "outlet_clear": False}
    assert changed["quench"]["duration_s"] == 30.0
    assert changed["relief"] is None
    RESOURCES["vessel"].read.model_validate(changed)


def test_outages_are_answered_in_utc_and_replaced_whole(ask, estate):
    outages = [{"from": "2027-05-01T10:00:00+02:00", "to": "2027-05-01T12:00:00+02:00"}]
    path = f"/v1/ventilation-units/{estate.north.unit['id']}"
    assert ask("PATCH", path, {"outages": outages}).status_code == 200
    whole = {"from": "2027-05-01T08:00:00.000000Z", "to": "2027-05-01T10:00:00.000000Z"}
    assert ask.body(path)["outages"] == [whole | {"reason": None}]
    later = {"from": "2027-06-01T00:00:00Z", "to": "2027-06-02T00:00:00Z", "reason": "filters"}
    (answered,) = ask("PATCH", path, {"outages": [later]}).json()["outages"]
    assert answered["reason"] == "filters"
    unit = ask.body(path)
    RESOURCES["ventilation-unit"].read.model_validate(unit)
    assert ask("PATCH", path, {"outages": None}).json()["outages"] is None


def test_a_boost_is_sent_by_tag_and_answered_by_id(ask, estate):
    unit, detector = estate.north.unit, estate.north.detector
    path = f"/v1/ventilation-units/{unit['id']}"
    answer = ask("PATCH", path, {"boost_flow_m3_h": 900, "boost_trigger": detector["tag"]})
    assert answer.json()["boost_trigger"] == detector["id"]
    assert "boost_detector_id" not in answer.json()
    found = ask.body(f"/v1/ventilation-units?boost_trigger={detector['id']}")["items"]
    assert [each["id"] for each in found] == [unit["id"]]
    removal = ask("DELETE", f"/v1/detectors/{detector['id']}")
    assert removal.status_code == 409
    assert unit["tag"] in removal.json()["detail"]


def test_an_opening_recalculates_the_rooms_on_both_its_sides_and_they_stay(ask, estate):
    other = ask.made("rooms", a_room(estate.north.site, "B-200"))
    opening = ask.made(
        "openings", an_opening(estate.north.room, "HATCH-1", other_room="B-200", kind="hatch")
    )
    assert opening["other_room_id"] == other["id"]
    reached = {effect["room_id"] for effect in opening["effects"]}
    assert reached == {estate.north.room["id"], other["id"]}
    assert opening["net_flow_m3_h"] == -40.0
    removal = ask("DELETE", f"/v1/rooms/{other['id']}")
    assert removal.status_code == 409
    assert "opening HATCH-1" in removal.json()["detail"]
    path = f"/v1/openings/{opening['id']}"
    assert ask("PATCH", path, {"room_id": None}).json()["errors"][0]["pointer"] == "/room_id"
    assert ask("PATCH", path, {"other_room_id": None}).json()["other_room_id"] is None
    assert ask("DELETE", f"/v1/rooms/{other['id']}").status_code == 200


def test_controls_are_listed_by_room_vessel_and_kind(ask, estate):
    north = estate.north
    bund = ask.made(
        "controls",
        {"tag": "BUND-1", "vessel_id": north.vessel["id"], "kind": "bund", "area_m2": "20 ft2"},
    )
    assert [effect["room_id"] for effect in bund["effects"]] == [north.room["id"]]
    # A foot is 0.3048 m by definition.
    assert bund["area_m2"] == pytest.approx(20 * 0.3048**2)
    for query, expected in (
        (f"vessel_id={north.vessel['id']}", {"BUND-1"}),
        (f"room_id={north.room['id']}", {"NORTH-SIGN"}),
        ("kind=bund", {"BUND-1"}),
        (f"site_id={north.site['id']}&kind=signage", {"NORTH-SIGN"}),
    ):
        found = ask.body(f"/v1/controls?{query}")["items"]
        assert {each["tag"] for each in found} == expected, query
    assert ask("DELETE", f"/v1/vessels/{north.vessel['id']}").status_code == 409


def test_openings_and_controls_go_together_with_other_records(ask, estate):
    room = estate.north.room
    changes = [
        {"op": "create", "kind": "opening", "fields": an_opening(room, "DOOR-9")},
        {"op": "create", "kind": "control", "fields": a_control(room, "SIGN-9")},
        {"op": "change", "kind": "room", "id": room["id"],
         "fields": {"pit": {"area_m2": 2, "depth_m": 1}, "door": {"swing": "inwards"}}},
    ]  # fmt: skip
    answer = ask("POST", "/v1/changes", {"changes": changes}, key="recorder")
    assert answer.status_code == 200, answer.text
    made = [item["record"] for item in answer.json()["items"]]
    assert made[2]["pit"] == {"area_m2": 2.0, "depth_m": 1.0, "entered": None}
    assert made[2]["door"]["closer_n"] is None
    gone = [{"op": "remove", "kind": kind, "id": record["id"]}
            for kind, record in (("opening", made[0]), ("control", made[1]))]  # fmt: skip
    assert ask("POST", "/v1/changes", {"changes": gone}, key="recorder").status_code == 200


def test_an_external_id_puts_a_control_of_a_vessel(ask, estate):
    body = {"tag": "T-1", "vessel_id": estate.north.vessel["id"], "kind": "training"}
    first = ask("PUT", "/v1/controls/by-external-id/qm-17", body)
    assert first.status_code == 201, first.text
    again = ask("PUT", "/v1/controls/by-external-id/qm-17", body | {"reference": "course 12"})
    assert (again.status_code, again.json()["id"]) == (200, first.json()["id"])


OUT_OF_RANGE = {
    "rooms": (
        {"leakage_area_m2": -0.1}, {"relief_opening_m2": 1001}, {"floor_rating_kpa": 0},
        {"door": {"width_m": 0}}, {"door": {"swing": "up"}}, {"door": {"closer_n": 1001}},
        {"pit": {"area_m2": 2, "depth_m": 0}}, {"pit": {"area_m2": 2}},
    ),
    "ventilation-units": (
        {"boost_flow_m3_h": -1, "boost_trigger": "manual"}, {"terminal_height": "middle"},
        {"outages": [{"from": "2027-06-01T00:00:00Z"}]},
        {"outages": [{"from": "2027-06-01", "to": "2027-06-01T00:00:00Z"}]},
        {"boost_flow_m3_h": 900, "boost_trigger": ""},
    ),
    "vessels": (
        {"tare_kg": 0}, {"footprint_m2": 0}, {"cold_area_m2": -1}, {"withdrawal_bore_mm": 0},
        {"working_pressure_kpa": -101.325}, {"neck_plug": "iced"},
        {"relief": {"set_pressure_kpa": 0}}, {"relief": {"flow_area_mm2": 0}},
        {"relief": {"discharge_coefficient": 1.01}}, {"relief": {"inspect_every_days": 0}},
        {"relief": {"discharge_to": "corridor"}}, {"quench": {"duration_s": 0}},
        {"quench": {"share_to_room": 1.5}}, {"quench": {"pipe": {"bore_mm": 0}}},
        {"filling": {"flow_l_min": 0}}, {"filling": {"closes_in_s": -1}},
        {"filling": {"supply_line_id": "nowhere"}}, {"quench": {"pipe": {"length_m": 0}}},
    ),
    "supply-lines": (
        {"bore_mm": 0}, {"length_m": 0}, {"source_pressure_kpa": 0}, {"restrictor_kg_h": 0},
        {"phase": "ice"}, {"rooms": []}, {"insulation": "straw"},
        {"shutoff": {"closes_in_s": -1}}, {"shutoff": {"trigger": "nobody"}},
        {"segments": [{"volume_l": 0}]}, {"segments": [{}]},
    ),
    "detectors": ({"zeroed_at_kpa_abs": 29.9}, {"zeroed_at_kpa_abs": 120.1}),
    "openings": ({"width_m": 0}, {"exchange_flow_m3_h": -1}, {"kind": "chimney"}, {"area_m2": 0}),
    "controls": (
        {"kind": "prayer"}, {"check_every_days": 0}, {"checked_on": "yesterday"},
        {"kind": "bund", "area_m2": 0},
    ),
    "fluids": (
        {"hazards": ["flammable"], "lfl_pct": 0}, {"hazards": ["flammable"], "lfl_pct": 100},
    ),
}  # fmt: skip


def test_what_lies_out_of_range_is_refused_at_its_place_and_stores_nothing(ask_one, estate_of_one):
    north = estate_of_one.north
    sound = {
        "rooms": a_room(north.site, "X"),
        "ventilation-units": a_unit(north.room, "X"),
        "vessels": a_vessel(north.room, "X"),
        "detectors": a_detector(north.room, "X"),
        "openings": an_opening(north.room, "X"),
        "controls": a_control(north.room, "X"),
        "supply-lines": a_supply_line(north.room, "X"),
        "fluids": {name: north.fluid[name] for name in
                   ("site_id", "molar_mass_g_mol", "boiling_k", "condensed_density_kg_m3",
                    "oxygen_fraction", "solid", "hazards", "settles")} | {"tag": "X"},
    }  # fmt: skip
    for path, bodies in OUT_OF_RANGE.items():
        for body in bodies:
            answer = ask_one("POST", f"/v1/{path}", sound[path] | body)
            assert answer.status_code == 422, (path, body, answer.text)
            (bad,) = answer.json()["errors"]
            assert bad["pointer"].split("/")[1] in body, (path, body, bad)
            assert bad["detail"], (path, body)
        assert ask_one.body(f"/v1/{path}?tag=X")["items"] == []


@pytest.mark.slow
def test_a_null_takes_away_whatever_a_record_may_be_without(ask_one, estate_of_one):
    """Every new field can be said and unsaid."""
    north = estate_of_one.north
    said = {
        "rooms": (north.room, {"pit": {"area_m2": 2, "depth_m": 1}, "door": {"width_m": 0.9},
                               "leakage_area_m2": 0.01, "relief_opening_m2": 0.1,
                               "floor_rating_kpa": 5}),
        "ventilation-units": (north.unit, {"terminal_height": "low", "boost_flow_m3_h": 900,
                                           "boost_trigger": "manual"}),
        "vessels": (north.vessel, {"tare_kg": 20, "footprint_m2": 0.3, "cold_area_m2": 0.5,
                                   "working_pressure_kpa": 150, "withdrawal_bore_mm": 10,
                                   "neck_plug": "vented", "relief": {"fitted": True},
                                   "filling": {"flow_l_min": 5}}),
        "detectors": (north.detector, {"zeroed_at_kpa_abs": 100, "outages": []}),
        "controls": (north.control, {"reference": "B", "checked_on": "2027-01-01",
                                     "check_every_days": 30}),
    }  # fmt: skip
    for path, (record, fields) in said.items():
        address = f"/v1/{path}/{record['id']}"
        changed = ask_one("PATCH", address, fields)
        assert changed.status_code == 200, changed.text
        assert all(ask_one.body(address)[name] is not None for name in fields), path
        assert ask_one("PATCH", address, dict.fromkeys(fields)).status_code == 200
        assert {ask_one.body(address)[name] for name in fields} == {None}, path
