"""Answers kept for requests that may come again with the same Idempotency-Key."""

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy import bindparam, delete, insert, select

from service.store.rows import columns_of
from service.store.session import WriteSession
from service.store.tables.registry import ANSWER


@dataclass(frozen=True, slots=True)
class StoredAnswer:
    """What was answered to a request; no body: it held a secret, which is not kept."""

    key_id: str
    path: str
    token: str
    fingerprint: str
    status: int
    headers: Mapping[str, str]
    body: bytes | None
    kept_at: datetime


def find_answer(session: WriteSession, key_id: str, path: str, token: str) -> StoredAnswer | None:
    """Return the answer kept under a key, a path and a token."""
    values = {"key": key_id, "path": path, "token": token}
    row = session.connection.execute(_FIND, values).mappings().one_or_none()
    return None if row is None else StoredAnswer(**row)


def keep_answer(session: WriteSession, answer: StoredAnswer) -> None:
    """Keep an answer, in the transaction of what it answers."""
    session.connection.execute(
        insert(ANSWER), columns_of(answer) | {"headers": dict(answer.headers)}
    )


def drop_old_answers(session: WriteSession, before: datetime) -> int:
    """Drop the answers kept before a moment; say how many."""
    old = delete(ANSWER).where(ANSWER.c.kept_at < before)
    return session.connection.execute(old).rowcount


_FIND = (
    select(ANSWER)
    .where(ANSWER.c.key_id == bindparam("key"))
    .where(ANSWER.c.path == bindparam("path"))
    .where(ANSWER.c.token == bindparam("token"))
)
