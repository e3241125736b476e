"""One change of one vessel, durable, against a bare durable row update on the same database."""

import json
import sqlite3
import statistics
import time

import psycopg
import pytest

from tests.bench.conftest import KEY, served
from tests.bench.load import connect, reply_to, request_bytes
from tests.bench.test_poll import a_room_with_a_dewar

pytestmark = pytest.mark.bench
TIMES = 300


def _times(step):
    for number in range(20):
        step(number)
    taken = []
    for number in range(TIMES):
        began = time.perf_counter()
        step(number)
        taken.append(time.perf_counter() - began)
    return statistics.median(taken)


def _bare_sqlite(file):
    connection = sqlite3.connect(file, isolation_level=None)
    connection.execute("PRAGMA journal_mode=WAL")
    connection.execute("PRAGMA synchronous=FULL")
    connection.execute("CREATE TABLE bare (id INTEGER PRIMARY KEY, value REAL)")
    connection.execute("INSERT INTO bare VALUES (1, 0.0)")

    def step(number):
        connection.execute("BEGIN IMMEDIATE")
        connection.execute("UPDATE bare SET value = ? WHERE id = 1", (float(number),))
        connection.execute("COMMIT")

    return step


def _bare_postgresql(url):
    connection = psycopg.connect(url, autocommit=True)
    connection.execute("CREATE TABLE bare (id INTEGER PRIMARY KEY, value double precision)")
    connection.execute("INSERT INTO bare VALUES (1, 0.0)")

    def step(number):
        connection.execute("UPDATE bare SET value = %s WHERE id = 1", (float(number),))

    return step


def test_change_of_a_vessel_against_a_bare_row_update(durable_url, tmp_path, report):
    kind, url = durable_url
    with served(url) as port:
        _, vessel = a_room_with_a_dewar(port)
        connection = connect(port)

        def change(number):
            body = json.dumps({"contents_l": 10.0 + number % 17}).encode()
            status, _, answer = reply_to(
                connection, request_bytes("PATCH", f"/v1/vessels/{vessel}", key=KEY, body=body)
            )
            assert status == 200, answer

        changed = _times(change)
    bare = _times(
        _bare_sqlite(tmp_path / "bare.sqlite") if kind == "sqlite" else _bare_postgresql(url)
    )
    report(
        f"change on {kind}: {changed / bare:.1f} x a bare durable update"
        f" ({changed * 1e3:.2f} ms against {bare * 1e3:.2f} ms, medians of {TIMES})"
    )
