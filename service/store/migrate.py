"""Bringing the tables of a database to the form that this release has."""

import logging
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from functools import cache
from importlib.resources import files
from pathlib import Path
from typing import Final

from alembic import command
from alembic.config import Config
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import URL, Connection, NullPool, create_engine

from service.errors import NewerDatabase
from service.store.sqlite import FileLock, migrating_engine, reading_engine
from service.store.urls import SQLITE, database_address, dialect_of, sqlite_file

EMPTY: Final = "empty"
OLDER: Final = "older"
CURRENT: Final = "current"
NEWER: Final = "newer"

_log = logging.getLogger(__name__)

# Any number that no other user of the server's advisory locks takes: "rimeward" in ASCII.
_LOCK: Final = int.from_bytes(b"rimeward", "big")


def upgrade(database_url: str, to: str = "head") -> None:
    """Migrate a database up to a revision, or the newest; one process does so at a time.

    An SQLite file that holds something is copied beside itself before.

    Raises
    ------
    NewerDatabase
        A newer release has made the database.
    HeldByAnother
        Another process writes the SQLite file.
    """
    with _migrating(database_url) as connection:
        before = _revision_of(connection)
        if before is not None and before == _revision_meant(to):
            return
        if before is not None and connection.dialect.name == SQLITE:
            copy = _keep_copy(sqlite_file(database_address(database_url)), before)
            _log.info("Before migrating, the database was copied to %s.", copy.name)
        # Alembic leaves a transaction alone that it finds open, and what was read has opened one.
        connection.rollback()
        command.upgrade(_config(connection), to)


def downgrade(database_url: str, to: str) -> None:
    """Migrate a database down to a revision; ``base`` leaves nothing. Data is lost by it."""
    with _migrating(database_url) as connection:
        connection.rollback()
        command.downgrade(_config(connection), to)


def schema_state(database_url: str) -> str:
    """Say how the tables stand to this release: ``empty, older, current`` or ``newer``."""
    address = database_address(database_url)
    if dialect_of(address) == SQLITE and not sqlite_file(address).exists():
        return EMPTY
    on_sqlite = dialect_of(address) == SQLITE
    engine = reading_engine(address, 1) if on_sqlite else create_engine(address)
    try:
        with engine.connect() as connection:
            return state_of(connection)
    finally:
        engine.dispose()


def state_of(connection: Connection) -> str:
    """Say how the tables behind a connection stand to this release."""
    revision = _revision_of(connection)
    if revision is None:
        return EMPTY
    if revision == _revision_meant("head"):
        return CURRENT
    known = {script.revision for script in _scripts().walk_revisions()}
    return OLDER if revision in known else NEWER


@contextmanager
def _migrating(database_url: str) -> Iterator[Connection]:
    address = database_address(database_url)
    alone = _alone_on_sqlite if dialect_of(address) == SQLITE else _alone_on_postgresql
    with alone(address) as connection:
        if state_of(connection) == NEWER:
            raise NewerDatabase(
                "The database was made by a newer release; run that one, or restore a copy."
            )
        yield connection


@contextmanager
def _alone_on_sqlite(address: URL) -> Iterator[Connection]:
    file = sqlite_file(address)
    file.parent.mkdir(parents=True, exist_ok=True)
    with FileLock(file):
        engine = migrating_engine(address)
        try:
            with engine.connect() as connection:
                yield connection
        finally:
            engine.dispose()


@contextmanager
def _alone_on_postgresql(address: URL) -> Iterator[Connection]:
    engine = create_engine(address, poolclass=NullPool)
    with engine.connect() as connection:
        connection.exec_driver_sql(f"SELECT pg_advisory_lock({_LOCK})")
        connection.commit()
        # The lock goes with the connection, which is closed and not kept.
        yield connection


def _keep_copy(database: Path, revision: str) -> Path:
    copy = database.with_name(f"{database.name}.before-migration-from-{revision}")
    unfinished = copy.with_name(f"{copy.name}.unfinished")
    unfinished.unlink(missing_ok=True)
    with closing(sqlite3.connect(database)) as source, closing(sqlite3.connect(unfinished)) as to:
        source.backup(to)
        (verdict,) = to.execute("PRAGMA quick_check").fetchone()
    if verdict != "ok":
        raise RuntimeError(f"The copy of the database is not sound: {verdict}")
    unfinished.replace(copy)
    return copy


def _revision_of(connection: Connection) -> str | None:
    return MigrationContext.configure(connection).get_current_revision()


def _revision_meant(name: str) -> str | None:
    return _scripts().get_revision(name).revision


def _config(connection: Connection | None = None) -> Config:
    config = Config()
    config.set_main_option("script_location", str(_folder()).replace("%", "%%"))
    config.set_main_option("path_separator", "os")
    config.attributes["connection"] = connection
    return config


@cache
def _scripts() -> ScriptDirectory:
    return ScriptDirectory.from_config(_config())


def _folder() -> Path:
    package = Path(str(files("service")))
    in_the_wheel = package / "_migrations"
    return in_the_wheel if in_the_wheel.is_dir() else package.parent / "migrations"
