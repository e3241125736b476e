"""What answers polls from memory, in front of the framework.

It takes ``GET /v1/rooms/{id}/status`` without a query where key, room and site are known here, and
gives the same bytes, headers and refusals as the documented route. Whatever is odd goes on to that
route: another method, a query, a body, two keys, a room that is not in memory, another replica.
"""

from __future__ import annotations

from functools import partial
from os import urandom
from typing import Final, NamedTuple

from sqlalchemy import Connection
from starlette.concurrency import run_in_threadpool
from starlette.types import ASGIApp, Receive, Scope, Send

from service.api.access import READ, ROLES
from service.api.conditional import not_modified
from service.api.rendering import FRESH
from service.api.service import Service, running_service
from service.api.status import Poll, polled_from_memory, polled_if_held
from service.store.urls import SQLITE

_BEGIN: Final = "/v1/rooms/"
_END: Final = "/status"
_ID_AT: Final = slice(len(_BEGIN), len(_BEGIN) + 36)
LENGTH: Final = len(_BEGIN) + 36 + len(_END)
_MAY_READ: Final = ROLES[READ]
_BEARER: Final = b"bearer "
_BODY: Final = frozenset({b"content-length", b"transfer-encoding"})
# What the limits around the framework make something of: then they are asked to.
_NAMED: Final = frozenset({b"x-request-id", b"traceparent"})

Headers = list[tuple[bytes, bytes]]
Answer = tuple[int, Headers, bytes]

_KEPT: Final[Headers] = [(name.lower().encode(), value.encode()) for name, value in FRESH.items()]
_SAFE: Final[Headers] = [
    (b"x-content-type-options", b"nosniff"),
    (b"referrer-policy", b"no-referrer"),
]


class PollLayer:
    """Answers polls that can be answered from memory; the rest goes on."""

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request."""
        if scope["type"] == "http" and len(scope["path"]) == LENGTH:
            service = running_service(scope)
            answer = None if service is None else await answered(service, scope, _BODY)
            if answer is not None:
                await send_answer(send, answer)
                return
        await self._app(scope, receive, send)


async def send_answer(send: Send, answer: Answer) -> None:
    """Send an answer."""
    status, headers, body = answer
    await send({"type": "http.response.start", "status": status, "headers": headers})
    await send({"type": "http.response.body", "body": body})


async def answered_outermost(service: Service, scope: Scope) -> Answer | None:
    """Answer a poll that nothing in front has looked at: with the headers of every answer."""
    answer = await answered(service, scope, _BODY | _NAMED)
    if answer is not None:
        answer[1].append((b"x-request-id", urandom(16).hex().encode()))
        answer[1].extend(_SAFE)
    return answer


async def answered(service: Service, scope: Scope, odd: frozenset[bytes]) -> Answer | None:
    """Answer a poll from memory; null where it is none, or has a header that is odd here."""
    asked = _asked(scope, odd)
    if asked is None:
        return None
    if service.database.dialect == SQLITE:
        poll = _poll_alone(service, asked)
    else:
        read = partial(_poll_of_replica, service, asked)
        poll = await run_in_threadpool(service.database.read, read)
    return None if poll is None else _answer(poll, asked.if_none_match)


class _Asked(NamedTuple):
    """What a poll asks for."""

    key: bytes
    room_id: str
    if_none_match: bytes | None


def _asked(scope: Scope, odd: frozenset[bytes]) -> _Asked | None:
    path: str = scope["path"]
    if scope["method"] != "GET" or scope["query_string"]:
        return None
    if not (path.startswith(_BEGIN) and path.endswith(_END)):
        return None
    key: bytes | None = None
    if_none_match: bytes | None = None
    for name, value in scope["headers"]:
        if name == b"authorization":
            if key is not None or value[:7].lower() != _BEARER:
                return None
            key = value[7:].strip()
        elif name == b"x-api-key":
            if key is not None:
                return None
            key = value.strip()
        elif name == b"if-none-match":
            if if_none_match is not None:
                return None
            if_none_match = value
        elif name in odd:
            return None
    return _Asked(key, path[_ID_AT], if_none_match) if key else None


def _poll_alone(service: Service, asked: _Asked) -> Poll | None:
    """Answer where this process alone writes: what memory has is what there is."""
    reader = service.keys.scope_at_once(asked.key)
    if reader is None or reader.role not in _MAY_READ:
        return None
    return polled_from_memory(service, reader, asked.room_id)


def _poll_of_replica(service: Service, asked: _Asked, connection: Connection) -> Poll | None:
    """Answer where others write too: key and room are looked at in one snapshot before."""
    reader = service.keys.scope_in(connection, asked.key)
    if reader is None or reader.role not in _MAY_READ:
        return None
    return polled_if_held(service, reader, connection, asked.room_id)


def _answer(poll: Poll, if_none_match: bytes | None) -> Answer:
    etag = poll.etag.encode()
    headers = [*_KEPT, (b"etag", etag)]
    if if_none_match is not None:
        # The usual caller sends back what it was given; the rest is read by the book.
        known = if_none_match == etag or not_modified(if_none_match.decode("latin-1"), poll.etag)
        if known:
            return 304, headers, b""
    body = poll.body
    headers.append((b"content-length", b"%d" % len(body)))
    headers.append((b"content-type", b"application/json"))
    return 200, headers, body
