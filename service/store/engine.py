"""The database, either of the two, behind one way to read and one way to write."""

import sqlite3
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from types import TracebackType
from typing import Any, Final, Self, TypeVar

from sqlalchemy import Connection, Engine, create_engine, event
from sqlalchemy.engine import ExceptionContext
from sqlalchemy.exc import DBAPIError

from service.errors import StorageFull
from service.store.migrate import EMPTY, state_of
from service.store.sqlite import FileLock, reading_engine, writing_engine
from service.store.urls import SQLITE, database_address, dialect_of, sqlite_file

Read = TypeVar("Read")

# Where a limit other than that of the disk is met, SQLite says that the write failed.
_FULL_ON_SQLITE: Final = frozenset(
    {
        sqlite3.SQLITE_FULL,
        sqlite3.SQLITE_IOERR_WRITE,
        sqlite3.SQLITE_IOERR_SHMSIZE,
    }
)
_FULL_ON_POSTGRESQL: Final = frozenset({"53100"})


class Database:
    """An open database: readers at once, the writer when it is first asked for.

    Parameters
    ----------
    url : str
        An SQLite file or a PostgreSQL database.
    readers : int
        How many read at a time.
    writers : int
        How many write at a time on PostgreSQL; on SQLite it is one.
    """

    def __init__(self, url: str, *, readers: int = 8, writers: int = 4) -> None:
        self.url: Final = url
        self._address = database_address(url)
        self.dialect: Final = dialect_of(self._address)
        self.writers: Final = 1 if self.dialect == SQLITE else writers
        self._opening = threading.Lock()
        self._lock: FileLock | None = None
        self._writing: Engine | None = None
        self._reading = (
            reading_engine(self._address, readers)
            if self.dialect == SQLITE
            else create_engine(
                self._address,
                pool_size=readers,
                max_overflow=0,
                isolation_level="REPEATABLE READ",
            )
        )
        if self.dialect != SQLITE:
            event.listen(self._reading, "connect", _read_only)
        event.listen(self._reading, "handle_error", _full_disk)

    @contextmanager
    def reading(self) -> Iterator[Connection]:
        """Give a connection that sees one state of the database throughout and cannot write."""
        with self._reading.connect() as connection:
            yield connection

    def read(self, query: Callable[[Connection], Read]) -> Read:
        """Run a query on a snapshot, once more where the connection turns out to be dead."""
        try:
            with self.reading() as connection:
                return query(connection)
        except DBAPIError as error:
            if not error.connection_invalidated:
                raise
        with self.reading() as connection:
            return query(connection)

    @contextmanager
    def writing(self) -> Iterator[Connection]:
        """Give a connection in a write transaction; it commits at the end, or rolls back wholly.

        Raises
        ------
        HeldByAnother
            Another process has the right to write the file.
        StorageFull
            There is no room for what is written.
        """
        with self.write_engine().begin() as connection:
            yield connection

    def write_engine(self) -> Engine:
        """Return the engine that writes, and take the right to write at the first time."""
        with self._opening:
            if self._writing is None:
                self._writing = self._open_to_write()
            return self._writing

    def _open_to_write(self) -> Engine:
        if self.dialect == SQLITE:
            self._lock = FileLock(sqlite_file(self._address))
            engine = writing_engine(self._address)
        else:
            engine = create_engine(
                self._address,
                pool_size=self.writers,
                max_overflow=0,
                isolation_level="READ COMMITTED",
            )
        event.listen(engine, "handle_error", _full_disk)
        return engine

    def schema_state(self) -> str:
        """Say how the tables stand to this release: ``empty, older, current`` or ``newer``."""
        if self.dialect == SQLITE and not sqlite_file(self._address).exists():
            return EMPTY
        with self.reading() as connection:
            return state_of(connection)

    def close(self) -> None:
        """Close the readers, then the writer, whose closing is the last checkpoint."""
        self._reading.dispose()
        with self._opening:
            if self._writing is not None:
                self._writing.dispose()
                self._writing = None
            if self._lock is not None:
                self._lock.release()
                self._lock = None

    def __enter__(self) -> Self:
        """Use the database for a block."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Close it."""
        self.close()


def _read_only(connection: Any, _record: object) -> None:
    connection.read_only = True


def _full_disk(context: ExceptionContext) -> None:
    if is_full_disk(context.original_exception):
        raise StorageFull("Nothing was written; what is there can be read.")


def is_full_disk(error: BaseException | None) -> bool:
    """Say whether a driver's error means that there is no room left."""
    if isinstance(error, sqlite3.Error):
        return getattr(error, "sqlite_errorcode", None) in _FULL_ON_SQLITE
    return getattr(error, "sqlstate", None) in _FULL_ON_POSTGRESQL
