"""The summary: counts that add up, the worst first, and nothing of another site."""

import pytest

from service.api.schemas.summary import SummaryRead
from tests.api.estate import a_room, a_vessel


@pytest.fixture
def crowded(ask, estate):
    """A small room with a large dewar, a guarded one, and one that is only planned."""
    for tag, litres, fields in (
        ("BAD", 200, {}),
        ("MILD", 1, {}),
        ("LATER", 200, {"state": "planned"}),
    ):
        room = ask.made("rooms", a_room(estate.north.site, tag, **fields))
        ask.made("vessels", a_vessel(room, f"V-{tag}", capacity_l=litres))
    return estate


def test_the_counts_of_sites_add_up_to_the_total_and_to_what_the_rooms_say(ask, crowded):
    body = ask.body("/v1/summary", key="reader")
    SummaryRead.model_validate(body)
    for part in ("rooms", "standing", "currency"):
        for name, count in body["total"][part].items():
            assert count == sum(site[part][name] for site in body["sites"])
    rooms = ask.body("/v1/rooms?limit=500")["items"]
    in_service = [room for room in rooms if room["state"] == "in-service"]
    assert body["total"]["rooms"]["in-service"] == len(in_service)
    assert body["total"]["rooms"]["planned"] == 1
    standings = [ask.body(f"/v1/rooms/{room['id']}/status")["standing"] for room in in_service]
    assert body["total"]["standing"] == {
        name: standings.count(name) for name in ("in-order", "attention", "action", "stop")
    }
    ids = {room["id"] for room in in_service}
    findings = [f for f in ask.body("/v1/findings?limit=500")["items"] if f["room_id"] in ids]
    for severity in ("critical", "major", "minor", "observation"):
        counted = sum(finding["severity"] == severity for finding in findings)
        assert body["total"]["findings"][severity] == counted
    assert "screening calculations" in body["cautions"]


def test_the_worst_room_comes_first_with_the_finding_that_makes_it_so(ask, crowded):
    worst = ask.body("/v1/summary")["worst_rooms"]
    assert worst[0]["tag"] == "BAD"
    assert worst[0]["standing"] == "stop"
    assert worst[0]["finding"]["severity"] == "critical"
    assert worst[0]["finding"]["rule"].startswith("oxygen/")
    assert "LATER" not in [room["tag"] for room in worst]
    assert ask.body("/v1/summary?worst=1")["worst_rooms"] == worst[:1]
    assert ask.body("/v1/summary?worst=0")["worst_rooms"] == []


def test_a_poll_of_the_summary_is_told_that_nothing_has_changed_until_something_does(ask, crowded):
    first = ask("GET", "/v1/summary")
    tag = {"If-None-Match": first.headers["etag"]}
    assert ask("GET", "/v1/summary", headers=tag).status_code == 304
    room = ask.body("/v1/summary")["worst_rooms"][0]["room_id"]
    assert ask("PATCH", f"/v1/rooms/{room}", {"state": "out-of-service"}).status_code == 200
    second = ask("GET", "/v1/summary", headers=tag)
    assert second.status_code == 200
    assert second.json()["total"]["rooms"]["out-of-service"] == 1


def test_one_site_is_summed_up_by_its_tag_or_its_id(ask, crowded):
    site = crowded.north.site
    by_tag = ask.body(f"/v1/summary?site={site['tag']}")
    assert by_tag == ask.body(f"/v1/summary?site_id={site['id']}")
    assert [each["tag"] for each in by_tag["sites"]] == [site["tag"]]
    assert by_tag["total"]["rooms"] == by_tag["sites"][0]["rooms"]
    for asked in ("site=NOWHERE", f"site=NOWHERE&site_id={site['id']}", "site_id=x"):
        assert ask("GET", f"/v1/summary?{asked}").status_code == 404
    assert ask("GET", "/v1/summary?worst=-1").status_code == 422


def test_a_key_of_one_site_hears_of_no_other(ask, crowded):
    key = ask.key("reader", sites=[crowded.north.site["id"]])
    south = crowded.south.site
    answer = ask("GET", "/v1/summary", key=key)
    assert [site["tag"] for site in answer.json()["sites"]] == [crowded.north.site["tag"]]
    assert south["id"] not in answer.text
    assert {room["site_id"] for room in answer.json()["worst_rooms"]} == {crowded.north.site["id"]}
    assert ask("GET", f"/v1/summary?site={south['tag']}", key=key).status_code == 404


def test_what_the_clock_has_passed_is_counted_as_behind(ask, crowded):
    assert ask.body("/v1/summary")["total"]["currency"]["behind"] == 0
    turns = [
        status["turns_at"]
        for room in ask.body("/v1/rooms?limit=500")["items"]
        if (status := ask.body(f"/v1/rooms/{room['id']}/status"))["turns_at"]
    ]
    if not turns:
        room = ask.body("/v1/rooms?limit=1")["items"][0]
        ask("PATCH", f"/v1/rooms/{room['id']}", {"name": "again"})
    from service.clock import moment_of

    ask.clock.advance(moment_of(min(turns)) - ask.clock.now())
    assert ask.body("/v1/summary")["total"]["currency"]["behind"] >= 1
