"""One write transaction: who writes, when, which heads it holds, and what it will tell."""

from collections.abc import Iterable
from dataclasses import dataclass, field
from datetime import datetime, timedelta
from typing import Final

from sqlalchemy import Connection

from service.store.heads import (
    BEFORE_ALL,
    INSTALLATION,
    NO_HASH,
    Head,
    heads_for_writing,
)
from service.store.memory import Published, SiteHead
from service.store.rows import columns_of
from service.store.scope import Scope
from service.store.tables.registry import HEAD
from service.store.upsert import insert_missing
from service.store.urls import SQLITE

__all__ = ["INSTALLATION", "WriteContext", "WriteSession"]

_STEP: Final = timedelta(microseconds=1)


@dataclass(frozen=True, slots=True)
class WriteContext:
    """Who asked for a write, and what they said about it."""

    key_id: str | None
    scope: Scope
    request_id: str | None = None
    reason: str | None = None
    stated_at: datetime | None = None


@dataclass(slots=True)
class WriteSession:
    """What the functions that write are given first; the writer alone opens and commits it."""

    connection: Connection
    dialect: str
    moment: datetime
    """When what is written is recorded; later than all that was recorded in the locked heads."""
    key_id: str | None
    scope: Scope
    request_id: str | None
    reason: str | None
    stated_at: datetime | None
    rooms_per_change: int
    heads: dict[str, Head] = field(default_factory=dict)
    published: list[Published] = field(default_factory=list)

    def lock_heads(self, site_ids: Iterable[str]) -> dict[str, Head]:
        """Lock the heads of sites, make those that are missing, and move the moment past them.

        Whatever is to be changed is read after this, since others may write until then.
        """
        wanted = set(site_ids)
        unlocked = wanted - self.heads.keys()
        if unlocked:
            self.heads.update(self._locked(unlocked))
        heads = {site_id: self.heads[site_id] for site_id in sorted(wanted)}
        for head in heads.values():
            self.moment = max(self.moment, head.recorded_at + _STEP)
        return heads

    def publish(self, published: Published) -> None:
        """Tell the memory of stored answers, once this transaction is committed."""
        self.published.append(published)

    def move_head(self, head: Head) -> None:
        """Note where a locked head stands now; the history calls it as it appends a change."""
        self.heads[head.site_id] = head

    def told(self) -> list[Published]:
        """Return what the memory is to be told: the answers published, and the heads that moved."""
        heads = {
            head.site_id: SiteHead(head.position, head.wanted_position)
            for head in self.heads.values()
        }
        return [*self.published, Published(heads=heads)] if heads else list(self.published)

    def _locked(self, site_ids: set[str]) -> dict[str, Head]:
        # SQLite holds the whole file for the one writer already.
        lock = self.dialect != SQLITE
        found = heads_for_writing(self.connection, site_ids, lock=lock)
        missing = site_ids - found.keys()
        if not missing:
            return found
        new = [columns_of(Head(site, 0, BEFORE_ALL, NO_HASH, 0)) for site in sorted(missing)]
        insert_missing(self.connection, HEAD, new)
        return heads_for_writing(self.connection, site_ids, lock=lock)
