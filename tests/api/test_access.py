"""Who may do what: every path by every role, and what a key of one site learns of another."""

from datetime import timedelta
from types import SimpleNamespace

import pytest
from fastapi import APIRouter
from fastapi.routing import APIRoute

from service.api.access import ROLES as TABLE
from service.api.access import check_declared
from service.api.resources import RESOURCES
from tests.api.estate import (
    ROLES,
    a_control,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    an_opening,
)

EVERYBODY = set(ROLES)
WRITERS = {"recorder", "administrator"}
PAST = {"auditor", "administrator"}
ADMINISTRATORS = {"administrator"}
REFERENCES = {"bases", "fluids"}
NO_ID = "01890a5d-ac96-774b-bcce-b302099a8057"


def expected(method, path):
    """The roles of the design's table, section 10, written out by path."""
    kind = path.split("/")[2] if path.startswith("/v1/") else ""
    if not kind:
        return None
    if kind == "keys":
        return ADMINISTRATORS
    if path.endswith("/versions"):
        return PAST
    if method == "get":
        return EVERYBODY
    return ADMINISTRATORS if kind in REFERENCES else WRITERS


def operations(document):
    return [(method, path) for path, item in document["paths"].items() for method in item]


def filled(path):
    for part in ("record_id", "room_id", "finding_id", "key_id"):
        path = path.replace(f"{{{part}}}", NO_ID)
    return path.replace("{external_id}", "NONE")


@pytest.mark.slow
def test_every_path_lets_through_the_roles_of_the_table_and_nobody_else(ask_one):
    seen = 0
    for method, template in operations(ask_one.app.openapi()):
        allowed = expected(method, template)
        body = {} if method in ("post", "put", "patch") else None
        for role in [None, *ROLES]:
            answer = ask_one(method.upper(), filled(template), body, key=role)
            named = (method, template, role, answer.status_code)
            if allowed is None:
                assert answer.status_code == 200, named
            elif role is None:
                assert answer.status_code == 401, named
            elif role not in allowed:
                assert answer.status_code == 403, named
            else:
                assert answer.status_code in (200, 404, 422), named
            seen += 1
    assert seen > 5 * 40


def test_the_table_of_roles_is_that_of_the_design():
    """Section 10: only what is listed there is allowed."""
    assert {operation: set(roles) for operation, roles in TABLE.items()} == {
        "read": EVERYBODY,
        "read-past": PAST,
        "write": WRITERS,
        "acknowledge": EVERYBODY - {"reader"},
        "decide": {"auditor"},
        "write-references": ADMINISTRATORS,
        "keys": ADMINISTRATORS,
    }


def test_a_route_that_declares_nothing_stops_the_application(ask_one):
    router = APIRouter()

    @router.get("/v1/forgotten")
    async def forgotten():
        return {}

    with pytest.raises(TypeError, match="/v1/forgotten"):
        check_declared([*ask_one.app.routes, *router.routes])
    declared = [route for route in ask_one.app.routes if isinstance(route, APIRoute)]
    assert len(declared) > 50


@pytest.mark.parametrize("role", ROLES)
def test_the_past_is_for_auditors_and_administrators(ask_one, estate_of_one, role):
    room = estate_of_one.north.room["id"]
    moment = "2027-03-01T08:00:00.5Z"
    ask_one.clock.advance(timedelta(seconds=1))
    for answered in ("", "/status", "/assessment", "/curve"):
        path = f"/v1/rooms/{room}{answered}"
        answer = ask_one("GET", f"{path}?as_of={moment}", key=role)
        assert answer.status_code == (200 if role in PAST else 403), answer.text
    answer = ask_one("GET", f"/v1/findings?as_of={moment}", key=role)
    assert answer.status_code == (200 if role in PAST else 403), answer.text


def test_a_recorder_writes_no_basis_by_way_of_several_changes(ask, estate):
    change = {"op": "change", "kind": "basis", "id": estate.north.basis["id"], "fields": {}}
    for role, status in (("recorder", 403), ("administrator", 200)):
        answer = ask("POST", "/v1/changes", {"changes": [change]}, key=role)
        assert answer.status_code == status


