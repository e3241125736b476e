"""The stored answers in memory, so that a poll does not touch the database.

It is told of every change after its commit and before its answer, so that whoever has been
answered finds at least that state here.
"""

import asyncio
import contextlib
import threading
from collections import OrderedDict
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import Final

# Roughly what the objects around a body take.
_OVERHEAD: Final = 600


@dataclass(frozen=True, slots=True)
class StoredStatus:
    """The answer to a poll of one room, as it was rendered at a position of its site."""

    room_id: str
    site_id: str
    position: int
    body: bytes
    turns_at: datetime | None
    method_version: str
    failed: bool


@dataclass(frozen=True, slots=True)
class SiteHead:
    """How far this process knows a site."""

    position: int
    wanted_position: int


@dataclass(frozen=True, slots=True)
class Published:
    """What a committed transaction tells the memory."""

    statuses: tuple[StoredStatus, ...] = ()
    forgotten: tuple[str, ...] = ()
    """Rooms that are gone."""
    heads: Mapping[str, SiteHead] = field(default_factory=dict)


@dataclass(eq=False, slots=True)
class _Waiter:
    site_id: str
    position: int
    loop: asyncio.AbstractEventLoop
    reached: asyncio.Event


class StatusMemory:
    """Stored answers by room, bounded by bytes, the least recently used going first."""

    def __init__(self, limit_bytes: int) -> None:
        self._limit = limit_bytes
        self._lock = threading.Lock()
        self._statuses: OrderedDict[str, StoredStatus] = OrderedDict()
        self._bytes = 0
        self._heads: dict[str, SiteHead] = {}
        self._waiters: set[_Waiter] = set()
        self._generation = 0

    @property
    def generation(self) -> int:
        """Return a number that every publication moves; see ``put``."""
        return self._generation

    @property
    def bytes_held(self) -> int:
        """Return how many bytes the memory takes, roughly."""
        return self._bytes

    @property
    def heads(self) -> Mapping[str, SiteHead]:
        """Return how far each site is known."""
        with self._lock:
            return dict(self._heads)

    def get(self, room_id: str) -> StoredStatus | None:
        """Return the stored answer of a room, if it is here."""
        with self._lock:
            status = self._statuses.get(room_id)
            if status is not None:
                self._statuses.move_to_end(room_id)
            return status

    def put(self, status: StoredStatus, *, read_in: int | None = None) -> None:
        """Keep an answer, unless a newer one of its room is here.

        Whoever read it from the database says in which ``generation`` the read began. Where
        something was published since, it is not kept: it may be older than what was then told,
        and what was told may be forgotten again.
        """
        with self._lock:
            if read_in is None or read_in == self._generation:
                self._keep(status)

    def forget(self, room_id: str) -> None:
        """Drop the answer of a room."""
        with self._lock:
            self._drop(room_id)

    def head(self, site_id: str) -> SiteHead | None:
        """Return how far a site is known, if at all."""
        return self._heads.get(site_id)

    def known_position(self, site_id: str) -> int:
        """Return the position up to which this process knows a site; 0: not at all."""
        head = self._heads.get(site_id)
        return 0 if head is None else head.position

    def tell_heads(self, heads: Mapping[str, SiteHead]) -> None:
        """Learn how far sites are, as at the start."""
        self.publish([Published(heads=heads)])

    def publish(self, told: Iterable[Published]) -> None:
        """Take what a committed transaction did, all of it at once, and wake who waits for it."""
        with self._lock:
            self._generation += 1
            for published in told:
                self._take(published)
            reached = [
                waiter
                for waiter in self._waiters
                if self.known_position(waiter.site_id) >= waiter.position
            ]
        for waiter in reached:
            # The loop of a waiter that is gone may be closed; then nobody is left to wake.
            with contextlib.suppress(RuntimeError):
                waiter.loop.call_soon_threadsafe(waiter.reached.set)

    async def wait_for(self, site_id: str, position: int, timeout: float) -> bool:
        """Wait until a site is known at a position; say whether it is, in time (in seconds)."""
        waiter = _Waiter(site_id, position, asyncio.get_running_loop(), asyncio.Event())
        with self._waiting(waiter):
            if self.known_position(site_id) >= position:
                return True
            with contextlib.suppress(TimeoutError):
                await asyncio.wait_for(waiter.reached.wait(), timeout)
        return self.known_position(site_id) >= position

    @contextlib.contextmanager
    def _waiting(self, waiter: _Waiter) -> Iterator[None]:
        with self._lock:
            self._waiters.add(waiter)
        try:
            yield
        finally:
            with self._lock:
                self._waiters.discard(waiter)

    def _take(self, published: Published) -> None:
        for room_id in published.forgotten:
            self._drop(room_id)
        for status in published.statuses:
            self._keep(status)
        for site_id, head in published.heads.items():
            if head.position >= self.known_position(site_id):
                self._heads[site_id] = head

    def _keep(self, status: StoredStatus) -> None:
        held = self._statuses.get(status.room_id)
        if held is not None and held.position > status.position:
            return
        self._drop(status.room_id)
        self._statuses[status.room_id] = status
        self._bytes += _size(status)
        while self._bytes > self._limit:
            _, oldest = self._statuses.popitem(last=False)
            self._bytes -= _size(oldest)

    def _drop(self, room_id: str) -> None:
        status = self._statuses.pop(room_id, None)
        if status is not None:
            self._bytes -= _size(status)


def _size(status: StoredStatus) -> int:
    return len(status.body) + _OVERHEAD
