"""Findings over HTTP: listed, filtered, paged, and as they stood."""

from datetime import timedelta
from itertools import combinations

import pytest

from service.api.schemas.findings import FindingRead
from tests.api.estate import a_room, a_vessel, a_vessel_in


@pytest.fixture
def crowded(ask, estate):
    """Rooms with more findings than one page holds."""
    for number in range(4):
        site, tag = estate.north.site, f"F-{number}"
        ask.made_at_once(
            [
                ("room", a_room(site, tag, labels={"ward": str(number % 2)})),
                ("vessel", a_vessel_in(site, tag, tag, capacity_l=120)),
            ]
        )
        ask.clock.advance(timedelta(days=2))
    return estate


def every_page(ask, path, **options):
    found, answer = [], ask.body(path, **options)
    while True:
        found += answer["items"]
        if answer["next"] is None:
            return found
        answer = ask.body(f"{path}&cursor={answer['next']}", **options)


def test_an_unguarded_dewar_in_a_small_room_is_found_and_told_with_cautions(ask, estate):
    """A room of 57 m3 net with 120 L of nitrogen let go at once falls far below 19.5 % oxygen.

    A litre of liquid nitrogen makes about 0.69 m3 of gas at room conditions (densities 807 kg/m3 at
    its boiling point, 1.165 kg/m3 at 20 C and 101.325 kPa: common property tables, from memory).
    """
    room = ask.made("rooms", a_room(estate.north.site, "SMALL"))
    ask.made("vessels", a_vessel(room, "BIG", capacity_l=120))
    page = ask.body(f"/v1/findings?room_id={room['id']}&family=oxygen", key="reader")
    assert "screening calculations" in page["cautions"]
    worst = [finding for finding in page["items"] if finding["severity"] == "critical"]
    assert worst
    for finding in page["items"]:
        FindingRead.model_validate(finding)
        assert finding["room_id"] == room["id"]
        assert finding["statement"]
        assert ask.body(f"/v1/findings/{finding['id']}") == finding
    status = ask.body(f"/v1/rooms/{room['id']}/status")
    assert status["findings"]["critical"] == len(worst)


def test_findings_are_filtered(ask, crowded):
    everything = every_page(ask, "/v1/findings?limit=500")
    assert len(everything) > 8
    for name in ("room_id", "rule", "family", "severity", "state", "site_id"):
        value = everything[0][name]
        found = every_page(ask, f"/v1/findings?limit=500&{name}={value}")
        assert found == [finding for finding in everything if finding[name] == value]
    two = {"critical", "observation"}
    found = every_page(ask, "/v1/findings?limit=500&severity=critical,observation")
    assert found == [finding for finding in everything if finding["severity"] in two]
    rooms = {room["id"] for room in ask.body("/v1/rooms?label.ward=1")["items"]}
    found = every_page(ask, "/v1/findings?limit=500&label.ward=1")
    assert {finding["room_id"] for finding in found} == rooms
    counted = ask.body("/v1/findings?limit=1&total=true")
    assert counted["total"] == len(everything)
    assert every_page(ask, "/v1/findings?limit=500&site=NORTH") == [
        finding for finding in everything if finding["site_id"] == crowded.north.site["id"]
    ]


def test_findings_are_filtered_by_age(ask, crowded):
    now = ask.clock.now()
    everything = every_page(ask, "/v1/findings?limit=500")
    before = (now - timedelta(days=5)).isoformat()
    found = every_page(ask, "/v1/findings?limit=500&older_than_days=5")
    assert found == [finding for finding in everything if finding["opened_at"] < before]
    assert 0 < len(found) < len(everything)


