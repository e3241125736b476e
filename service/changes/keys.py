"""Keys: made, rotated and revoked, each step an entry in the installation's own chain."""

from __future__ import annotations

import hashlib
import re
import secrets
from collections.abc import Mapping
from datetime import datetime, timedelta
from typing import Any, Final

from service.changes.replace import entry_of
from service.errors import FieldsRefused, NotAllowed, RecordNotFound
from service.store.history import ChangeEntry, append_change, chained
from service.store.ids import new_record_id
from service.store.keys import Key, add_key, get_key, list_keys, replace_key
from service.store.keys import revoke_key as store_revocation
from service.store.live import get_records
from service.store.scope import EVERYTHING
from service.store.session import INSTALLATION, WriteSession

_PREFIX: Final = 8
_FORM: Final = re.compile(r"rw_[A-Za-z0-9_-]{8}_[A-Za-z0-9_-]{43}")
ADMINISTRATOR: Final = "administrator"


def key_secret() -> str:
    """Make the text of a new key: an id of 8 characters and 256 random bits."""
    return f"rw_{secrets.token_hex(_PREFIX // 2)}_{secrets.token_urlsafe(32)}"


def digest_of(secret: str) -> str:
    """Hash a key for keeping; 256 random bits need no slow hash."""
    return hashlib.sha256(secret.encode()).hexdigest()


def create_key(
    session: WriteSession,
    *,
    holder: str,
    role: str,
    sites: frozenset[str] | None,
    expires_at: datetime | None = None,
    secret: str | None = None,
) -> tuple[Key, str]:
    """Make a key; its text is in this answer only."""
    _refuse_beyond(session, sites)
    _refuse_unknown_sites(session, sites)
    head = session.lock_heads([INSTALLATION])[INSTALLATION]
    if expires_at is not None and expires_at <= session.moment:
        raise FieldsRefused.at("/expires_at", "in-the-past", "A key expires in the future.")
    text = key_secret() if secret is None else secret
    if not _FORM.fullmatch(text):
        raise ValueError("A key is rw_, 8 characters, _ and 43 characters.")
    key = Key(
        id=new_record_id(session.moment),
        prefix=text.split("_", 1)[1][:_PREFIX],
        digest=digest_of(text),
        holder=holder,
        role=role,
        sites=sites,
        created_at=session.moment,
        expires_at=expires_at,
        revoked_at=None,
        last_used_at=None,
        replaced_by=None,
    )
    add_key(session, key)
    _append(session, head.position, head.chain_hash, "key-create", key, {"role": [None, role]})
    return key, text


def rotate_key(session: WriteSession, key_id: str, overlap: timedelta) -> tuple[Key, str]:
    """Make a key like another one, which ends after an overlap."""
    old = _reachable(session, key_id)
    key, text = create_key(
        session, holder=old.holder, role=old.role, sites=old.sites, expires_at=old.expires_at
    )
    replace_key(session, old.id, replaced_by=key.id, expires_at=session.moment + overlap)
    return key, text


def revoke_key(session: WriteSession, key_id: str) -> Key:
    """End a key at once."""
    key = _reachable(session, key_id)
    if key.revoked_at is not None:
        return key
    head = session.lock_heads([INSTALLATION])[INSTALLATION]
    store_revocation(session, key.id)
    _append(session, head.position, head.chain_hash, "key-revoke", key, {"revoked": [False, True]})
    return _reachable(session, key_id)


def ensure_admin_key(session: WriteSession, secret: str) -> bool:
    """Store a key that was set from outside; False where an administrator's key is there."""
    if any(
        key.role == ADMINISTRATOR and key.sites is None and key.revoked_at is None
        for key in list_keys(EVERYTHING, session.connection)
    ):
        return False
    create_key(
        session, holder="set-up by environment", role=ADMINISTRATOR, sites=None, secret=secret
    )
    return True


def _reachable(session: WriteSession, key_id: str) -> Key:
    key = get_key(session.scope, session.connection, key_id)
    if key is None:
        raise RecordNotFound.of("key")
    _refuse_beyond(session, key.sites)
    return key


def _refuse_beyond(session: WriteSession, sites: frozenset[str] | None) -> None:
    """An administrator who is limited to sites makes keys for those sites only."""
    own = session.scope.sites
    if own is not None and (sites is None or not sites <= own):
        raise NotAllowed("This key makes and ends keys of its own sites only.")


def _refuse_unknown_sites(session: WriteSession, sites: frozenset[str] | None) -> None:
    if sites is None:
        return
    if not sites:
        raise FieldsRefused.at("/sites", "empty", "Name at least one site, or send null for all.")
    known = {s.id for s in get_records(EVERYTHING, session.connection, "site", sorted(sites))}
    if sites - known:
        raise FieldsRefused.at("/sites", "not-found", "One of these sites does not exist.")


def _append(
    session: WriteSession,
    position: int,
    chain_hash: str,
    operation: str,
    key: Key,
    moved: Mapping[str, list[Any]],
) -> None:
    # The holder may be a person: the chain names the key's id only.
    entry = entry_of(
        site_id=INSTALLATION,
        position=position + 1,
        recorded_at=session.moment,
        stated_at=session.stated_at,
        key_id=session.key_id,
        request_id=session.request_id,
        operation=operation,
        reason=session.reason,
        wants=False,
        records=[
            {"kind": "key", "id": key.id, "revision": 1, "sha256": None, "fields": dict(moved)}
        ],
        assessments=[],
        findings=[],
    )
    append_change(
        session,
        ChangeEntry(
            site_id=INSTALLATION,
            position=position + 1,
            recorded_at=session.moment,
            stated_at=session.stated_at,
            key_id=session.key_id,
            request_id=session.request_id,
            operation=operation,
            reason=session.reason,
            wants=False,
            entry=entry,
            chain_hash=chained(chain_hash, entry),
        ),
    )
