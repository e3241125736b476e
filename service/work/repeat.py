"""A job that runs again and again: what goes wrong is logged, and tried again ever more rarely."""

from __future__ import annotations

import asyncio
import logging
from collections.abc import Awaitable, Callable
from datetime import timedelta
from typing import Final

from service.errors import OlderMethod

LONGEST_PAUSE: Final = timedelta(minutes=1)

_log = logging.getLogger(__name__)


async def repeat(name: str, once: Callable[[], Awaitable[object]], every: timedelta) -> None:
    """Run a job for ever, with a pause after each time."""
    pause = every
    while True:
        try:
            await once()
            pause = every
        except OlderMethod as error:
            _log.warning("The %s does nothing: %s", name, error)
            pause = max(every, LONGEST_PAUSE)
        except Exception:  # noqa: BLE001 -- logged with its trace below, and tried again
            pause = min(max(2 * pause, every), max(every, LONGEST_PAUSE))
            _log.exception(
                "The %s failed and is tried again in %.0f s.", name, pause.total_seconds()
            )
        await asyncio.sleep(pause.total_seconds())
