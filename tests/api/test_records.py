"""Records over HTTP: made, read, changed, removed; conditions, pages, filters."""

import pytest

from service.api.resources import RESOURCES
from tests.api.estate import a_room, a_site, a_vessel


def test_a_record_is_answered_as_its_schema_says_and_reads_back_alike(ask, estate):
    for resource in RESOURCES.values():
        made = estate.north.record(resource.kind)
        resource.written.model_validate(made)
        answer = ask("GET", f"/v1/{resource.path}/{made['id']}", key="reader")
        assert answer.status_code == 200
        resource.read.model_validate(answer.json())
        besides = {"effects", "position", "recalculating", "read_as"}
        assert answer.json() == {name: made[name] for name in made if name not in besides}
        assert answer.headers["ETag"] == f'"{made["revision"]}"'
        assert answer.headers["Cache-Control"] == "private, no-cache"


def test_a_new_record_says_where_it_is(ask):
    answer = ask("POST", "/v1/sites", a_site("EAST"))
    assert answer.status_code == 201
    site = answer.json()
    assert answer.headers["Location"] == f"/v1/sites/{site['id']}"
    assert answer.headers["ETag"] == '"1"'
    assert site["site_id"] == site["id"]
    assert site["basis"] == "baseline"


def test_a_volume_is_made_of_floor_area_and_height_and_says_so(ask):
    site = ask.made("sites", a_site("EAST"))
    room = ask.made("rooms", a_room(site))
    # 24 m2 times 2.8 m; elementary geometry.
    assert room["volume_m3"] == pytest.approx(67.2)
    assert room["volume_derived"] is True


def test_a_quantity_with_a_unit_is_answered_in_the_unit_of_its_name(ask, estate):
    vessel = ask.made("vessels", a_vessel(estate.north.room, "DEW-2", capacity_l="47 gal"))
    # The US gallon is 231 cubic inches of 0.0254 m (NIST Handbook 44, appendix C): 3.785411784 L.
    assert vessel["capacity_l"] == pytest.approx(47 * 3.785411784)
    (reading,) = vessel["read_as"]
    assert reading["pointer"] == "/capacity_l"
    assert reading["sent"] == "47 gal"
    assert "imperial" in reading["note"]


@pytest.mark.parametrize("media_type", ["application/json", "application/merge-patch+json"])
def test_a_merge_patch_changes_what_is_sent_and_null_takes_away(ask, estate, media_type):
    vessel = estate.north.vessel
    sent = b'{"contents_l": 12, "external_id": null, "labels": {"owner": "biobank"}}'
    answer = ask(
        "PATCH",
        f"/v1/vessels/{vessel['id']}",
        content=sent,
        headers={"Content-Type": media_type},
        key="recorder",
    )
    assert answer.status_code == 200, answer.text
    changed = answer.json()
    assert changed["revision"] == vessel["revision"] + 1
    assert changed["contents_l"] == 12
    assert changed["external_id"] is None
    assert changed["labels"] == {"owner": "biobank"}
    assert changed["capacity_l"] == vessel["capacity_l"]
    answer = ask("PATCH", f"/v1/vessels/{vessel['id']}", {"labels": {"owner": None}})
    assert answer.json()["labels"] == {}


def test_a_patch_that_changes_nothing_leaves_no_trace(ask, estate):
    vessel = estate.north.vessel
    before = ask.body(f"/v1/rooms/{vessel['room_id']}/status")["position"]
    answer = ask("PATCH", f"/v1/vessels/{vessel['id']}", {"kind": vessel["kind"]})
    assert answer.status_code == 200
    assert answer.json()["revision"] == vessel["revision"]
    assert answer.json()["effects"] == []
    assert ask.body(f"/v1/rooms/{vessel['room_id']}/status")["position"] == before


@pytest.mark.parametrize(
    ("field", "value"),
    [("tag", None), ("kind", None), ("fluid", None), ("state", None), ("site_id", None)],
)
def test_null_is_refused_for_what_no_vessel_is_without(ask_one, estate_of_one, field, value):
    answer = ask_one("PATCH", f"/v1/vessels/{estate_of_one.north.vessel['id']}", {field: value})
    assert answer.status_code == 422
    assert answer.json()["errors"][0]["pointer"] == f"/{field}"


