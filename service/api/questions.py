"""Questions that take computing: off the event loop, a few at a time, and never without end."""

from __future__ import annotations

import asyncio
from collections.abc import Callable
from typing import Any, Final, TypeVar

from starlette.concurrency import run_in_threadpool

from service.errors import Busy

Answer = TypeVar("Answer")

AT_ONCE: Final = 2
"""More would only share the interpreter, and hold up what polls and writes."""
WAITING: Final = 30


class Questions:
    """Runs questions, each in a thread and without a connection: what it needs is values."""

    def __init__(self, at_once: int = AT_ONCE, waiting: int = WAITING) -> None:
        self._turn = asyncio.Semaphore(at_once)
        self._most = at_once + waiting
        self._asked = 0

    async def __call__(self, function: Callable[..., Answer], *arguments: Any) -> Answer:
        """Run one when its turn comes.

        Raises
        ------
        Busy
            Too many are waiting already.
        """
        if self._asked >= self._most:
            raise Busy("Too many questions wait to be computed.")
        self._asked += 1
        try:
            async with self._turn:
                return await run_in_threadpool(function, *arguments)
        finally:
            self._asked -= 1