# Another site's records.


def texts_of(place):
    """Everything by which a site could be recognised."""
    records = [place.site, place.room, place.unit, place.vessel, place.detector, place.basis]
    records += [place.opening, place.control]
    return {record["id"] for record in records} | {place.site["tag"]}


@pytest.fixture
def north(ask, estate):
    """An asker with keys of the first site, and a check that it hears nothing of the second."""
    foreign = texts_of(estate.south)

    def asking(method, path, body=None, *, role="administrator", unheard=True, **options):
        answer = ask(method, path, body, key=estate.keys[role], **options)
        said = answer.text + str(dict(answer.headers))
        if unheard:
            # What was asked for may come back; nothing else of the other site may.
            sent = path + str(body)
            assert [text for text in foreign if text in said and text not in sent] == []
        return answer

    return asking


def test_a_key_of_one_site_lists_that_site_alone(north, estate):
    own, foreign = estate.north.site["id"], estate.south.site["id"]
    for role in ROLES:
        for resource in RESOURCES.values():
            answer = north("GET", f"/v1/{resource.path}?limit=500&total=true", role=role)
            assert answer.status_code == 200
            sites = {record["site_id"] for record in answer.json()["items"]}
            assert sites <= {own, None}
            assert answer.json()["total"] == len(answer.json()["items"])
            other = north("GET", f"/v1/{resource.path}?site_id={foreign}&total=true", role=role)
            assert (other.json()["items"], other.json()["total"]) == ([], 0)
        assert north("GET", "/v1/rooms?label.wing=SOUTH", role=role).json()["items"] == []
        findings = north("GET", "/v1/findings?limit=500", role=role).json()["items"]
        assert {finding["site_id"] for finding in findings} == {own}
        for asked in (f"site_id={foreign}", "site=SOUTH", "room=SOUTH-104"):
            assert north("GET", f"/v1/findings?{asked}", role=role).json()["items"] == []
        summary = north("GET", "/v1/summary", role=role).json()
        assert [site["site_id"] for site in summary["sites"]] == [own]
        for asked in (f"site_id={foreign}", "site=SOUTH"):
            assert north("GET", f"/v1/summary?{asked}", role=role).status_code == 404


def test_a_key_of_one_site_sums_up_that_site_alone_and_reads_every_method_and_rule(north, estate):
    own, foreign = estate.north.site["id"], estate.south.site["id"]
    for role in ROLES:
        summary = north("GET", "/v1/summary", role=role)
        assert summary.status_code == 200
        assert [site["site_id"] for site in summary.json()["sites"]] == [own]
        assert {room["site_id"] for room in summary.json()["worst_rooms"]} <= {own}
        assert summary.json()["total"]["rooms"]["in-service"] == 1
        for asked in (f"site_id={foreign}", "site=SOUTH", f"site_id={own}&site=SOUTH"):
            assert north("GET", f"/v1/summary?{asked}", role=role).status_code == 404
        for path in ("methods", "rules"):
            listed = north("GET", f"/v1/{path}", role=role).json()["items"]
            one = north("GET", f"/v1/{path}/{listed[0]['slug']}", role=role)
            assert one.json() == listed[0]


def test_another_sites_record_is_not_there_for_a_key_of_one_site(north, estate, ask):
    ask.clock.advance(timedelta(seconds=1))
    for kind, resource in RESOURCES.items():
        record = estate.south.record(kind)
        path = f"/v1/{resource.path}/{record['id']}"
        for role in ROLES:
            assert north("GET", path, role=role).status_code == 404
        for moment in ("2027-03-01T08:00:00.5Z", "2020-01-01T00:00:00Z"):
            assert north("GET", f"{path}?as_of={moment}").status_code == 404
        assert north("PATCH", path, {"name": "mine"}).status_code == 404
        assert north("DELETE", path).status_code == 404
        for change in (
            {"op": "change", "kind": kind, "id": record["id"], "fields": {"name": "mine"}},
            {"op": "remove", "kind": kind, "id": record["id"]},
        ):
            assert north("POST", "/v1/changes", {"changes": [change]}).status_code == 404
        assert ask.body(path)["name"] == record["name"]


