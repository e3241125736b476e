"""Where the database is: the addresses an operator writes, and what they mean."""

from pathlib import Path

from sqlalchemy import URL, make_url

SQLITE = "sqlite"
POSTGRESQL = "postgresql"


def database_address(text: str) -> URL:
    """Read a database URL; a PostgreSQL one is served by psycopg.

    Raises
    ------
    ValueError
        Another kind of database, or an SQLite database that is no file.
    """
    address = make_url(text)
    name = address.drivername.partition("+")[0]
    if name in ("postgres", POSTGRESQL):
        return address.set(drivername="postgresql+psycopg")
    if name != SQLITE:
        raise ValueError(f"A database of the kind {name!r} is not supported.")
    if not address.database or address.database == ":memory:" or address.query:
        raise ValueError("An SQLite database must be a file, such as sqlite:////var/lib/x.sqlite.")
    return address


def dialect_of(address: URL) -> str:
    """Return ``sqlite`` or ``postgresql``."""
    return address.get_backend_name()


def sqlite_file(address: URL) -> Path:
    """Return the file of an SQLite database."""
    return Path(address.database or "").absolute()
