"""Small tidying: when keys were last used, and answers that nobody repeats any more."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime, timedelta
from functools import partial

from service.store.answers import drop_old_answers
from service.store.keys import note_use
from service.store.session import WriteSession
from service.store.writer import Writer
from service.work.context import ITSELF


async def run_upkeep_once(
    writer: Writer, used: Mapping[str, datetime], idempotency_for: timedelta
) -> None:
    """Note the use of keys, and drop answers that are kept no longer."""
    await writer.run(partial(_tidy, used, idempotency_for), ITSELF)


def _tidy(used: Mapping[str, datetime], idempotency_for: timedelta, session: WriteSession) -> None:
    for key_id, moment in sorted(used.items()):
        note_use(session, key_id, moment)
    drop_old_answers(session, session.moment - idempotency_for)
