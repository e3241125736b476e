"""The keys of the installation, held in memory so that a request reads none.

Every change to a key moves the installation's head, so what is held is good as long as that head
stands still. On SQLite this process alone moves it and is told of each move; on PostgreSQL other
replicas move it too, so its position is read from the database at each look-up.
"""

from __future__ import annotations

import hashlib
import hmac
import threading
from collections.abc import Iterable, Mapping
from datetime import datetime, timedelta
from typing import Final

from sqlalchemy import Connection
from starlette.concurrency import run_in_threadpool
from starlette.datastructures import Headers

from service.clock import Clock
from service.errors import KeyMissing, KeyUnknown
from service.store.engine import Database
from service.store.heads import INSTALLATION, head_of
from service.store.keys import Key, list_keys
from service.store.memory import StatusMemory
from service.store.scope import EVERYTHING, Scope
from service.store.urls import SQLITE

USE_NOTED_EVERY: Final = timedelta(minutes=1)
_NOT_READ: Final = -1
# A digest that no key has, compared with where the key is unknown, so that both ways do the same.
_NO_DIGEST: Final = "0" * 64


class KeyRing:
    """Finds keys by their text, and remembers when each was last used."""

    def __init__(self, database: Database, memory: StatusMemory, clock: Clock) -> None:
        self._database = database
        self._memory = memory
        self._clock = clock
        self._alone = database.dialect == SQLITE
        self._reading = threading.Lock()
        self._position = _NOT_READ
        self._by_digest: Mapping[str, tuple[Key, Scope]] = {}
        self._used: dict[str, datetime] = {}
        self._noted: dict[str, datetime] = {}

    async def scope_of(self, text: str) -> Scope:
        """Give what a key may see.

        Raises
        ------
        KeyUnknown
            The key is unknown, revoked or expired; which of them is not told.
        """
        if not self._is_current():
            await run_in_threadpool(self._database.read, self._refresh)
        scope = self._scope(text.encode("latin-1"))
        if scope is None:
            raise KeyUnknown
        return scope

    def scope_at_once(self, text: bytes) -> Scope | None:
        """Give what a key may see, where that can be told without asking the database."""
        return self._scope(text) if self._is_current() else None

    def scope_in(self, connection: Connection, text: bytes) -> Scope | None:
        """Give what a key may see in a snapshot of the database."""
        self._refresh(connection)
        return self._scope(text)

    def used(self) -> dict[str, datetime]:
        """Give the keys whose use is to be noted, each at most once a minute, and forget them."""
        now = self._clock.now()
        due = {
            key_id: moment
            for key_id, moment in list(self._used.items())
            if now - self._noted.get(key_id, now - USE_NOTED_EVERY) >= USE_NOTED_EVERY
        }
        for key_id, moment in due.items():
            self._noted[key_id] = now
            # A use since then stays, for the next time.
            if self._used[key_id] == moment:
                del self._used[key_id]
        return due

    def _scope(self, text: bytes) -> Scope | None:
        digest = hashlib.sha256(text).hexdigest()
        found = self._by_digest.get(digest)
        same = hmac.compare_digest(_NO_DIGEST if found is None else found[0].digest, digest)
        now = self._clock.now()
        if found is None or not same or not is_valid(found[0], now):
            return None
        self._used[found[0].id] = now
        return found[1]

    def _is_current(self) -> bool:
        return self._alone and self._position == self._memory.known_position(INSTALLATION)

    def _refresh(self, connection: Connection) -> None:
        """Read the keys again where the installation's head has moved."""
        told = self._memory.known_position(INSTALLATION)
        head = head_of(EVERYTHING, connection, INSTALLATION)
        position = 0 if head is None else head.position
        with self._reading:
            if self._alone or position != self._position:
                self._by_digest = by_digest(list_keys(EVERYTHING, connection))
            # What was told before the read may be older than what was read; then it is read again.
            self._position = told if self._alone else position


def by_digest(keys: Iterable[Key]) -> dict[str, tuple[Key, Scope]]:
    """Arrange keys for looking up, each with what it may see."""
    return {key.digest: (key, Scope(key.id, key.role, key.sites)) for key in keys}


def is_valid(key: Key, now: datetime) -> bool:
    """Tell whether a key is neither revoked nor expired."""
    return key.revoked_at is None and (key.expires_at is None or now < key.expires_at)


def key_text(headers: Headers) -> str:
    """Find the text of the key in the headers of a request.

    Raises
    ------
    KeyMissing
        Neither header holds one.
    KeyUnknown
        Both are there and differ, or one is there twice.
    """
    bearers = [text for line in headers.getlist("authorization") if (text := _bearer(line))]
    texts = {*bearers, *(text for line in headers.getlist("x-api-key") if (text := line.strip()))}
    if not texts:
        raise KeyMissing
    if len(texts) > 1:
        raise KeyUnknown
    return texts.pop()


def _bearer(line: str) -> str:
    scheme, _, text = line.strip().partition(" ")
    return text.strip() if scheme.lower() == "bearer" else ""
