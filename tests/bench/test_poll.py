"""A poll of one room against a bare ASGI function that returns the same bytes, in the same run."""

import json

import pytest

from tests.bench.conftest import KEY, free_port, process, served
from tests.bench.load import asked_once, load, request_bytes

pytestmark = pytest.mark.bench
SECONDS = 4.0


def _made(port, path, fields):
    body = json.dumps(fields).encode()
    status, _, answer = asked_once(port, request_bytes("POST", path, key=KEY, body=body))
    assert status == 201, answer
    return json.loads(answer)


def a_room_with_a_dewar(port):
    _made(port, "/v1/sites", {"tag": "bench", "elevation_m": 10.0})
    room = _made(port, "/v1/rooms", {"tag": "B-1", "site": "bench", "volume_m3": 90.0})
    vessel = _made(
        port,
        "/v1/vessels",
        {
            "tag": "V-1", "room_id": room["id"], "fluid": "nitrogen",
            "kind": "open-dewar", "capacity_l": 30.0, "contents_l": 20.0,
        },
    )  # fmt: skip
    return room["id"], vessel["id"]


def test_poll_of_a_room_against_a_bare_function(durable_url, tmp_path, report):
    kind, url = durable_url
    with served(url) as port:
        room, _ = a_room_with_a_dewar(port)
        path = f"/v1/rooms/{room}/status"
        full = request_bytes("GET", path, key=KEY)
        status, head, body = asked_once(port, full)
        assert status == 200
        etag = next(
            line.split(b": ", 1)[1].decode()
            for line in head.split(b"\r\n")
            if line.lower().startswith(b"etag")
        )
        known = request_bytes("GET", path, key=KEY, headers=[("If-None-Match", etag)])
        file = tmp_path / "body"
        file.write_bytes(body)
        bare_port = free_port()
        with process(["tests/bench/bare.py", str(bare_port), str(file)], bare_port):
            load(bare_port, full, seconds=0.5)
            load(port, full, seconds=0.5)
            rounds = [
                (
                    load(bare_port, full, seconds=SECONDS),
                    load(port, full, seconds=SECONDS),
                    load(port, known, seconds=SECONDS),
                )
                for _ in range(3)
            ]
    for _, polled, unchanged in rounds:
        assert (polled.status, unchanged.status) == (200, 304)
    whole = sorted(polled.rate / bare.rate for bare, polled, _ in rounds)[1]
    unchanged = sorted(known.rate / bare.rate for bare, _, known in rounds)[1]
    bare = sorted(bare.rate for bare, *_ in rounds)[1]
    report(
        f"poll on {kind}: 200 {whole:.2f} x, 304 {unchanged:.2f} x of a bare function"
        f" ({bare:.0f}/s, {len(body)} bytes)"
    )
