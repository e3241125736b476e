"""Writes that come twice, come together, or come from somebody who means no good."""

import json
import threading
from datetime import timedelta

import pytest

from service.store.answers import drop_old_answers
from service.store.history import changes_of
from service.store.scope import EVERYTHING
from tests.api.estate import BY_TEST, a_detector, a_room, a_vessel

# Idempotency.


def test_a_repeated_request_is_done_once_and_answered_alike(ask, estate):
    body = a_vessel(estate.north.room, "ONCE")
    headers = {"Idempotency-Key": '"order-4711"'}
    first = ask("POST", "/v1/vessels", body, headers=headers, key="recorder")
    again = ask("POST", "/v1/vessels", body, headers=headers, key="recorder")
    unquoted = {"Idempotency-Key": "order-4711"}
    bare = ask("POST", "/v1/vessels", body, headers=unquoted, key="recorder")
    assert first.status_code == 201
    for answer in (again, bare):
        assert (answer.status_code, answer.content) == (201, first.content)
        for name in ("ETag", "Location", "Content-Type"):
            assert answer.headers[name] == first.headers[name]
    assert len(ask.body("/v1/vessels?tag=ONCE")["items"]) == 1


def test_another_request_under_the_same_key_is_refused(ask_one, estate_of_one):
    room, headers = estate_of_one.north.room, {"Idempotency-Key": "order-1"}
    assert ask_one("POST", "/v1/vessels", a_vessel(room, "A1"), headers=headers).is_success
    other = ask_one("POST", "/v1/vessels", a_vessel(room, "A2"), headers=headers)
    assert other.status_code == 422
    assert other.json()["type"].endswith("#idempotency-mismatch")
    # Another path, and another caller, have keys of their own.
    assert ask_one("POST", "/v1/detectors", a_detector(room, "A3"), headers=headers).is_success
    mine = ask_one("POST", "/v1/vessels", a_vessel(room, "A4"), headers=headers, key="recorder")
    assert mine.status_code == 201


def test_a_refused_request_may_be_mended_under_the_same_key(ask_one, estate_of_one):
    room, headers = estate_of_one.north.room, {"Idempotency-Key": "order-2"}
    refused = ask_one("POST", "/v1/vessels", a_vessel(room, "NORTH-DEW"), headers=headers)
    assert refused.status_code == 409
    assert ask_one("POST", "/v1/vessels", a_vessel(room, "B2"), headers=headers).is_success


def test_a_secret_is_not_kept_and_a_repeat_says_so(ask):
    body, headers = {"holder": "a board", "role": "reader"}, {"Idempotency-Key": "key-1"}
    first = ask("POST", "/v1/keys", body, headers=headers)
    again = ask("POST", "/v1/keys", body, headers=headers)
    assert first.status_code == 201
    assert again.status_code == 409
    assert again.json()["type"].endswith("#secret-shown-once")
    assert first.json()["key"] not in again.text
    assert sum(key["holder"] == "a board" for key in ask.body("/v1/keys")["items"]) == 1


