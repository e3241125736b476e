"""Connections to an SQLite file: what each is set to, and who may write.

SQLite 3.7.0 to 3.51.2 can damage a file in WAL mode when two of its connections write or
checkpoint in the same instant. Here one connection alone does both: readers are ``query_only`` and
never checkpoint, they are closed before the writer, and whoever writes holds a lock file.
"""

import fcntl
import logging
import os
import sqlite3
from functools import cache
from pathlib import Path
from types import TracebackType
from typing import Self
from urllib.parse import quote

from sqlalchemy import URL, Connection, Engine, QueuePool, create_engine, event

from service.errors import HeldByAnother
from service.store.urls import sqlite_file

_log = logging.getLogger(__name__)

_PRAGMAS = (
    "PRAGMA busy_timeout=5000",
    "PRAGMA foreign_keys=ON",
    "PRAGMA trusted_schema=OFF",
    # INSERT OR REPLACE would slip past the triggers that refuse DELETE otherwise.
    "PRAGMA recursive_triggers=ON",
    "PRAGMA journal_size_limit=67108864",
    "PRAGMA synchronous=FULL",
)
_WRITER_PRAGMAS = ("PRAGMA journal_mode=WAL", *_PRAGMAS)
_READER_PRAGMAS = (*_PRAGMAS, "PRAGMA wal_autocheckpoint=0", "PRAGMA query_only=ON")

_SOUND_FROM = (3, 51, 3)


def reading_engine(address: URL, readers: int) -> Engine:
    """Return an engine whose connections can only read, each from one snapshot."""
    engine = create_engine(
        address,
        creator=lambda: _connection(address, "rw", _READER_PRAGMAS),
        poolclass=QueuePool,
        pool_size=readers,
        max_overflow=0,
    )
    event.listen(engine, "begin", _begin)
    return engine


def writing_engine(address: URL) -> Engine:
    """Return an engine with the one connection that writes."""
    engine = create_engine(
        address,
        creator=lambda: _connection(address, "rwc", _WRITER_PRAGMAS),
        poolclass=QueuePool,
        pool_size=1,
        max_overflow=0,
    )
    event.listen(engine, "begin", _begin_immediate)
    return engine


def migrating_engine(address: URL) -> Engine:
    """Return an engine that can copy tables: foreign keys are off, to be checked afterwards."""
    engine = create_engine(
        address,
        creator=lambda: _connection(address, "rwc", (*_WRITER_PRAGMAS, "PRAGMA foreign_keys=OFF")),
        poolclass=QueuePool,
        pool_size=1,
        max_overflow=0,
    )
    event.listen(engine, "begin", _begin_immediate)
    return engine


def _connection(address: URL, mode: str, pragmas: tuple[str, ...]) -> sqlite3.Connection:
    warn_of_old_library()
    file = f"file:{quote(str(sqlite_file(address)))}?mode={mode}"
    connection = sqlite3.connect(file, uri=True, check_same_thread=False)
    # The driver would open transactions on its own, and none for SELECT and DDL.
    connection.isolation_level = None
    for pragma in pragmas:
        connection.execute(pragma)
    return connection


def _begin(connection: Connection) -> None:
    connection.exec_driver_sql("BEGIN")


def _begin_immediate(connection: Connection) -> None:
    # A transaction that reads first and writes later fails at once when another came in between.
    connection.exec_driver_sql("BEGIN IMMEDIATE")


@cache
def warn_of_old_library() -> None:
    """Warn once a process of a library that can damage files in WAL mode."""
    if sqlite3.sqlite_version_info < _SOUND_FROM:
        _log.warning(
            "SQLite %s can damage a database when two connections write at once; this service "
            "writes by one alone, and no other program should. SQLite 3.51.3 mends it.",
            sqlite3.sqlite_version,
        )


class FileLock:
    """The right to write an SQLite file, held by one process until it is released.

    It is a lock on a file beside the database, which the system lets go when the process ends.
    """

    def __init__(self, database: Path) -> None:
        file = database.with_name(f"{database.name}.lock")
        self._descriptor = os.open(file, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
        try:
            fcntl.flock(self._descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            os.close(self._descriptor)
            raise HeldByAnother(
                f"Another process writes {database.name}. Stop it first, or ask it over HTTP."
            ) from None

    def release(self) -> None:
        """Let the next one write; the file stays, since removing it would race."""
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1

    def __enter__(self) -> Self:
        """Hold the lock for a block."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Release it."""
        self.release()
