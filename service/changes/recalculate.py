"""Rooms computed again without a record having changed: by the clock, the sweep, or on demand."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from typing import Final

from service.changes.assess import assess
from service.changes.neighbourhood import rooms_alone
from service.changes.replace import Outcome, next_positions, replace
from service.store.ids import new_record_id
from service.store.live import get_records
from service.store.scope import EVERYTHING
from service.store.session import WriteSession

CLOCK: Final = "clock"
SWEEP: Final = "sweep"
RECALCULATE: Final = "recalculate"


def recalculate(session: WriteSession, room_ids: Sequence[str], *, operation: str) -> int:
    """Assess rooms from the records as they are, and store what that gives; count them.

    Rooms that went in the meantime are passed over, so that a batch can be taken again.
    """
    rooms = get_records(EVERYTHING, session.connection, "room", list(room_ids))
    sites = {room.site_id for room in rooms if room.site_id is not None}
    if not sites:
        return 0
    heads = session.lock_heads(sites)
    before = rooms_alone(session, (room.id for room in rooms))
    assessed = assess(
        before.records,
        (room.id for room in rooms),
        before.findings,
        at=session.moment,
        positions=next_positions(heads),
        new_id=partial(new_record_id, session.moment),
        around=before.around,
    )
    replace(session, heads, Outcome(operation, (), assessed, before.prior))
    return len(assessed)