def test_the_same_request_at_the_same_time_is_done_once(ask, estate):
    body, headers = a_vessel(estate.north.room, "RACE"), {"Idempotency-Key": "race-1"}
    start = threading.Barrier(6)
    answers = []

    def send():
        start.wait()
        answers.append(ask("POST", "/v1/vessels", body, headers=headers))

    threads = [threading.Thread(target=send) for _ in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    done = [answer for answer in answers if answer.status_code == 201]
    running = [answer for answer in answers if answer.status_code == 409]
    assert len(done) + len(running) == 6
    assert len({answer.content for answer in done}) == 1
    assert all(answer.json()["type"].endswith("#idempotency-running") for answer in running)
    assert len(ask.body("/v1/vessels?tag=RACE")["items"]) == 1


@pytest.mark.postgresql
def test_the_same_request_to_two_replicas_is_done_once(postgresql_estate, started):
    url, made = postgresql_estate
    replicas = [started(url, made.ask.keys) for _ in range(2)]
    body, headers = a_vessel(made.north.room, "RACE"), {"Idempotency-Key": "race-2"}
    start = threading.Barrier(2)
    answers = []

    def send(ask):
        start.wait()
        answers.append(ask("POST", "/v1/vessels", body, headers=headers))

    threads = [threading.Thread(target=send, args=(ask,)) for ask in replicas]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert [answer.status_code for answer in answers] == [201, 201]
    assert answers[0].content == answers[1].content
    assert len(replicas[0].body("/v1/vessels?tag=RACE")["items"]) == 1


# Several changes together.


def test_a_room_and_what_stands_in_it_are_made_at_once_and_judged_once(ask, estate):
    site = estate.north.site
    vessel = {**a_vessel(estate.north.room, "D-1"), "site_id": site["id"], "room": "NEW"}
    del vessel["room_id"]
    detector = {**a_detector(estate.north.room, "O-1"), "site_id": site["id"], "room": "NEW"}
    del detector["room_id"]
    changes = [
        {"op": "create", "kind": "room", "fields": a_room(site, "NEW")},
        {"op": "create", "kind": "vessel", "fields": vessel | {"capacity_l": "20 gal"}},
        {"op": "create", "kind": "detector", "fields": detector},
        {"op": "remove", "kind": "detector", "id": estate.north.detector["id"]},
    ]
    before = ask.body(f"/v1/rooms/{estate.north.room['id']}/status")["position"]
    answer = ask("POST", "/v1/changes", {"changes": changes}, key="recorder")
    assert answer.status_code == 200, answer.text
    done = answer.json()
    assert [item["revision"] for item in done["items"][:3]] == [1, 1, 1]
    assert done["items"][1]["record"]["room_id"] == done["items"][0]["id"]
    assert done["items"][3]["record"] is None
    assert done["positions"] == {site["id"]: before + 1} or len(done["positions"]) == 1
    rooms = [effect["room_id"] for effect in done["effects"]]
    assert sorted(rooms) == sorted({done["items"][0]["id"], estate.north.room["id"]})
    assert done["read_as"][0]["pointer"] == "/changes/1/fields/capacity_l"


def test_one_bad_change_undoes_all_and_is_pointed_at(ask, estate):
    room = estate.north.room
    good = {"op": "create", "kind": "vessel", "fields": a_vessel(room, "GOOD")}
    too_full = {"op": "create", "kind": "vessel", "fields": a_vessel(room, "BAD", contents_l=90)}
    answer = ask("POST", "/v1/changes", {"changes": [good, too_full]})
    assert answer.status_code == 422
    assert answer.json()["errors"][0]["pointer"] == "/changes/1/fields/contents_l"
    assert ask.body("/v1/vessels?tag=GOOD")["items"] == []
    alone = ask("POST", "/v1/changes", {"changes": [too_full]})
    assert alone.json()["errors"][0]["pointer"] == "/changes/0/fields/contents_l"


def test_bad_fields_of_several_changes_are_told_together(ask_one, estate_of_one):
    room = estate_of_one.north.room
    changes = [
        {"op": "create", "kind": "vessel", "fields": a_vessel(room, "X", capacity_l=-1)},
        {"op": "change", "kind": "vessel", "id": estate_of_one.north.vessel["id"],
         "fields": {"kind": None}},
        {"op": "create", "kind": "vessel", "id": estate_of_one.north.vessel["id"], "fields": {}},
        {"op": "change", "kind": "room", "fields": {}},
        {"op": "remove", "kind": "room", "id": room["id"], "fields": {"name": "x"}},
    ]  # fmt: skip
    answer = ask_one("POST", "/v1/changes", {"changes": changes})
    assert answer.status_code == 422
    assert [error["pointer"] for error in answer.json()["errors"]] == [
        "/changes/0/fields/capacity_l",
        "/changes/1/fields/kind",
        "/changes/2/id",
        "/changes/3/id",
        "/changes/4/fields",
    ]


def test_changes_are_refused_where_one_record_has_moved(ask, estate):
    vessel, room = estate.north.vessel, estate.north.room
    ask("PATCH", f"/v1/vessels/{vessel['id']}", {"contents_l": 1})
    changes = [
        {"op": "create", "kind": "vessel", "fields": a_vessel(room, "Y")},
        {"op": "change", "kind": "vessel", "id": vessel["id"], "if_revision": 1,
         "fields": {"contents_l": 2}},
    ]  # fmt: skip
    assert ask("POST", "/v1/changes", {"changes": changes}).status_code == 412
    assert ask.body("/v1/vessels?tag=Y")["items"] == []


def test_at_most_a_hundred_changes_go_together(ask_one, estate_of_one):
    site = estate_of_one.north.site
    changes = [
        {"op": "create", "kind": "room", "fields": a_room(site, f"M-{n}")} for n in range(101)
    ]
    assert ask_one("POST", "/v1/changes", {"changes": changes}).status_code == 422
    assert ask_one("POST", "/v1/changes", {"changes": []}).status_code == 422
    assert ask_one("POST", "/v1/changes", {"changes": changes[:100]}).status_code == 200


# What is said about a write.


def test_reason_and_stated_moment_are_kept_with_the_change(ask, estate):
    site = estate.north.site["id"]
    answer = ask(
        "PATCH",
        f"/v1/vessels/{estate.north.vessel['id']}",
        {"contents_l": 3},
        headers={
            "Change-Reason": "UTF-8''gef%C3%BCllt",
            "Change-Stated-At": "2027-03-01T06:30:00+01:00",
            "X-Request-Id": "delivery-0815",
        },
    )
    position = answer.json()["position"]
    (entry,) = ask.service.database.read(
        lambda c: changes_of(EVERYTHING, c, site, after=position - 1, limit=10)
    )
    assert (entry.reason, entry.request_id) == ("gefüllt", "delivery-0815")
    assert entry.stated_at.isoformat() == "2027-03-01T05:30:00+00:00"
    assert entry.key_id is not None


@pytest.mark.parametrize(
    ("header", "value"),
    [
        ("If-Match", "7"),
        ("Idempotency-Key", "a b"),
        ("Change-Stated-At", "2028-01-01T00:00:00Z"),
        ("Change-Stated-At", "today"),
        ("Change-Reason", "x" * 501),
    ],
)
def test_a_header_that_cannot_be_read_is_named(ask_one, estate_of_one, header, value):
    path = f"/v1/vessels/{estate_of_one.north.vessel['id']}"
    answer = ask_one("PATCH", path, {"contents_l": 3}, headers={header: value})
    assert answer.status_code == 400
    assert answer.json()["errors"][0]["parameter"] == header
    assert ask_one.body(path)["contents_l"] is None


# Hostile bodies.

HOSTILE = {
    "no-json": b"{",
    "empty": b"",
    "not-utf-8": b'{"tag": "\xff"}',
    "nan": b'{"tag": "H", "egress_m": NaN}',
    "infinity": b'{"tag": "H", "egress_m": -Infinity}',
    "too-large": b'{"tag": "H", "egress_m": 1e400}',
    "long-integer": b'{"tag": "H", "people": {"most": 123456789012345678901234567890}}',
    "surrogate": b'{"tag": "H", "name": "\\ud800"}',
    "null-character": b'{"tag": "H", "name": "a\\u0000b"}',
    "bidirectional": '{"tag": "H\u202e"}'.encode(),
    "twice": b'{"tag": "H", "tag": "I"}',
    "deep": b'{"tag": ' + b"[" * 5000 + b"]" * 5000 + b"}",
    "true-for-a-number": b'{"tag": "H", "egress_m": true}',
    "text-for-a-number": b'{"tag": "H", "egress_m": "7"}',
    "number-for-a-text": b'{"tag": 7}',
    "unknown-field": b'{"tag": "H", "colour": "red"}',
    "list": b"[]",
    "text": b'"room"',
    "number": b"7",
    "null": b"null",
    "negative": b'{"tag": "H", "egress_m": -1}',
    "other-unit": b'{"tag": "H", "egress_m": "3 kg"}',
    "long-tag": b'{"tag": "' + b"H" * 100 + b'"}',
    "blank-tag": b'{"tag": " "}',
    "unknown-kind": b'{"tag": "H", "kind": "attic"}',
    "too-many-labels": json.dumps(
        {"tag": "H", "labels": dict.fromkeys(map(str, range(21)), "x")}
    ).encode(),
    "bad-label-name": b'{"tag": "H", "labels": {"$[0]": "x"}}',
    "own-id": b'{"tag": "H", "id": "01890a5d-ac96-774b-bcce-b302099a8057", "revision": 9}',
}


@pytest.mark.parametrize("name", list(HOSTILE))
@pytest.mark.parametrize("method", ["POST", "PATCH"])
def test_a_hostile_body_is_a_problem_with_pointers_and_stores_nothing(
    ask_one, estate_of_one, name, method
):
    room = estate_of_one.north.room
    before = ask_one.body("/v1/rooms?total=true")
    path = "/v1/rooms" if method == "POST" else f"/v1/rooms/{room['id']}"
    body = HOSTILE[name]
    if method == "POST" and body.startswith(b'{"tag"') and name != "own-id":
        body = b'{"site_id": "' + room["site_id"].encode() + b'", "volume_m3": 50, ' + body[1:]
    answer = ask_one(method, path, content=body, headers={"Content-Type": "application/json"})
    assert answer.status_code in (400, 422), answer.text
    assert answer.headers["Content-Type"] == "application/problem+json"
    errors = answer.json()["errors"]
    assert errors
    assert all(error["pointer"].startswith("/") or not error["pointer"] for error in errors)
    assert ask_one.body("/v1/rooms?total=true") == before


@pytest.mark.parametrize(
    ("headers", "status"),
    [
        ({"Content-Type": "text/plain"}, 415),
        ({}, 415),
        ({"Content-Type": "application/json", "Content-Encoding": "gzip"}, 415),
        ({"Content-Type": "application/json; charset=latin-1"}, 415),
    ],
)
def test_a_body_in_another_form_is_refused(ask_one, headers, status):
    answer = ask_one("POST", "/v1/rooms", content=b'{"tag": "F"}', headers=headers)
    assert answer.status_code == status
    assert answer.headers["Content-Type"] == "application/problem+json"


def test_a_body_that_is_too_large_is_refused_with_a_problem(ask_one):
    answer = ask_one(
        "POST",
        "/v1/rooms",
        content=b'{"notes": "' + b"x" * 1_000_000 + b'"}',
        headers={"Content-Type": "application/json"},
    )
    assert answer.status_code == 413
    assert answer.json()["type"].endswith("#body-too-large")


def test_a_path_or_method_that_is_not_there_is_a_problem(ask_one, estate_of_one):
    lost = ask_one("GET", "/v1/attics")
    assert (lost.status_code, lost.json()["type"]) == (404, "/docs/problems#path-not-found")
    room = estate_of_one.north.room["id"]
    refused = ask_one("PUT", f"/v1/rooms/{room}", {})
    assert refused.status_code == 405
    assert set(refused.headers["Allow"].split(", ")) == {"GET", "HEAD", "PATCH", "DELETE"}


def test_a_write_too_old_to_repeat_is_done_anew(ask_one, estate_of_one):
    room, headers = estate_of_one.north.room, {"Idempotency-Key": "order-3"}
    assert ask_one("POST", "/v1/vessels", a_vessel(room, "C1"), headers=headers).is_success
    ask_one.clock.advance(timedelta(days=2))
    writer, moment = ask_one.service.writer, ask_one.clock.now()
    writer.run_now(lambda session: drop_old_answers(session, moment), BY_TEST)
    assert ask_one("POST", "/v1/vessels", a_vessel(room, "C2"), headers=headers).is_success