def test_moving_a_vessel_answers_what_it_did_to_both_rooms(ask, estate):
    other = ask.made("rooms", a_room(estate.north.site, "B-105"))
    vessel = estate.north.vessel
    ask("DELETE", f"/v1/supply-lines/{estate.north.line['id']}")
    answer = ask("PATCH", f"/v1/vessels/{vessel['id']}", {"room": "B-105"}, key="recorder")
    assert answer.status_code == 200, answer.text
    effects = {effect["room_id"]: effect for effect in answer.json()["effects"]}
    assert effects.keys() == {vessel["room_id"], other["id"]}
    left, entered = effects[vessel["room_id"]], effects[other["id"]]
    assert left["worst_oxygen_pct"]["after"] is None
    assert entered["worst_oxygen_pct"]["before"] is None
    assert entered["worst_oxygen_pct"]["after"] == pytest.approx(
        left["worst_oxygen_pct"]["before"], abs=3.0
    )


def test_a_removal_says_what_it_did_and_the_record_is_gone(ask, estate):
    vessel = estate.north.vessel
    answer = ask("DELETE", f"/v1/vessels/{vessel['id']}", key="recorder")
    assert answer.status_code == 200
    assert answer.json()["id"] == vessel["id"]
    assert [effect["room_id"] for effect in answer.json()["effects"]] == [vessel["room_id"]]
    assert ask("GET", f"/v1/vessels/{vessel['id']}").status_code == 404
    assert ask("DELETE", f"/v1/vessels/{vessel['id']}").status_code == 404


def test_what_others_refer_to_cannot_go_and_they_are_named(ask, estate):
    answer = ask("DELETE", f"/v1/rooms/{estate.north.room['id']}")
    assert answer.status_code == 409
    assert answer.json()["type"].endswith("#still-referred")
    assert "vessel NORTH-DEW" in answer.json()["detail"]


def test_what_comes_with_the_service_is_read_only(ask):
    (baseline,) = ask.body("/v1/bases?tag=baseline")["items"]
    answer = ask("PATCH", f"/v1/bases/{baseline['id']}", {"values": {"restore_s": 60.0}})
    assert answer.status_code == 409
    assert answer.json()["type"].endswith("#read-only-record")


def test_a_basis_answers_every_value_that_counts_with_its_source(ask, estate):
    basis = ask.body(f"/v1/bases/{estate.north.basis['id']}")
    (baseline,) = ask.body("/v1/bases?tag=baseline")["items"]
    own = {"value": 1800.0, "source": "decision of the safety committee"}
    assert basis["values"] == {"restore_s": 1800.0}
    assert basis["effective"]["restore_s"] == own
    assert basis["effective"].keys() == baseline["values"].keys()
    others = basis["effective"].keys() - {"restore_s"}
    assert all(basis["effective"][name] == baseline["effective"][name] for name in others)
    assert all(value["source"] for value in basis["effective"].values())


def test_if_match_lets_one_of_two_writers_through(ask, estate):
    path = f"/v1/vessels/{estate.north.vessel['id']}"
    tag = ask("GET", path).headers["ETag"]
    first = ask("PATCH", path, {"contents_l": 10}, headers={"If-Match": tag})
    second = ask("PATCH", path, {"contents_l": 20}, headers={"If-Match": tag})
    assert first.status_code == 200
    assert second.status_code == 412
    assert second.headers["ETag"] == first.headers["ETag"]
    assert ask.body(path)["contents_l"] == 10
    assert ask("DELETE", path, headers={"If-Match": 'W/"2"'}).status_code == 412
    assert ask("DELETE", path, headers={"If-Match": f'"7", {first.headers["ETag"]}'}).is_success


def test_if_none_match_saves_the_body_and_head_asks_for_headers_alone(ask, estate):
    path = f"/v1/rooms/{estate.north.room['id']}"
    whole = ask("GET", path)
    spared = ask("GET", path, headers={"If-None-Match": f"W/{whole.headers['ETag']}"})
    assert (spared.status_code, spared.content) == (304, b"")
    head = ask("HEAD", path)
    assert head.status_code == 200
    for name in ("ETag", "Content-Length", "Cache-Control", "Content-Type"):
        assert head.headers[name] == whole.headers[name]


def test_put_by_external_id_creates_once_and_then_changes(ask, estate):
    room = estate.north.room
    path = "/v1/vessels/by-external-id/ERP-9%2F1"
    first = ask("PUT", path, a_vessel(room, "DEW-90"), key="recorder")
    assert first.status_code == 201, first.text
    assert first.json()["external_id"] == "ERP-9/1"
    again = ask("PUT", path, a_vessel(room, "DEW-90", capacity_l=60), key="recorder")
    assert again.status_code == 200
    assert again.json()["id"] == first.json()["id"]
    assert again.json()["capacity_l"] == 60
    assert ask.body(path)["id"] == first.json()["id"]
    other = ask("PUT", path, a_vessel(room, "DEW-90", external_id="ERP-8"))
    assert other.status_code == 422
    assert other.json()["errors"][0]["pointer"] == "/external_id"


