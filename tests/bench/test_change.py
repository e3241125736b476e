"""One change of one vessel, durable, against a bare durable row update on the same database."""

import json
import sqlite3
import statistics
import time
from contextlib import closing, contextmanager
from functools import partial

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


@contextmanager
def _bare_sqlite(file):
    with closing(sqlite3.connect(file, isolation_level=None)) as connection:
        yield _step_on_sqlite(connection)


def _step_on_sqlite(connection):
    connection.execute("PRAGMA journal_mode=WAL")
    connection.execute("PRAGMA synchronous=FULL")
    connection.execute("CREATE TABLE bare (id INTEGER PRIMARY KEY, value REAL)")
    connection.execute("INSERT INTO bare VALUES (1, 0.0)")

    def step(number):
        connection.execute("BEGIN IMMEDIATE")
        connection.execute("UPDATE bare SET value = ? WHERE id = 1", (float(number),))
        connection.execute("COMMIT")

    return step


@contextmanager
def _bare_postgresql(url):
    with closing(psycopg.connect(url, autocommit=True)) as connection:
        yield _step_on_postgresql(connection)


def _step_on_postgresql(connection):
    connection.execute("CREATE TABLE bare (id INTEGER PRIMARY KEY, value double precision)")
    connection.execute("INSERT INTO bare VALUES (1, 0.0)")

    def step(number):
        connection.execute("UPDATE bare SET value = %s WHERE id = 1", (float(number),))

    return step


def _change(connection, path, number):
    body = json.dumps({"contents_l": 10.0 + number % 17}).encode()
    status, _, answer = reply_to(connection, request_bytes("PATCH", path, key=KEY, body=body))
    assert status == 200, answer


def test_change_of_a_vessel_against_a_bare_row_update(durable_url, tmp_path, report):
    kind, url = durable_url
    with served(url) as port:
        _, vessel = a_room_with_a_dewar(port)
        with connect(port) as connection:
            changed = _times(partial(_change, connection, f"/v1/vessels/{vessel}"))
    on_sqlite = kind == "sqlite"
    with _bare_sqlite(tmp_path / "bare.sqlite") if on_sqlite else _bare_postgresql(url) as step:
        bare = _times(step)
    report(
        f"change on {kind}: {changed / bare:.1f} x a bare durable update"
        f" ({changed * 1e3:.2f} ms against {bare * 1e3:.2f} ms, medians of {TIMES})"
    )
