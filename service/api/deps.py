"""What routes depend on: the reader, the writer, a moment of the past.

A route names one of them and calls it once: ``await read(function, …)`` runs a function of the
store on a snapshot, ``await write(function, …, answer=…)`` runs a function of ``changes`` in the
writer and answers after the commit.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import datetime
from functools import partial
from typing import Annotated, Any, Final, TypeVar

from fastapi import Depends, Query, Request
from sqlalchemy import Connection
from sqlalchemy.exc import IntegrityError
from starlette.concurrency import run_in_threadpool
from starlette.responses import Response

from service.api.access import READ_PAST, Caller, caller_of
from service.api.body import sent_body
from service.api.conditional import WriteHeaders, write_headers
from service.api.problems import request_id_of
from service.api.service import Service, service_of
from service.changes.method import refuse_older_method
from service.clock import moment_of
from service.errors import (
    FieldsRefused,
    IdempotencyMismatch,
    IdempotencyRunning,
    RimewardError,
    SecretShownOnce,
)
from service.store.answers import StoredAnswer, find_answer, keep_answer
from service.store.scope import Scope
from service.store.session import WriteContext, WriteSession

Done = TypeVar("Done")

JSON: Final = "application/json"
NOT_KEPT_BY_CACHES: Final[Mapping[str, str]] = {"Cache-Control": "no-store"}


@dataclass(frozen=True, slots=True)
class Answered:
    """A finished answer: rendered inside the transaction, sent after it."""

    status: int
    body: bytes
    headers: Mapping[str, str] = field(default_factory=dict)
    secret: bool = False
    """It shows a secret, so that it is not kept for a repeated request."""

    def response(self) -> Response:
        """Make what the framework sends."""
        return Response(self.body, self.status, dict(self.headers), JSON)


@dataclass(frozen=True, slots=True)
class Read:
    """Runs functions of the store on a snapshot, off the event loop."""

    service: Service
    caller: Caller

    async def __call__(
        self, function: Callable[..., Done], *arguments: Any, **options: Any
    ) -> Done:
        """Run a function that takes a scope and a connection first."""
        job = partial(_on_connection, function, self.caller.scope, arguments, options)
        return await run_in_threadpool(self.service.database.read, job)


def _on_connection(
    function: Callable[..., Done],
    scope: Scope,
    arguments: tuple[Any, ...],
    options: Mapping[str, Any],
    connection: Connection,
) -> Done:
    return function(scope, connection, *arguments, **options)


async def _read(request: Request) -> Read:
    return Read(service_of(request), caller_of(request))


@dataclass(frozen=True, slots=True)
class Write:
    """Runs functions of ``changes`` in the writer, and answers once they are committed."""

    service: Service
    caller: Caller
    request: Request
    headers: WriteHeaders

    async def __call__(
        self,
        function: Callable[..., Done],
        *arguments: Any,
        answer: Callable[[WriteSession, Done], Answered],
        **options: Any,
    ) -> Response:
        """Run a function that takes a session first, and render its result in its transaction."""
        job = partial(_answered, function, arguments, options, answer)
        token = self.headers.idempotency_key
        if token is None:
            return (await self._run(job)).response()
        asked = Asked(self.caller.scope.key_id, self.request.url.path, token, self._fingerprint())
        with _in_flight(self.service.in_flight, asked):
            try:
                answered = await self._run(partial(_once, job, asked))
            except (IntegrityError, RimewardError):
                # Another replica may have done the same request while this one ran, so that what
                # it made stood in the way here. Then its answer is there now.
                kept = await self._run(partial(_kept, asked))
                if kept is None:
                    raise
                answered = kept
        return answered.response()

    async def _run(self, job: Callable[[WriteSession], Done]) -> Done:
        return await self.service.writer.run(partial(_by_this_method, job), self._context())

    def _context(self) -> WriteContext:
        scope = self.caller.scope
        return WriteContext(
            key_id=scope.key_id,
            scope=scope,
            request_id=request_id_of(self.request.scope),
            reason=self.headers.reason,
            stated_at=self.headers.stated_at,
        )

    def _fingerprint(self) -> str:
        """Tell this request from another one under the same Idempotency-Key."""
        line = f"{self.request.method} {self.request.url.path}?{self.request.url.query}\n"
        return hashlib.sha256(line.encode() + _body_bytes(self.request)).hexdigest()


def _body_bytes(request: Request) -> bytes:
    try:
        return sent_body(request).raw
    except KeyError:
        return b""  # A removal has none.


async def _write(request: Request) -> Write:
    service = service_of(request)
    headers = write_headers(request.headers, service.clock.now())
    return Write(service, caller_of(request), request, headers)


@dataclass(frozen=True, slots=True)
class Asked:
    """A request with an Idempotency-Key."""

    key_id: str
    path: str
    token: str
    fingerprint: str


@contextmanager
def _in_flight(running: set[tuple[str, str, str]], asked: Asked) -> Iterator[None]:
    """Refuse the same request while its first one runs."""
    request = (asked.key_id, asked.path, asked.token)
    if request in running:
        raise IdempotencyRunning
    running.add(request)
    try:
        yield
    finally:
        running.discard(request)


def _by_this_method(job: Callable[[WriteSession], Done], session: WriteSession) -> Done:
    refuse_older_method(session)
    return job(session)


def _answered(
    function: Callable[..., Done],
    arguments: tuple[Any, ...],
    options: Mapping[str, Any],
    answer: Callable[[WriteSession, Done], Answered],
    session: WriteSession,
) -> Answered:
    return answer(session, function(session, *arguments, **options))


def _once(job: Callable[[WriteSession], Answered], asked: Asked, session: WriteSession) -> Answered:
    """Run a job, or give the answer that was kept when the same request came before."""
    kept = _kept(asked, session)
    if kept is not None:
        return kept
    answered = job(session)
    keep_answer(
        session,
        StoredAnswer(
            key_id=asked.key_id,
            path=asked.path,
            token=asked.token,
            fingerprint=asked.fingerprint,
            status=answered.status,
            headers=dict(answered.headers),
            body=None if answered.secret else answered.body,
            kept_at=session.moment,
        ),
    )
    return answered


def _kept(asked: Asked, session: WriteSession) -> Answered | None:
    """Give the answer that was kept of a request, if it was done before."""
    kept = find_answer(session, asked.key_id, asked.path, asked.token)
    if kept is None:
        return None
    if kept.fingerprint != asked.fingerprint:
        raise IdempotencyMismatch("This Idempotency-Key was used before for another request.")
    if kept.body is None:
        raise SecretShownOnce
    return Answered(kept.status, kept.body, kept.headers)


async def _as_of(
    request: Request,
    as_of: Annotated[
        str | None,
        Query(
            description="A moment of the past, inclusive; the answer is what was answered then. "
            "Needs an auditor or an administrator.",
            examples=["2027-03-01T08:00:00Z"],
            json_schema_extra={"format": "date-time"},
        ),
    ] = None,
) -> datetime | None:
    if as_of is None:
        return None
    caller_of(request).require(READ_PAST)
    try:
        moment = moment_of(as_of)
    except ValueError as error:
        raise FieldsRefused.parameter("as_of", "not-a-moment", str(error)) from None
    if moment > service_of(request).clock.now():
        raise FieldsRefused.parameter("as_of", "in-the-future", "The moment lies in the future.")
    return moment


Reader = Annotated[Read, Depends(_read)]
Writing = Annotated[Write, Depends(_write)]
AsOf = Annotated[datetime | None, Depends(_as_of)]
