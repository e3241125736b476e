"""The writer: it alone opens write transactions, runs jobs in them and commits.

A job is a plain function of a session. Its caller is answered once the commit has returned and the
memory has been told; a job that raises leaves nothing behind.
"""

import asyncio
import contextlib
import logging
import queue
import random
import threading
import time
from collections.abc import Callable
from concurrent.futures import CancelledError, Future
from dataclasses import dataclass
from types import TracebackType
from typing import Any, Final, Self, TypeVar

from sqlalchemy.exc import DBAPIError

from service.clock import Clock
from service.errors import Busy
from service.store.engine import Database
from service.store.memory import StatusMemory
from service.store.session import WriteContext, WriteSession
from service.store.urls import SQLITE

Done = TypeVar("Done")

_log = logging.getLogger(__name__)

_TRIES: Final = 3
_FIRST_PAUSE_S: Final = 0.02
# Serialisation failure and deadlock: the whole job is run again, on what is there by then.
_AGAIN: Final = frozenset({"40001", "40P01"})


@dataclass(eq=False, slots=True)
class _Job:
    run: Callable[[WriteSession], Any]
    context: WriteContext
    future: Future[Any]
    committing: bool = False


class Writer:
    """Runs jobs one after the other on SQLite, a few at a time on PostgreSQL.

    Parameters
    ----------
    database : Database
        Where to write; the writer takes the right to write it.
    clock : Clock
        What tells the moment of each job.
    memory : StatusMemory
        What is told of every commit.
    rooms_per_change : int
        How many rooms a change recalculates itself.
    queue_bound : int
        How many jobs may wait; more are refused.
    """

    def __init__(
        self,
        database: Database,
        clock: Clock,
        memory: StatusMemory,
        rooms_per_change: int = 200,
        queue_bound: int = 256,
    ) -> None:
        database.write_engine()
        self._database = database
        self._clock = clock
        self._memory = memory
        self._rooms_per_change = rooms_per_change
        self._waiting: queue.Queue[_Job | None] = queue.Queue(queue_bound)
        self._closing = threading.Lock()
        self._closed = False
        self._threads = [
            threading.Thread(target=self._work, name=f"writer-{number}", daemon=True)
            for number in range(database.writers)
        ]
        for thread in self._threads:
            thread.start()

    @property
    def waiting(self) -> int:
        """Return how many jobs wait."""
        return self._waiting.qsize()

    async def run(self, job: Callable[[WriteSession], Done], context: WriteContext) -> Done:
        """Run a job and return its result after the commit.

        Whoever awaits may be cancelled: a job that has begun is finished all the same, one that
        still waits is dropped.

        Raises
        ------
        Busy
            Too many jobs wait.
        """
        future = self._submitted(job, context, block=False)
        try:
            return await asyncio.wrap_future(future)
        except asyncio.CancelledError:
            future.add_done_callback(_log_unseen)
            raise

    def run_now(self, job: Callable[[WriteSession], Done], context: WriteContext) -> Done:
        """Run a job and wait for it; for callers without an event loop."""
        if threading.current_thread() in self._threads:
            raise RuntimeError("A job cannot wait for another: it would wait for ever.")
        return self._submitted(job, context, block=True).result()

    def close(self) -> None:
        """Finish what waits, then stop; the database stays open."""
        with self._closing:
            if self._closed:
                return
            self._closed = True
        for _ in self._threads:
            self._waiting.put(None)
        for thread in self._threads:
            thread.join()

    def __enter__(self) -> Self:
        """Use the writer for a block."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Close it."""
        self.close()

    def _submitted(
        self, job: Callable[[WriteSession], Done], context: WriteContext, *, block: bool
    ) -> Future[Done]:
        future: Future[Done] = Future()
        while not self._put(_Job(job, context, future)):
            if not block:
                raise Busy("Too many changes wait to be written.")
            time.sleep(_FIRST_PAUSE_S)
        return future

    def _put(self, job: _Job) -> bool:
        # Held while a job is put, so that none comes in behind the signs to stop.
        with self._closing:
            if self._closed:
                raise Busy("The service is shutting down.")
            try:
                self._waiting.put_nowait(job)
            except queue.Full:
                return False
            return True

    def _work(self) -> None:
        while (job := self._waiting.get()) is not None:
            if not job.future.set_running_or_notify_cancel():
                continue
            try:
                result = self._done(job)
            except BaseException as error:  # noqa: BLE001 -- handed to whoever waits for the job
                job.future.set_exception(error)
            else:
                job.future.set_result(result)

    def _done(self, job: _Job) -> Any:
        for tries in range(1, _TRIES + 1):
            try:
                return self._committed(job)
            except DBAPIError as error:
                if tries == _TRIES or not self._worth_another_try(job, error):
                    raise
                _log.info("A write is tried again after %s.", type(error.orig).__name__)
            # The pause differs from writer to writer, so that they do not meet again.
            time.sleep(_FIRST_PAUSE_S * 2**tries * random.uniform(0.5, 1.5))  # noqa: S311
        raise AssertionError("unreachable")

    def _committed(self, job: _Job) -> Any:
        job.committing = False
        with self._database.writing() as connection:
            session = WriteSession(
                connection=connection,
                dialect=self._database.dialect,
                moment=self._clock.now(),
                key_id=job.context.key_id,
                scope=job.context.scope,
                request_id=job.context.request_id,
                reason=job.context.reason,
                stated_at=job.context.stated_at,
                rooms_per_change=self._rooms_per_change,
            )
            result = job.run(session)
            job.committing = True
        self._memory.publish(session.told())
        return result

    def _worth_another_try(self, job: _Job, error: DBAPIError) -> bool:
        if self._database.dialect == SQLITE:
            return False
        if error.connection_invalidated:
            # Lost in the commit, it may have come through; run again, it could be done twice.
            return not job.committing
        return getattr(error.orig, "sqlstate", None) in _AGAIN


def _log_unseen(future: Future[Any]) -> None:
    with contextlib.suppress(CancelledError):
        error = future.exception()
        if error is not None:
            _log.error("A write whose caller was gone failed.", exc_info=error)
