"""The layer that answers polls from memory gives what the documented route gives."""

from datetime import timedelta

import orjson
import pytest
from fastapi import FastAPI
from starlette.testclient import TestClient

from service.api.limits import Limits
from service.api.schemas.status import StatusRead
from tests.api.estate import a_room

REQUEST_ID = {"X-Request-Id": "poll-or-route-1"}


@pytest.fixture
def route(ask):
    """Asks the framework's route, past the layer."""
    framework = Limits(FastAPI.build_middleware_stack(ask.app), 1_000_000)

    async def past_the_layer(scope, receive, send):
        await framework({**scope, "app": ask.app}, receive, send)

    return TestClient(past_the_layer, raise_server_exceptions=False)


def requests(ask, estate):
    """Every kind of request that can come to a poll's path."""
    own, foreign = estate.north.room["id"], estate.south.room["id"]
    etag = ask("GET", f"/v1/rooms/{own}/status").headers["ETag"]
    reader = f"Bearer {ask.keys['reader']}"
    north = f"Bearer {estate.keys['reader']}"
    path = f"/v1/rooms/{own}/status"
    yield "GET", path, {"Authorization": reader}
    yield "GET", path, {"Authorization": reader.replace("Bearer", "bEARER")}
    yield "GET", path, {"X-API-Key": ask.keys["auditor"]}
    yield "GET", path, {"Authorization": north}
    for tag in (etag, f"W/{etag}", f'"0-c", {etag}', "*", '"0-c"', "nonsense", etag.strip('"')):
        yield "GET", path, {"Authorization": reader, "If-None-Match": tag}
    yield "GET", path, {}
    yield "GET", path, {"Authorization": reader[:-1]}
    yield "GET", path, {"Authorization": "Bearer "}
    yield "GET", path, {"Authorization": f"Basic {ask.keys['reader']}"}
    yield "GET", path, {"Authorization": reader, "X-API-Key": ask.keys["auditor"]}
    yield "GET", path, {"Authorization": reader, "X-API-Key": ask.keys["reader"]}
    yield "GET", f"/v1/rooms/{foreign}/status", {"Authorization": north}
    yield "GET", f"/v1/rooms/{foreign}/status", {"Authorization": reader}
    yield "GET", f"/v1/rooms/{'x' * 36}/status", {"Authorization": reader}
    yield "GET", f"/v1/rooms/{own.upper()}/status", {"Authorization": reader}
    yield "GET", f"/v1/rooms/{own}/status/", {"Authorization": reader}
    yield "GET", f"/v1/rooms/{own}%2Fstatus", {"Authorization": reader}
    yield "GET", f"{path}?at_least=1", {"Authorization": reader}
    yield "GET", f"{path}?colour=red", {"Authorization": reader}
    yield "HEAD", path, {"Authorization": reader}
    yield "POST", path, {"Authorization": reader}
    yield "DELETE", path, {"Authorization": reader}


def seen(answer):
    headers = {name: value for name, value in answer.headers.items() if name != "x-request-id"}
    assert len(answer.headers["X-Request-Id"]) >= 8
    return answer.status_code, dict(sorted(headers.items())), answer.content


@pytest.mark.parametrize("named", [{}, REQUEST_ID], ids=["unnamed", "named"])
def test_each_request_gets_the_same_answer_from_the_layer_and_from_the_route(
    ask, route, estate, named
):
    statuses = set()
    for method, path, headers in requests(ask, estate):
        by_layer = ask.client.request(method, path, headers=headers | named)
        by_route = route.request(method, path, headers=headers | REQUEST_ID)
        if by_layer.status_code < 400 or named:
            assert seen(by_layer) == seen(by_route), (method, path, headers)
        if named:
            assert by_layer.headers["X-Request-Id"] == REQUEST_ID["X-Request-Id"]
        assert by_layer.status_code == by_route.status_code
        statuses.add(by_layer.status_code)
    assert statuses == {200, 304, 401, 404, 405, 422}


def test_a_poll_of_a_room_in_memory_asks_neither_framework_nor_database(
    ask_one, estate_of_one, monkeypatch
):
    path = f"/v1/rooms/{estate_of_one.north.room['id']}/status"
    first = ask_one("GET", path, key="reader")

    def nobody(*_arguments):
        raise AssertionError("The database was asked.")

    monkeypatch.setattr(ask_one.service.database, "read", nobody)
    monkeypatch.setattr(ask_one.app.router, "handle", nobody)
    again = ask_one("GET", path, key="reader")
    assert (again.status_code, again.content) == (200, first.content)
    known = ask_one("GET", path, key="reader", headers={"If-None-Match": first.headers["ETag"]})
    assert (known.status_code, known.content) == (304, b"")