def test_another_sites_room_answers_nothing(north, estate, ask):
    room = estate.south.room["id"]
    ask.clock.advance(timedelta(seconds=1))
    for path in ("status", "assessment", "curve"):
        for query in ("", "?as_of=2027-03-01T08:00:00.5Z", "?as_of=2020-01-01T00:00:00Z"):
            assert north("GET", f"/v1/rooms/{room}/{path}{query}").status_code == 404
    assert north("GET", f"/v1/rooms/{room}/status?at_least=1").status_code == 404
    assert north("GET", f"/v1/findings?room_id={room}").json()["items"] == []
    finding = ask.body(f"/v1/findings?room_id={room}&limit=1")["items"]
    assert finding
    for one in finding:
        assert north("GET", f"/v1/findings/{one['id']}").status_code == 404
        assert north("GET", f"/v1/findings/{one['id']}/versions").status_code == 404
    external_id = estate.south.vessel["external_id"]
    assert north("GET", f"/v1/vessels/by-external-id/{external_id}").status_code == 404


def test_another_sites_room_cannot_be_named_in_a_new_record(north, estate):
    south = estate.south
    tries = [
        ("rooms", a_room(south.site)),
        ("rooms", {**a_room(south.site), "site_id": None, "site": "SOUTH"}),
        ("vessels", a_vessel(south.room)),
        ("detectors", a_detector(south.room)),
        ("ventilation-units", a_unit(south.room)),
        ("openings", an_opening(south.room)),
        ("openings", an_opening(estate.north.room, other_room_id=south.room["id"])),
        ("controls", a_control(south.room)),
        ("controls", a_control({"id": None}, vessel_id=south.vessel["id"])),
        ("controls", a_control({"id": None}, vessel="SOUTH-DEW")),
        (
            "ventilation-units",
            a_unit(estate.north.room, boost_flow_m3_h=900.0, boost_trigger=south.detector["id"]),
        ),
        ("vessels", a_vessel(estate.north.room, fluid="SOUTH-mix")),
        ("detectors", a_detector(estate.north.room, gas="SOUTH-mix")),
    ]
    for path, body in tries:
        # A 409 would say that the tag is taken there.
        assert north("POST", f"/v1/{path}", body).status_code in (404, 422), (path, body)
    vessel = estate.north.vessel["id"]
    moved = north("PATCH", f"/v1/vessels/{vessel}", {"room_id": south.room["id"]})
    assert moved.status_code == 422
    assert north("POST", "/v1/sites", {"tag": "EAST"}).status_code == 403


def test_a_tag_of_another_site_is_free_for_a_key_of_one_site(north, estate):
    answer = north("POST", "/v1/rooms", a_room(estate.north.site, estate.south.room["tag"]))
    assert answer.status_code == 201


# Keys.


def test_unknown_revoked_and_expired_keys_are_answered_alike(ask):
    expiring = ask.key("reader", expires_at=ask.clock.now() + timedelta(hours=1))
    assert ask("GET", "/v1/rooms", key=expiring).status_code == 200
    made = ask("POST", "/v1/keys", {"holder": "a visitor", "role": "reader"}).json()
    assert ask("GET", "/v1/rooms", key=made["key"]).status_code == 200
    assert ask("POST", f"/v1/keys/{made['id']}/revoke", {}).json()["revoked_at"] is not None
    ask.clock.advance(timedelta(hours=1))
    unknown = made["key"][:-1] + ("A" if made["key"][-1] != "A" else "B")
    answers = [ask("GET", "/v1/rooms", key=key) for key in (expiring, made["key"], unknown)]
    assert {answer.status_code for answer in answers} == {401}
    assert len({str(answer.json() | {"instance": ""}) for answer in answers}) == 1