def test_an_external_id_in_two_sites_is_asked_for_with_its_site(ask, estate):
    for place in (estate.north, estate.south):
        ask.made("rooms", a_room(place.site, "TWIN", external_id="T-1"))
    answer = ask("GET", "/v1/rooms/by-external-id/T-1")
    assert answer.status_code == 422
    assert answer.json()["errors"][0]["parameter"] == "site_id"
    room = ask.body(f"/v1/rooms/by-external-id/T-1?site={estate.south.site['tag']}")
    assert room["site_id"] == estate.south.site["id"]
    # A key that reaches one of the sites does not learn of the other.
    assert (
        ask.body("/v1/rooms/by-external-id/T-1", key=estate.keys["reader"])["site_id"]
        == (estate.north.site["id"])
    )


def test_a_tag_is_unique_in_its_site_however_it_is_spelt(ask, estate):
    answer = ask("POST", "/v1/rooms", a_room(estate.north.site, "north-104"))
    assert answer.status_code == 409
    assert answer.json()["errors"][0]["pointer"] == "/tag"
    assert ask("POST", "/v1/rooms", a_room(estate.south.site, "north-104")).status_code == 201


def test_a_list_filters_sorts_and_counts(ask, estate):
    site = estate.north.site
    for number in range(4):
        ask.made(
            "rooms",
            a_room(site, f"R-{number}", building="A" if number < 2 else "B", egress_m=number),
        )
    found = ask.body(f"/v1/rooms?site_id={site['id']}&building=A&sort=-egress_m&total=true")
    assert [room["tag"] for room in found["items"]] == ["R-1", "R-0"]
    assert found["total"] == 2
    assert found["next"] is None
    labelled = ask.body("/v1/rooms?label.wing=SOUTH")["items"]
    assert [room["tag"] for room in labelled] == ["SOUTH-104"]
    without = ask.body("/v1/vessels?manifold=&external_id=")["items"]
    assert without == []


@pytest.mark.parametrize(
    ("query", "parameter"),
    [
        ("colour=red", "colour"),
        ("sort=colour", "sort"),
        ("sort=labels", "sort"),
        ("limit=0", "limit"),
        ("limit=501", "limit"),
        ("limit=1&limit=2", "limit"),
        ("below_ground=perhaps", "below_ground"),
        ("label.=x", "label."),
        ("total=maybe", "total"),
    ],
)
def test_a_query_that_means_nothing_is_refused_by_name(ask_one, query, parameter):
    answer = ask_one("GET", f"/v1/rooms?{query}")
    assert answer.status_code == 422
    assert answer.json()["errors"][0]["parameter"] == parameter


@pytest.mark.parametrize(
    "sort",
    [
        pytest.param("-id", marks=pytest.mark.slow),
        "-egress_m",
        pytest.param("building", marks=pytest.mark.slow),
    ],
)
def test_records_that_live_throughout_appear_once_while_others_come_and_go(ask, estate, sort):
    site = estate.north.site
    made = [
        ask.made("rooms", a_room(site, f"P-{n:02}", egress_m=n % 3, building="AB"[n % 2]))
        for n in range(9)
    ]
    doomed = {made[4]["id"], made[8]["id"]}
    path = f"/v1/rooms?site_id={site['id']}&limit=3&sort={sort}"
    answer = ask("GET", path)
    seen = [room["id"] for room in answer.json()["items"]]
    for record_id in doomed:
        assert ask("DELETE", f"/v1/rooms/{record_id}").status_code == 200
    for number in range(3):
        ask.made("rooms", a_room(site, f"NEW-{number}", egress_m=number))
    while answer.json()["next"] is not None:
        link = answer.headers["Link"]
        answer = ask("GET", link[1 : link.index(">")])
        assert answer.status_code == 200, answer.text
        assert len(answer.json()["items"]) <= 3
        seen += [room["id"] for room in answer.json()["items"]]
    assert len(seen) == len(set(seen))
    assert {room["id"] for room in made} - doomed <= set(seen)


def test_a_cursor_belongs_to_its_list_and_cannot_be_made_up(ask, estate):
    for number in range(3):
        ask.made("rooms", a_room(estate.north.site, f"C-{number}"))
    cursor = ask.body("/v1/rooms?limit=1")["next"]
    assert ask("GET", f"/v1/rooms?limit=2&cursor={cursor}").status_code == 200
    for path in (f"/v1/vessels?cursor={cursor}", f"/v1/rooms?kind=room&cursor={cursor}"):
        assert ask("GET", path).json()["type"].endswith("#cursor-refused")
    assert ask("GET", f"/v1/rooms?cursor={cursor[:-2]}AA").status_code == 400
