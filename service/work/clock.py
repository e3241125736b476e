"""The clock job: rooms whose judgement changes by itself are judged anew when their turn comes."""

from __future__ import annotations

import logging
from collections.abc import Sequence
from functools import partial
from typing import Final

from starlette.concurrency import run_in_threadpool

from service.changes.method import refuse_older_method
from service.changes.recalculate import CLOCK, recalculate
from service.clock import Clock
from service.store.engine import Database
from service.store.history import assessments_now, rooms_turning
from service.store.live import get_records
from service.store.scope import EVERYTHING
from service.store.session import WriteSession
from service.store.writer import Writer
from service.work.context import ITSELF

BATCH: Final = 50

_log = logging.getLogger(__name__)


async def run_clock_once(writer: Writer, database: Database, clock: Clock) -> int:
    """Judge every room whose turn has come, oldest first, a batch in a transaction; count them."""
    judged = 0
    seen: set[str] = set()
    while True:
        due = await run_in_threadpool(
            database.read, lambda c: rooms_turning(EVERYTHING, c, clock.now(), BATCH)
        )
        if not set(due) - seen:
            if due:
                _log.error("%d rooms are due again at the moment they were judged.", len(due))
            return judged
        seen.update(due)
        judged += await writer.run(partial(_turn, room_ids=due), ITSELF)


def _turn(session: WriteSession, room_ids: Sequence[str]) -> int:
    refuse_older_method(session)
    rooms = get_records(EVERYTHING, session.connection, "room", room_ids)
    session.lock_heads({room.site_id for room in rooms if room.site_id is not None})
    # Another replica may have taken them while this one waited for the heads.
    still_due = [
        assessment.room_id
        for assessment in assessments_now(EVERYTHING, session.connection, room_ids)
        if assessment.turns_at is not None and assessment.turns_at <= session.moment
    ]
    return recalculate(session, still_due, operation=CLOCK)
