"""Databases with shipped records, and changes carried out as the service itself does."""

from collections.abc import Iterator
from contextlib import contextmanager
from functools import partial

import pytest

from service.changes.records import change_record, create_record, remove_record
from service.changes.shipped import ship
from service.clock import FixedClock
from service.store.engine import Database
from service.store.memory import StatusMemory
from service.store.scope import EVERYTHING
from service.store.session import WriteContext
from service.store.writer import Writer
from tests.conftest import MOMENT

ITSELF = WriteContext(key_id=None, scope=EVERYTHING)


class Line:
    """The change line, without HTTP before it."""

    def __init__(self, writer, database, clock):
        self.writer, self.database, self.clock = writer, database, clock
        self.run(ship)

    def run(self, job, context=ITSELF):
        return self.writer.run_now(job, context)

    def create(self, record_kind, context=ITSELF, /, **fields):
        return self.run(partial(create_record, kind=record_kind, fields=fields), context)

    def change(self, record, context=ITSELF, /, **changes):
        job = partial(change_record, kind=record.kind, record_id=record.id, changes=changes)
        return self.run(job, context)

    def remove(self, record, context=ITSELF):
        return self.run(partial(remove_record, kind=record.kind, record_id=record.id), context)

    def read(self, query, *arguments, **options):
        with self.database.reading() as connection:
            return query(EVERYTHING, connection, *arguments, **options)

    def a_site(self, tag="S", **fields):
        return self.create("site", tag=tag, elevation_m=10.0, **fields).record

    def a_room(self, site="S", tag="R", volume_m3=90.0, **fields):
        return self.create("room", site=site, tag=tag, volume_m3=volume_m3, **fields).record

    def a_vessel(self, room, tag="V", capacity_l=30.0, **fields):
        sort = {"fluid": "nitrogen", "kind": "open-dewar"}
        return self.create(
            "vessel", room_id=room.id, tag=tag, capacity_l=capacity_l, **{**sort, **fields}
        ).record


@pytest.fixture
def line(writer, database, clock):
    return Line(writer, database, clock)


@contextmanager
def line_on(file) -> Iterator[Line]:
    """Open the line on a migrated SQLite file, for a block."""
    clock = FixedClock(MOMENT)
    with (
        Database(f"sqlite:///{file}") as database,
        Writer(database, clock, StatusMemory(1_000_000)) as writer,
    ):
        yield Line(writer, database, clock)


@pytest.fixture
def sqlite_line(sqlite_url, clock, memory):
    """The line on one kind of database, where both would show the same."""
    with Database(sqlite_url) as database, Writer(database, clock, memory) as writer:
        yield Line(writer, database, clock)