def test_a_key_is_taken_from_either_header_and_not_from_the_address(ask_one):
    key = ask_one.keys["reader"]
    assert ask_one("GET", "/v1/rooms", key=None, headers={"X-API-Key": key}).status_code == 200
    assert ask_one("GET", "/v1/rooms", key=None).json()["type"].endswith("#key-missing")
    assert ask_one("GET", f"/v1/rooms?key={key}", key=None).status_code == 401
    basic = {"Authorization": f"Basic {key}"}
    assert ask_one("GET", "/v1/rooms", key=None, headers=basic).status_code == 401
    both = {"X-API-Key": ask_one.keys["auditor"]}
    assert ask_one("GET", "/v1/rooms", key="reader", headers=both).status_code == 401


def test_a_new_keys_text_is_shown_once_and_is_not_kept(ask):
    answer = ask("POST", "/v1/keys", {"holder": "a board", "role": "reader"})
    assert answer.status_code == 201
    assert answer.headers["Cache-Control"] == "no-store"
    made = answer.json()
    listed = ask("GET", "/v1/keys")
    assert made["key"] not in listed.text
    assert made["id"] in {key["id"] for key in listed.json()["items"]}
    assert ask("GET", "/v1/rooms", key=made["key"]).status_code == 200


def test_a_key_is_followed_by_another_and_both_work_for_a_while(ask):
    old = ask("POST", "/v1/keys", {"holder": "a pump", "role": "recorder"}).json()
    new = ask("POST", f"/v1/keys/{old['id']}/rotate", {"overlap_s": 60}).json()
    assert (new["holder"], new["role"]) == ("a pump", "recorder")
    ask.clock.advance(timedelta(seconds=59))
    assert ask("GET", "/v1/rooms", key=old["key"]).status_code == 200
    ask.clock.advance(timedelta(seconds=2))
    assert ask("GET", "/v1/rooms", key=old["key"]).status_code == 401
    assert ask("GET", "/v1/rooms", key=new["key"]).status_code == 200


def test_an_administrator_of_one_site_makes_and_sees_keys_of_that_site_only(ask, estate):
    key = estate.keys["administrator"]
    own, other = estate.north.site["id"], estate.south.site["id"]
    made = ask("POST", "/v1/keys", {"holder": "a visitor", "role": "reader"}, key=key)
    assert made.status_code == 201
    assert made.json()["sites"] == [own]
    for sites in (None, [other], [own, other]):
        body = {"holder": "a visitor", "role": "reader", "sites": sites}
        assert ask("POST", "/v1/keys", body, key=key).status_code == 403
    for listed in ask.body("/v1/keys", key=key)["items"]:
        assert listed["sites"] == [own]
    foreign = ask("POST", "/v1/keys", {"holder": "x", "role": "reader", "sites": [other]}).json()
    assert ask("POST", f"/v1/keys/{foreign['id']}/revoke", {}, key=key).status_code == 404


def test_the_use_of_a_key_is_noted_at_most_once_a_minute(ask_one):
    keys = ask_one.service.keys
    ask_one("GET", "/v1/rooms", key="reader")
    ask_one("GET", "/v1/rooms", key="reader")
    assert len(keys.used()) == 1
    last = ask_one.clock.advance(timedelta(seconds=30))
    ask_one("GET", "/v1/rooms", key="reader")
    assert keys.used() == {}
    ask_one.clock.advance(timedelta(seconds=30))
    assert list(keys.used().values()) == [last]
    ask_one.clock.advance(timedelta(minutes=1))
    assert keys.used() == {}


def test_a_caller_without_a_key_learns_nothing_of_what_else_is_wrong(ask_one):
    for method, path, options in (
        ("POST", "/v1/rooms", {"content": b"{"}),
        ("GET", "/v1/rooms?colour=red&limit=0", {}),
        ("PATCH", "/v1/rooms/nonsense", {"content": b"x", "headers": {"If-Match": "nonsense"}}),
    ):
        answer = ask_one(method, path, key=None, **options)
        assert answer.status_code == 401, (path, SimpleNamespace(**answer.json()))
