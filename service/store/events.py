"""Events: what subscribers are told, written in the transaction of what happened."""

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Final

from sqlalchemy import Connection, bindparam, func, insert, select, update

from service.store.rows import columns_of
from service.store.scope import Scope, within
from service.store.session import WriteSession
from service.store.tables.registry import EVENT
from service.store.urls import SQLITE

# Any number that no other user of the server's advisory locks takes: "feed-no" in ASCII.
_SEQUENCER: Final = int.from_bytes(b"feed-no", "big")


@dataclass(frozen=True, slots=True)
class StoredEvent:
    """An event; ``feed_no`` is its place in the feed over all sites, once it has one."""

    id: str
    site_id: str
    position: int
    number: int
    subject: str
    type: str
    body: bytes
    feed_no: int | None = None


def append_events(session: WriteSession, events: Iterable[StoredEvent]) -> None:
    """Append events; the one writer of SQLite gives them their place in the feed at once."""
    rows = [columns_of(event) for event in events]
    if not rows:
        return
    if session.dialect == SQLITE:
        last = session.connection.execute(_LAST).scalar_one() or 0
        for feed_no, row in enumerate(rows, last + 1):
            row["feed_no"] = feed_no
    session.connection.execute(_INSERT, rows)


def number_events(session: WriteSession, limit: int = 1000) -> int:
    """Give committed events their place in the feed, in order within each site; say how many.

    On PostgreSQL a number given in the writing transaction could be seen after a greater one, and
    a reader would miss it. So one sequencer at a time numbers what is committed.
    """
    connection = session.connection
    if session.dialect != SQLITE:
        connection.execute(select(func.pg_advisory_xact_lock(_SEQUENCER)))
    waiting = connection.execute(_WAITING.limit(limit)).scalars().all()
    last = connection.execute(_LAST).scalar_one() or 0
    rows = [{"event": event_id, "place": place} for place, event_id in enumerate(waiting, last + 1)]
    if rows:
        connection.execute(_NUMBER, rows)
    return len(rows)


def events_after(
    scope: Scope, connection: Connection, feed_no: int, limit: int
) -> list[StoredEvent]:
    """Return the numbered events after a place in the feed, in its order."""
    query = within(scope, select(EVENT).where(EVENT.c.feed_no > feed_no), EVENT.c.site_id)
    rows = connection.execute(query.order_by(EVENT.c.feed_no).limit(limit))
    return [StoredEvent(**row._mapping) for row in rows]


def events_at(
    scope: Scope, connection: Connection, site_id: str, position: int
) -> list[StoredEvent]:
    """Return the events of one change, in order."""
    query = select(EVENT).where(EVENT.c.site_id == site_id, EVENT.c.position == position)
    rows = connection.execute(within(scope, query, EVENT.c.site_id).order_by(EVENT.c.number))
    return [StoredEvent(**row._mapping) for row in rows]


def last_feed_no(scope: Scope, connection: Connection) -> int:
    """Return the place of the last event in the feed that a scope sees; 0: none."""
    last: int | None = connection.execute(within(scope, _LAST, EVENT.c.site_id)).scalar_one()
    return last or 0


_INSERT = insert(EVENT)
_LAST = select(func.max(EVENT.c.feed_no))
_WAITING = (
    select(EVENT.c.id)
    .where(EVENT.c.feed_no.is_(None))
    .order_by(EVENT.c.site_id, EVENT.c.position, EVENT.c.number)
)
_NUMBER = update(EVENT).where(EVENT.c.id == bindparam("event")).values(feed_no=bindparam("place"))
