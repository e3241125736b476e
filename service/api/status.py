"""The status of a room as it is stored, with how current it is: from memory, else by one read."""

from __future__ import annotations

import asyncio
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from sqlalchemy import Connection
from starlette.concurrency import run_in_threadpool

from service.api.fields import is_record_id
from service.api.rendering import FRESH
from service.api.service import Service
from service.changes.answers import currency_of, status_etag, stored_status, with_currency
from service.errors import RecordNotFound
from service.store.heads import head_of, wanted_at
from service.store.history import StoredAssessment, assessment_now
from service.store.live import get_record
from service.store.memory import StoredStatus
from service.store.polling import room_position
from service.store.scope import EVERYTHING, Scope
from service.store.urls import SQLITE

WAITS_AT_MOST_S: Final = 2.0
_ASKS_EVERY_S: Final = 0.05


@dataclass(frozen=True, slots=True)
class Poll:
    """What a poll answers."""

    etag: str
    stored: StoredStatus
    currency: str

    @property
    def body(self) -> bytes:
        """Give the bytes."""
        return with_currency(self.stored.body, self.currency)

    @property
    def headers(self) -> Mapping[str, str]:
        """Give the headers."""
        return {**FRESH, "ETag": self.etag}


def polled(stored: StoredStatus, wanted: int, now: datetime) -> Poll:
    """Say how current a stored status is."""
    currency = currency_of(
        position=stored.position,
        wanted=wanted,
        turns_at=stored.turns_at,
        method_version=stored.method_version,
        failed=stored.failed,
        now=now,
    )
    return Poll(status_etag(stored.position, currency), stored, currency)


def polled_from_memory(service: Service, scope: Scope, room_id: str) -> Poll | None:
    """Give the status of a room as memory has it: true where this process alone writes."""
    stored = service.memory.get(room_id)
    if stored is None or not scope.sees(stored.site_id):
        return None
    head = service.memory.head(stored.site_id)
    return None if head is None else polled(stored, head.wanted_position, service.clock.now())


def polled_if_held(
    service: Service, scope: Scope, connection: Connection, room_id: str
) -> Poll | None:
    """Give the status of a room if what memory has of it is what the database has."""
    held = service.memory.get(room_id)
    place = None if held is None else room_position(scope, connection, room_id)
    if held is None or place is None or held.position != place.position:
        return None
    return polled(held, place.wanted_position, service.clock.now())


async def poll_of(service: Service, scope: Scope, room_id: str) -> Poll:
    """Give the status of a room, from memory or by a read that fills it.

    Raises
    ------
    RecordNotFound
        There is no such room for this key.
    """
    alone = service.database.dialect == SQLITE
    poll = polled_from_memory(service, scope, room_id) if alone else None
    if poll is None:
        poll = await run_in_threadpool(_read, service, scope, room_id)
    if poll is None:
        raise RecordNotFound.of("room")
    return poll


def _read(service: Service, scope: Scope, room_id: str) -> Poll | None:
    """Ask the database where the room stands; what memory has of that position is good."""
    if not is_record_id(room_id):
        return None
    generation = service.memory.generation
    found = service.database.read(lambda connection: _found(service, scope, connection, room_id))
    if found is None:
        return None
    stored, wanted = found
    service.memory.put(stored, read_in=generation)
    return polled(stored, wanted, service.clock.now())


def _found(
    service: Service, scope: Scope, connection: Connection, room_id: str
) -> tuple[StoredStatus, int] | None:
    place = room_position(scope, connection, room_id)
    if place is None:
        return None
    held = service.memory.get(room_id)
    if held is not None and held.position == place.position:
        return held, place.wanted_position
    assessment = assessment_now(scope, connection, room_id)
    return None if assessment is None else (stored_status(assessment), place.wanted_position)


def poll_at(
    scope: Scope, connection: Connection, assessment: StoredAssessment, position: int, at: datetime
) -> Poll:
    """Give a status of the past as it was answered then."""
    currency = currency_of(
        position=assessment.from_position,
        wanted=wanted_at(scope, connection, assessment.site_id, position),
        turns_at=assessment.turns_at,
        method_version=assessment.method_version,
        failed=assessment.failed,
        now=at,
        running_method=assessment.method_version,
    )
    stored = stored_status(assessment)
    return Poll(status_etag(stored.position, currency), stored, currency)


async def wait_until_known(service: Service, scope: Scope, room_id: str, position: int) -> None:
    """Wait a little until this process knows the room's site at a position."""
    site_id = await run_in_threadpool(service.database.read, lambda c: _site_of(scope, c, room_id))
    if site_id is None:
        raise RecordNotFound.of("room")
    if service.database.dialect == SQLITE:
        await service.memory.wait_for(site_id, position, WAITS_AT_MOST_S)
        return
    loop = asyncio.get_running_loop()
    until = loop.time() + WAITS_AT_MOST_S
    while loop.time() < until:
        head = await run_in_threadpool(
            service.database.read, lambda c: head_of(EVERYTHING, c, site_id)
        )
        if head is not None and head.position >= position:
            return
        await asyncio.sleep(_ASKS_EVERY_S)


def _site_of(scope: Scope, connection: Connection, room_id: str) -> str | None:
    room = get_record(scope, connection, "room", room_id) if is_record_id(room_id) else None
    return None if room is None else room.site_id
