"""The database's own row: its lineage, its secret and the method that computes."""

import secrets
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from sqlalchemy import Connection, select, update

from service.store.ids import new_record_id
from service.store.rows import columns_of
from service.store.scope import EVERYTHING, Scope
from service.store.session import WriteSession
from service.store.tables.registry import INSTALLATION
from service.store.upsert import insert_missing

SECRET_BYTES: Final = 32


@dataclass(frozen=True, slots=True)
class Installation:
    """What is said of a database as a whole; ``lineage`` changes when it is restored or moved."""

    id: str
    lineage: str
    secret: bytes
    method_version: str
    created_at: datetime


_COLUMNS = [column for column in INSTALLATION.c if column.name != "singleton"]


def installation_of(scope: Scope, connection: Connection) -> Installation | None:
    """Return the installation; none in a database that is new, or to who sees some sites only."""
    if scope.sites is not None:
        return None
    row = connection.execute(select(*_COLUMNS)).mappings().one_or_none()
    return None if row is None else Installation(**row)


def ensure_installation(session: WriteSession, method_version: str = "") -> Installation:
    """Return the installation, and make it first in a database that is new."""
    found = installation_of(EVERYTHING, session.connection)
    if found is not None:
        return found
    new = Installation(
        id=new_record_id(session.moment),
        lineage=secrets.token_hex(8),
        secret=secrets.token_bytes(SECRET_BYTES),
        method_version=method_version,
        created_at=session.moment,
    )
    # Two replicas may start at once: one row goes in, and both return that one.
    insert_missing(session.connection, INSTALLATION, [columns_of(new) | {"singleton": 1}])
    return installation_of(EVERYTHING, session.connection) or new


def revise_method_version(session: WriteSession, method_version: str) -> None:
    """Note the method that computes from now on."""
    session.connection.execute(update(INSTALLATION).values(method_version=method_version))


def renew_lineage(session: WriteSession) -> str:
    """Begin a new lineage, so that cursors of before are told apart; return it."""
    lineage = secrets.token_hex(8)
    session.connection.execute(update(INSTALLATION).values(lineage=lineage))
    return lineage
