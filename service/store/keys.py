"""Keys, by digest: their texts are not kept."""

from dataclasses import dataclass
from datetime import datetime
from typing import Any

from sqlalchemy import Connection, RowMapping, bindparam, insert, select, update

from service.store.rows import columns_of
from service.store.scope import Scope
from service.store.session import WriteSession
from service.store.tables.registry import KEY


@dataclass(frozen=True, slots=True)
class Key:
    """A key: who holds it, what it may do, and in which sites; no sites named: in all."""

    id: str
    prefix: str
    digest: str
    holder: str
    role: str
    sites: frozenset[str] | None
    created_at: datetime
    expires_at: datetime | None = None
    revoked_at: datetime | None = None
    last_used_at: datetime | None = None
    replaced_by: str | None = None


def key_by_digest(scope: Scope, connection: Connection, digest: str) -> Key | None:
    """Return the key whose text has a digest, revoked or expired ones too."""
    row = connection.execute(_BY_DIGEST, {"digest": digest}).mappings().one_or_none()
    return _seen(scope, row)


def get_key(scope: Scope, connection: Connection, key_id: str) -> Key | None:
    """Return a key by its id."""
    row = connection.execute(_BY_ID, {"id": key_id}).mappings().one_or_none()
    return _seen(scope, row)


def list_keys(scope: Scope, connection: Connection) -> list[Key]:
    """Return the keys that a scope may see, those of no other site, in id order."""
    rows = connection.execute(select(KEY).order_by(KEY.c.id)).mappings()
    return [key for row in rows if (key := _seen(scope, row)) is not None]


def add_key(session: WriteSession, key: Key) -> None:
    """Add a key."""
    sites = None if key.sites is None else sorted(key.sites)
    session.connection.execute(insert(KEY), columns_of(key) | {"sites": sites})


def revoke_key(session: WriteSession, key_id: str, replaced_by: str | None = None) -> bool:
    """Revoke a key from now on; say whether it was there and not revoked before."""
    revoked = (
        update(KEY)
        .where(KEY.c.id == key_id, KEY.c.revoked_at.is_(None))
        .values(revoked_at=session.moment, replaced_by=replaced_by)
    )
    return session.connection.execute(revoked).rowcount == 1


def replace_key(session: WriteSession, key_id: str, replaced_by: str, expires_at: datetime) -> bool:
    """Name the key that follows another, which lasts until a moment; say whether it was there."""
    replaced = (
        update(KEY)
        .where(KEY.c.id == key_id, KEY.c.revoked_at.is_(None))
        .values(replaced_by=replaced_by, expires_at=expires_at)
    )
    return session.connection.execute(replaced).rowcount == 1


def note_use(session: WriteSession, key_id: str, moment: datetime) -> None:
    """Note when a key was last used."""
    session.connection.execute(_NOTE_USE, {"key": key_id, "moment": moment})


def _seen(scope: Scope, row: RowMapping | None) -> Key | None:
    if row is None:
        return None
    values: dict[str, Any] = dict(row)
    sites = None if values["sites"] is None else frozenset(values["sites"])
    # A key for more sites than a scope has would tell of the others.
    beyond = scope.sites is not None and (sites is None or not sites <= scope.sites)
    return None if beyond else Key(**values | {"sites": sites})


_BY_DIGEST = select(KEY).where(KEY.c.digest == bindparam("digest"))
_BY_ID = select(KEY).where(KEY.c.id == bindparam("id"))
_NOTE_USE = update(KEY).where(KEY.c.id == bindparam("key")).values(last_used_at=bindparam("moment"))
