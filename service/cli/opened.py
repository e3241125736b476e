"""The database opened for a command, with a sentence where it cannot be used as it is."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

from service.clock import SystemClock
from service.errors import Conflict, NewerDatabase
from service.settings import Settings
from service.store.engine import Database
from service.store.memory import StatusMemory
from service.store.migrate import CURRENT, NEWER
from service.store.scope import EVERYTHING
from service.store.session import WriteContext
from service.store.writer import Writer

BY_COMMAND = WriteContext(key_id=None, scope=EVERYTHING, request_id=None)


@contextmanager
def opened(settings: Settings) -> Iterator[Database]:
    """Open the database to read it."""
    with Database(settings.database_url) as database:
        state = database.schema_state()
        if state == NEWER:
            raise NewerDatabase("The database was made by a newer release; run that one.")
        if state != CURRENT:
            raise Conflict(f"The database is {state}. Run 'rimeward migrate' first.")
        yield database


@contextmanager
def opened_to_write(settings: Settings) -> Iterator[Writer]:
    """Open the database to write it; refused while a server holds an SQLite file."""
    with opened(settings) as database:
        # Nobody polls a command: its memory holds next to nothing.
        memory = StatusMemory(limit_bytes=1 << 16)
        with Writer(database, SystemClock(), memory, settings.rooms_per_change) as writer:
            yield writer
