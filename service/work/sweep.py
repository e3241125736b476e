"""The sweep: rooms that were left behind a change of many are brought to what is wanted.

Each batch is a transaction of its own, so that writes of people go between, and what is left is
found by comparing: it can stop at any moment and goes on where it was.
"""

from __future__ import annotations

import logging
from collections.abc import Sequence
from functools import partial

from starlette.concurrency import run_in_threadpool

from service.audit.assessment import METHOD_VERSION
from service.changes.method import refuse_older_method
from service.changes.recalculate import SWEEP, recalculate
from service.store.engine import Database
from service.store.history import rooms_behind_wanted
from service.store.scope import EVERYTHING
from service.store.session import WriteSession
from service.store.writer import Writer
from service.work.context import ITSELF

_log = logging.getLogger(__name__)


async def run_sweep_once(writer: Writer, database: Database, batch: int) -> int:
    """Recalculate every room that is behind, a batch in a transaction; count them."""
    swept = 0
    seen: set[str] = set()
    while True:
        behind = await run_in_threadpool(
            database.read, lambda c: rooms_behind_wanted(EVERYTHING, c, METHOD_VERSION, batch)
        )
        rooms = [room_id for _, room_id in behind]
        if not set(rooms) - seen:
            if rooms:
                _log.error("%d rooms are behind again after they were recalculated.", len(rooms))
            return swept
        seen.update(rooms)
        swept += await writer.run(partial(_sweep, room_ids=rooms), ITSELF)


def _sweep(session: WriteSession, room_ids: Sequence[str]) -> int:
    refuse_older_method(session)
    return recalculate(session, room_ids, operation=SWEEP)
