"""What runs by itself: the clock, the sweep, and what keeps a job going."""

import asyncio
import logging
from datetime import timedelta

import pytest

from service.store.history import changes_of
from service.store.scope import EVERYTHING
from service.work.clock import run_clock_once
from service.work.repeat import repeat
from service.work.sweep import run_sweep_once
from service.work.upkeep import run_upkeep_once
from tests.api.estate import a_room, a_vessel

# The detector of the estate was calibrated on 15 January 2027, for 180 days: due until 14 July.
JUST_BEFORE = timedelta(days=120)
WELL_AFTER = timedelta(days=140)


def clocked(ask):
    service = ask.service
    return asyncio.run(run_clock_once(service.writer, service.database, service.clock))


def swept(ask, batch=50):
    return asyncio.run(run_sweep_once(ask.service.writer, ask.service.database, batch))


def changes(ask, site, after=0):
    return ask.service.database.read(
        lambda c: changes_of(EVERYTHING, c, site["id"], after=after, limit=500)
    )


def polled(ask, room):
    return ask.body(f"/v1/rooms/{room['id']}/status", key="reader")


def test_a_calibration_that_falls_due_is_behind_and_then_found_by_the_clock(ask, estate):
    room, site = estate.north.room, estate.north.site
    clocked(ask)
    rule = f"/v1/findings?room_id={room['id']}&rule=detectors/calibration-overdue"
    ask.clock.advance(JUST_BEFORE)
    clocked(ask)
    assert ask.body(rule)["items"] == []
    assert polled(ask, room)["currency"] == "current"
    position = changes(ask, site)[-1].position
    ask.clock.advance(WELL_AFTER - JUST_BEFORE)
    behind = ask("GET", f"/v1/rooms/{room['id']}/status")
    assert behind.json()["currency"] == "behind"
    assert behind.headers["ETag"].endswith('-b"')
    assert clocked(ask) > 0
    (change,) = changes(ask, site, after=position)
    assert change.operation == "clock"
    assert polled(ask, room)["currency"] == "current"
    assert len(ask.body(rule)["items"]) == 1
    assert clocked(ask) == 0
    assert changes(ask, site)[-1].position == change.position


def test_the_clock_takes_only_rooms_whose_turn_has_come(ask, estate):
    assert clocked(ask) == 0
    before = [change.position for change in changes(ask, estate.north.site)]
    assert clocked(ask) == 0
    assert [change.position for change in changes(ask, estate.north.site)] == before


def test_a_change_of_many_rooms_is_recalculating_until_the_sweep_has_come_by(serve, estate):
    ask = serve(rooms_per_change=1)
    site = estate.north.site
    rooms = [estate.north.room] + [
        ask.made("rooms", a_room(site, f"S-{number}", volume_m3=120)) for number in range(3)
    ]
    for number, room in enumerate(rooms[1:]):
        ask.made("vessels", a_vessel(room, f"S-{number}"))
    worst = [polled(ask, room)["worst_oxygen_pct"] for room in rooms]
    answer = ask("PATCH", f"/v1/sites/{site['id']}", {"elevation_m": 2500})
    assert answer.status_code == 200, answer.text
    assert answer.json()["recalculating"] is True
    assert answer.json()["effects"] == []
    for room in rooms:
        poll = ask("GET", f"/v1/rooms/{room['id']}/status")
        assert poll.json()["currency"] == "recalculating"
        assert poll.headers["ETag"].endswith('-r"')
    assert polled(ask, estate.south.room)["currency"] == "current"
    assert swept(ask, batch=3) == 4
    assert [polled(ask, room)["currency"] for room in rooms] == ["current"] * 4
    assert [change.operation for change in changes(ask, site)[-2:]] == ["sweep", "sweep"]
    # Thinner air takes up more room: the same litres push out more of it.
    after = [polled(ask, room)["worst_oxygen_pct"] for room in rooms]
    assert all(later < earlier for later, earlier in zip(after, worst, strict=True))
    assert swept(ask) == 0


def test_a_sweep_leaves_what_the_change_itself_would_have_left(serve, estate):
    ask = serve(rooms_per_change=1)
    site, room = estate.north.site, estate.north.room
    ask.made("rooms", a_room(site, "S-1", volume_m3=40))
    ask("PATCH", f"/v1/sites/{site['id']}", {"basis": "NORTH-basis"})
    swept(ask)
    assert polled(ask, room)["basis"] == "NORTH-basis"
    by_sweep = ask.body(f"/v1/rooms/{room['id']}/assessment")
    ask("PATCH", f"/v1/rooms/{room['id']}", {"notes": "looked at again"})
    by_change = ask.body(f"/v1/rooms/{room['id']}/assessment")
    assert by_change["position"] > by_sweep["position"]
    for name in ("cases", "figures", "standing", "ventilation", "worst"):
        assert by_sweep[name] == by_change[name], name


def test_the_running_service_sweeps_and_clocks_by_itself(serve, estate):
    often = timedelta(milliseconds=20)
    ask = serve(rooms_per_change=1, sweep_every=often, clock_every=often)
    ask.made("rooms", a_room(estate.north.site, "S-1", volume_m3=40))
    answer = ask("PATCH", f"/v1/sites/{estate.north.site['id']}", {"elevation_m": 900})
    wanted = answer.json()["position"] + 1
    path = f"/v1/rooms/{estate.north.room['id']}/status?at_least={wanted}"
    assert ask.body(path)["position"] >= wanted
    ask.clock.advance(WELL_AFTER)
    path = f"/v1/rooms/{estate.north.room['id']}/status?at_least={wanted + 1}"
    assert ask.body(path)["position"] >= wanted + 1


def test_the_use_of_keys_is_written_down_and_old_answers_are_dropped(ask_one):
    service = ask_one.service
    headers = {"Idempotency-Key": "once"}
    body = {"holder": "a board", "role": "reader"}
    assert ask_one("POST", "/v1/keys", body, headers=headers).status_code == 201
    used = service.keys.used()
    moment = ask_one.clock.now()
    asyncio.run(run_upkeep_once(service.writer, used, timedelta(hours=24)))
    listed = {key["id"]: key["last_used_at"] for key in ask_one.body("/v1/keys")["items"]}
    assert {listed[key_id] is not None for key_id in used} == {True}
    assert ask_one("POST", "/v1/keys", body, headers=headers).status_code == 409
    ask_one.clock.advance(timedelta(hours=25))
    asyncio.run(run_upkeep_once(service.writer, {}, timedelta(hours=24)))
    assert ask_one.clock.now() - moment == timedelta(hours=25)
    assert ask_one("POST", "/v1/keys", body, headers=headers).status_code == 201


def test_a_job_that_fails_is_logged_and_tried_again_after_ever_longer_pauses(caplog, monkeypatch):
    pauses = []
    real_sleep = asyncio.sleep

    async def sleep(seconds):
        pauses.append(seconds)
        if len(pauses) == 4:
            raise asyncio.CancelledError
        await real_sleep(0)

    tries = iter([RuntimeError("first"), RuntimeError("second"), None, RuntimeError("third")])

    async def once():
        error = next(tries)
        if error is not None:
            raise error

    monkeypatch.setattr(asyncio, "sleep", sleep)
    with caplog.at_level(logging.ERROR), pytest.raises(asyncio.CancelledError):
        asyncio.run(repeat("sweep", once, timedelta(seconds=1)))
    assert pauses == [2.0, 4.0, 1.0, 2.0]
    assert [str(record.exc_info[1]) for record in caplog.records] == ["first", "second", "third"]