def test_a_status_is_as_its_schema_says_and_its_tag_moves_with_the_room(ask, estate):
    room = estate.north.room["id"]
    path = f"/v1/rooms/{room}/status"
    before = ask("GET", path, key="reader")
    StatusRead.model_validate(before.json())
    assert before.json()["currency"] == "current"
    assert before.json()["judges"] == "records, not the air"
    assert before.headers["ETag"] == f'"{before.json()["position"]}-c"'
    written = ask("PATCH", f"/v1/vessels/{estate.north.vessel['id']}", {"capacity_l": 80}).json()
    after = ask("GET", path, key="reader", headers={"If-None-Match": before.headers["ETag"]})
    assert after.status_code == 200
    assert after.json()["position"] == written["position"]


@pytest.mark.postgresql
def test_a_poll_never_misses_what_another_replica_has_written(postgresql_estate, started):
    url, made = postgresql_estate
    one, other = started(url, made.ask.keys), started(url, made.ask.keys)
    path = f"/v1/rooms/{made.north.room['id']}/status"
    for litres in (60, 70, 80):
        assert other("GET", path).status_code == 200
        written = one(
            "PATCH", f"/v1/vessels/{made.north.vessel['id']}", {"capacity_l": litres}
        ).json()
        assert other.body(path)["position"] == written["position"]
    key = one("POST", "/v1/keys", {"holder": "a visitor", "role": "reader"}).json()
    assert other("GET", path, key=key["key"]).status_code == 200
    one("POST", f"/v1/keys/{key['id']}/revoke", {})
    assert other("GET", path, key=key["key"]).status_code == 401


def test_a_poll_can_wait_for_the_position_of_a_write(ask, estate):
    path = f"/v1/rooms/{estate.north.room['id']}/status"
    written = ask("PATCH", f"/v1/vessels/{estate.north.vessel['id']}", {"capacity_l": 81}).json()
    answer = ask.body(f"{path}?at_least={written['position']}", key="reader")
    assert answer["position"] == written["position"]
    assert ask("GET", f"{path}?at_least=-1").status_code == 422
    assert ask("GET", f"{path}?at_least=1e3").status_code == 422


def test_a_poll_of_the_past_gives_the_bytes_of_then(ask, estate):
    room, vessel = estate.north.room["id"], estate.north.vessel["id"]
    path = f"/v1/rooms/{room}/status"
    then = ask("GET", path)
    moment = ask.clock.advance(timedelta(minutes=1)).isoformat().replace("+00:00", "Z")
    ask.clock.advance(timedelta(minutes=1))
    ask("PATCH", f"/v1/vessels/{vessel}", {"capacity_l": 500})
    assert ask("GET", path).content != then.content
    past = ask("GET", path, params={"as_of": moment}, key="auditor")
    assert past.content == then.content
    assessment = ask("GET", f"/v1/rooms/{room}/assessment", params={"as_of": moment}).json()
    assert assessment["position"] == then.json()["position"]
    record = ask("GET", f"/v1/vessels/{vessel}", params={"as_of": moment}).json()
    assert record["capacity_l"] == estate.north.vessel["capacity_l"]
    early = ask("GET", path, params={"as_of": "2020-01-01T00:00:00Z"})
    assert early.json()["type"].endswith("#as-of-too-early")
    for wrong in ("2030-01-01T00:00:00Z", "yesterday", "2027-03-01T08:00:00"):
        answer = ask("GET", path, params={"as_of": wrong})
        assert answer.status_code == 422
        assert answer.json()["errors"][0]["parameter"] == "as_of"


def test_a_room_that_is_gone_is_found_in_the_past_alone(ask, estate):
    room = ask.made("rooms", a_room(estate.north.site, "GONE"))
    moment = ask.clock.advance(timedelta(minutes=1)).isoformat().replace("+00:00", "Z")
    ask.clock.advance(timedelta(minutes=1))
    assert ask("DELETE", f"/v1/rooms/{room['id']}").status_code == 200
    for path in ("", "/status", "/assessment"):
        now = ask("GET", f"/v1/rooms/{room['id']}{path}")
        assert now.status_code == 404
        then = ask("GET", f"/v1/rooms/{room['id']}{path}", params={"as_of": moment})
        assert then.status_code == 200, then.text
        assert then.json()["tag"] == "GONE"


def test_the_assessment_holds_the_status_and_the_cautions(ask, estate):
    room = estate.north.room["id"]
    status = ask.body(f"/v1/rooms/{room}/status", key="reader")
    assessment = ask.body(f"/v1/rooms/{room}/assessment", key="reader")
    for name in status.keys() - {"findings"}:
        assert assessment[name] == status[name], name
    assert "screening calculations" in assessment["cautions"]
    read = {(record["kind"], record["id"]) for record in assessment["inputs"]}
    for kind in ("room", "vessel", "detector", "ventilation-unit"):
        assert (kind, estate.north.record(kind)["id"]) in read


def test_stored_statuses_hold_no_number_that_json_lacks(ask, estate):
    for place in (estate.north, estate.south):
        body = ask("GET", f"/v1/rooms/{place.room['id']}/status").content
        assert orjson.loads(body)["room_id"] == place.room["id"]
        assert b"NaN" not in body
