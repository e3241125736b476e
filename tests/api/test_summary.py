"""The summary: counts that add up, the worst first, and nothing of another site."""

from datetime import timedelta

import pytest

from service.api.kept import KeptBodies
from service.api.routes import summary as route
from service.api.schemas.summary import SummaryRead
from service.clock import moment_of
from tests.api.estate import a_room, a_vessel_in


@pytest.fixture
def crowded(ask, estate):
    """A small room with a large dewar, a guarded one, and one that is only planned."""
    ask.made_at_once(
        change
        for tag, litres, fields in (
            ("BAD", 200, {}),
            ("MILD", 1, {}),
            ("LATER", 200, {"state": "planned"}),
        )
        for change in (
            ("room", a_room(estate.north.site, tag, **fields)),
            ("vessel", a_vessel_in(estate.north.site, tag, f"V-{tag}", capacity_l=litres)),
        )
    )
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
    assert ask("GET", "/v1/summary").content == second.content


def test_a_summary_is_made_once_for_whoever_may_see_the_same(ask, crowded, monkeypatch):
    made, summing = [], route.summary_document

    def counted(scope, *arguments, **options):
        made.append(scope.key_id)
        return summing(scope, *arguments, **options)

    monkeypatch.setattr(route, "summary_document", counted)
    first = ask("GET", "/v1/summary", key="reader")
    second = ask("GET", "/v1/summary", key="auditor")
    assert (first.content, first.headers["etag"]) == (second.content, second.headers["etag"])
    tag = {"If-None-Match": first.headers["etag"]}
    assert ask("GET", "/v1/summary", headers=tag).status_code == 304
    assert len(made) == 1
    other = ask("GET", "/v1/summary", key=crowded.keys["reader"])
    assert other.headers["etag"] != first.headers["etag"]
    assert ask("GET", "/v1/summary?worst=1").headers["etag"] != first.headers["etag"]
    assert len(made) == 3


def test_bodies_are_kept_up_to_a_size_and_the_one_unasked_for_longest_goes_first():
    kept = KeptBodies(limit_bytes=10)
    kept.put("a", b"aaaa")
    kept.put("b", b"bbbb")
    assert kept.get("a") == b"aaaa"
    kept.put("c", b"cccc")
    assert [kept.get(tag) for tag in "abc"] == [b"aaaa", None, b"cccc"]
    kept.put("c", b"cc")
    assert kept.bytes_held == 6
    kept.put("d", b"d" * 11)
    assert (kept.get("d"), kept.bytes_held) == (None, 0)


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


def test_what_the_clock_has_passed_is_counted_as_behind_and_has_another_tag(ask, crowded):
    before = ask("GET", "/v1/summary")
    assert before.json()["total"]["currency"]["behind"] == 0
    tag = {"If-None-Match": before.headers["etag"]}
    statuses = [
        ask.body(f"/v1/rooms/{room['id']}/status")
        for room in ask.body("/v1/rooms?limit=500")["items"]
    ]
    first = min(moment_of(status["turns_at"]) for status in statuses if status["turns_at"])
    ask.clock.advance(first - timedelta(seconds=1) - ask.clock.now())
    assert ask("GET", "/v1/summary", headers=tag).status_code == 304
    ask.clock.advance(timedelta(seconds=1))
    after = ask("GET", "/v1/summary", headers=tag)
    assert after.status_code == 200
    behind = after.json()["total"]["currency"]["behind"]
    now = [ask.body(f"/v1/rooms/{status['room_id']}/status") for status in statuses]
    assert behind == sum(s["currency"] == "behind" and s["state"] == "in-service" for s in now)
    assert behind >= 1