def test_findings_are_filtered_by_the_moment_they_were_opened(ask, crowded):
    everything = every_page(ask, "/v1/findings?limit=500")
    middle = sorted(finding["opened_at"] for finding in everything)[len(everything) // 2]
    moment = middle.replace("+00:00", "Z")
    before = every_page(ask, f"/v1/findings?limit=500&opened_before={moment}")
    since = every_page(ask, f"/v1/findings?limit=500&opened_since={moment}")
    assert before == [finding for finding in everything if finding["opened_at"] < middle]
    assert since == [finding for finding in everything if finding["opened_at"] >= middle]
    assert before
    assert since
    # Of two that say how old, both hold.
    both = f"/v1/findings?limit=500&opened_before={moment}&older_than_days=0.000001"
    assert every_page(ask, both) == before
    then = ask.clock.now().isoformat().replace("+00:00", "Z")
    for asked, found in (("opened_before", before), ("opened_since", since)):
        past = f"/v1/findings?limit=500&{asked}={moment}&as_of={then}"
        assert every_page(ask, past) == found


@pytest.mark.parametrize(
    ("query", "parameter"),
    [
        ("severity=bad", "severity"),
        ("state=open,bad", "state"),
        ("older_than_days=nan", "older_than_days"),
        ("older_than_days=-1", "older_than_days"),
        ("older_than_days=", "older_than_days"),
        ("colour=red", "colour"),
        ("opened_before=2027-03-01", "opened_before"),
        ("opened_since=", "opened_since"),
        ("sort=evidence", "sort"),
    ],
)
def test_a_filter_that_means_nothing_is_named(ask_one, query, parameter):
    answer = ask_one("GET", f"/v1/findings?{query}")
    assert answer.status_code == 422
    assert answer.json()["errors"][0]["parameter"] == parameter


@pytest.mark.slow
def test_each_finding_is_on_one_page_now_and_in_the_past(ask, crowded):
    moment = ask.clock.now().isoformat().replace("+00:00", "Z")
    ask.clock.advance(timedelta(minutes=1))
    for sort in ("id", "-id", "severity", "-opened_at", "rule"):
        now = every_page(ask, f"/v1/findings?limit=500&sort={sort}")
        paged = every_page(ask, f"/v1/findings?limit=3&sort={sort}")
        assert paged == now
        path = f"/v1/findings?limit=3&sort={sort}&as_of={moment}"
        assert every_page(ask, path, key="auditor") == now


def test_a_cleared_finding_is_left_out_until_asked_for_and_stands_in_the_past(ask, estate):
    room = ask.made("rooms", a_room(estate.north.site, "SMALL"))
    vessel = ask.made("vessels", a_vessel(room, "BIG", capacity_l=120))
    path = f"/v1/findings?room_id={room['id']}&family=oxygen"
    before = ask.body(path)["items"]
    assert before
    moment = ask.clock.advance(timedelta(minutes=1)).isoformat().replace("+00:00", "Z")
    ask.clock.advance(timedelta(minutes=1))
    gone = ask("DELETE", f"/v1/vessels/{vessel['id']}").json()
    (effect,) = gone["effects"]
    cleared = {finding["id"] for finding in effect["findings"]["cleared"]}
    assert {finding["id"] for finding in before} <= cleared
    assert ask.body(path)["items"] == []
    kept = ask.body(f"{path}&state=cleared")["items"]
    assert {finding["id"] for finding in kept} == {finding["id"] for finding in before}
    then = ask.body(f"{path}&as_of={moment}", key="auditor")["items"]
    assert then == before
    one = ask.body(f"/v1/findings/{before[0]['id']}?as_of={moment}", key="auditor")
    assert one == before[0]
    early = ask("GET", f"/v1/findings/{before[0]['id']}?as_of=2020-01-01T00:00:00Z")
    assert early.status_code == 404


def test_findings_are_filtered_by_the_gas_the_subject_the_tag_of_the_room_and_the_age(ask, crowded):
    everything = every_page(ask, "/v1/findings?limit=500")
    first = everything[0]
    room = ask.body("/v1/rooms?tag=F-1")["items"][0]
    for asked, kept in (
        ("gas=oxygen", lambda finding: finding["gas"] == "oxygen"),
        (
            f"subject_id={first['subject']['id']}",
            lambda finding: finding["subject"]["id"] == first["subject"]["id"],
        ),
        ("room=f-1", lambda finding: finding["room_id"] == room["id"]),
        (f"room=F-1&site={crowded.north.site['tag']}", lambda f: f["room_id"] == room["id"]),
    ):
        found = every_page(ask, f"/v1/findings?limit=500&{asked}")
        assert found == [finding for finding in everything if kept(finding)]
        assert found
        now = ask.clock.now().isoformat().replace("+00:00", "Z")
        assert every_page(ask, f"/v1/findings?limit=500&{asked}&as_of={now}") == found
    assert ask.body("/v1/findings?room=NONE")["items"] == []
    # The four rooms were made two days apart, and nothing has turned since.
    young = every_page(ask, "/v1/findings?limit=500&newer_than_days=3&room=F-3")
    assert young == every_page(ask, "/v1/findings?limit=500&room=F-3")
    assert ask.body("/v1/findings?newer_than_days=1&room=F-0")["items"] == []
    assert ask("GET", "/v1/findings?newer_than_days=x").status_code == 422


@pytest.mark.slow
def test_filters_hold_together_two_by_two_now_and_in_the_past(ask, crowded):
    """What matches two filters matches each of them, by a look at every finding."""
    states = "open,acknowledged,accepted,cleared"
    everything = every_page(ask, f"/v1/findings?limit=500&state={states}")
    north, room = crowded.north.site, ask.body("/v1/rooms?tag=F-1")["items"][0]
    ward = {one["id"] for one in ask.body("/v1/rooms?label.ward=1")["items"]}
    ours = [finding for finding in everything if finding["room_id"] == room["id"]]
    subject = next(f["subject"]["id"] for f in ours if f["subject"]["kind"] == "vessel")
    moment = ours[0]["opened_at"]
    five, three = (
        (ask.clock.now() - timedelta(days=days)).isoformat(timespec="microseconds")[:26] + "Z"
        for days in (5, 3)
    )
    filters = {
        f"site_id={north['id']}": lambda f: f["site_id"] == north["id"],
        f"site={north['tag']}": lambda f: f["site_id"] == north["id"],
        f"room_id={room['id']}": lambda f: f["room_id"] == room["id"],
        "room=F-1": lambda f: f["room_id"] == room["id"],
        "rule=oxygen/largest-vessel": lambda f: f["rule"] == "oxygen/largest-vessel",
        "family=oxygen": lambda f: f["family"] == "oxygen",
        "severity=critical,minor": lambda f: f["severity"] in ("critical", "minor"),
        "state=open,cleared": lambda f: f["state"] in ("open", "cleared"),
        "gas=oxygen": lambda f: f["gas"] == "oxygen",
        f"subject_id={subject}": lambda f: f["subject"]["id"] == subject,
        "label.ward=1": lambda f: f["room_id"] in ward,
        f"opened_before={three}": lambda f: f["opened_at"] < three,
        f"opened_since={moment}": lambda f: f["opened_at"] >= moment,
        "older_than_days=5": lambda f: f["opened_at"] < five,
        "newer_than_days=5": lambda f: f["opened_at"] >= five,
    }
    now = ask.clock.now().isoformat().replace("+00:00", "Z")
    met = 0

    def matching(*asked):
        # What is cleared is left out until a state is asked for.
        states_asked = any(one.startswith("state=") for one in asked)
        return [
            finding
            for finding in everything
            if (states_asked or finding["state"] != "cleared")
            and all(filters[one](finding) for one in asked)
        ]

    for one, other in combinations(filters, 2):
        kept = matching(one, other)
        met += bool(kept)
        for past in ("", f"&as_of={now}"):
            answer = ask.body(f"/v1/findings?limit=500&total=true&{one}&{other}{past}")
            assert answer["items"] == kept, (one, other, past)
            assert answer["total"] == len(kept)
    for asked in filters:
        kept = matching(asked)
        assert kept, asked
        assert every_page(ask, f"/v1/findings?limit=500&{asked}") == kept
    assert any(finding["state"] == "cleared" for finding in everything)
    assert met > len(filters)


def test_tags_and_labels_of_the_past_are_those_of_then(ask, crowded):
    site, room = crowded.north.site, ask.body("/v1/rooms?tag=F-1")["items"][0]
    path = "/v1/findings?limit=500"
    before = every_page(ask, f"{path}&room=F-1")
    assert before
    moment = ask.clock.advance(timedelta(minutes=1)).isoformat().replace("+00:00", "Z")
    ask.clock.advance(timedelta(minutes=1))
    changed = {"tag": "RENAMED", "labels": {"ward": None}}
    assert ask("PATCH", f"/v1/rooms/{room['id']}", changed).status_code == 200
    assert ask("PATCH", f"/v1/sites/{site['id']}", {"tag": "ELSEWHERE"}).status_code == 200
    for asked in ("room=F-1", "site=NORTH", f"room_id={room['id']}&label.ward=1"):
        assert every_page(ask, f"{path}&{asked}") == []
    assert every_page(ask, f"{path}&room=F-1&site=NORTH&as_of={moment}") == before
    assert every_page(ask, f"{path}&room_id={room['id']}&label.ward=1&as_of={moment}") == before
    for asked in ("room=RENAMED", "site=ELSEWHERE", f"room_id={room['id']}&label.ward="):
        assert every_page(ask, f"{path}&{asked}")
        assert every_page(ask, f"{path}&{asked}&as_of={moment}") == []


def test_a_filter_without_a_value_asks_for_what_has_none(ask, estate):
    for asked in ("room=", "site="):
        assert ask.body(f"/v1/findings?{asked}&total=true")["total"] == 0
    without = every_page(ask, "/v1/findings?limit=500&gas=")
    everything = every_page(ask, "/v1/findings?limit=500")
    assert without == [finding for finding in everything if finding["gas"] is None]
    assert without


def test_what_a_finding_was_is_told_version_by_version(ask, estate):
    room = ask.made("rooms", a_room(estate.north.site, "SMALL"))
    vessel = ask.made("vessels", a_vessel(room, "BIG", capacity_l=60))
    (finding,) = ask.body(f"/v1/findings?room_id={room['id']}&rule=oxygen/largest-vessel")["items"]
    # A vessel of 2 L of liquid makes some 1.4 m3 of gas at most: 57 m3 keep 20.4 % of oxygen.
    for litres in (50, 40, 2):
        ask.clock.advance(timedelta(minutes=1))
        changed = ask("PATCH", f"/v1/vessels/{vessel['id']}", {"capacity_l": litres})
        assert changed.status_code == 200
    path = f"/v1/findings/{finding['id']}/versions?limit=2"
    versions = every_page(ask, path, key="auditor")
    assert versions[0] == finding
    assert [version["number"] for version in versions] == [1, 2, 3, 4]
    assert [version["state"] for version in versions] == ["open", "open", "open", "cleared"]
    measures = [version["measure"] for version in versions[:3]]
    # Less liquid, more oxygen left.
    assert measures == sorted(set(measures))
    assert versions[-1] == ask.body(f"/v1/findings/{finding['id']}")
    assert every_page(ask, f"{path}&sort=-number", key="auditor") == versions[::-1]
    assert ask.body(f"{path}&total=true")["total"] == 4
    for key in ("reader", "recorder"):
        assert ask("GET", path, key=key).status_code == 403
    assert ask("GET", f"{path}&label.ward=1").status_code == 422
    assert ask("GET", "/v1/findings/nonsense/versions").status_code == 404
