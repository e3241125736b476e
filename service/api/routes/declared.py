"""How a route declares what it answers and what it refuses."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Any

from fastapi.routing import APIRoute
from pydantic import BaseModel
from starlette.routing import BaseRoute, Route
from starlette.types import Receive, Scope, Send

from service.api.problems import ALWAYS, problems
from service.errors import (
    AsOfTooEarly,
    BodyTooLarge,
    Conflict,
    CursorRefused,
    HeaderRefused,
    HeldByAnother,
    IdempotencyMismatch,
    MediaTypeRefused,
    NotJson,
    OlderMethod,
    RecordNotFound,
    RevisionMoved,
    RimewardError,
    StorageFull,
)

LISTING: tuple[type[RimewardError], ...] = (*ALWAYS, CursorRefused)
READING: tuple[type[RimewardError], ...] = (*ALWAYS, RecordNotFound)
READING_PAST: tuple[type[RimewardError], ...] = (*READING, AsOfTooEarly)
WRITING: tuple[type[RimewardError], ...] = (
    *ALWAYS,
    NotJson,
    HeaderRefused,
    BodyTooLarge,
    MediaTypeRefused,
    IdempotencyMismatch,
    RecordNotFound,
    Conflict,
    RevisionMoved,
    OlderMethod,
    HeldByAnother,
    StorageFull,
)

_HEADERS = {
    "ETag": "The tag of what is answered.",
    "Location": "Where the new record is.",
    "Link": 'The next page, as rel="next".',
}


def answering(
    model: type[BaseModel] | None,
    refusing: tuple[type[RimewardError], ...],
    *headers: str,
    status: int = 200,
    described: str = "Done.",
) -> dict[int | str, dict[str, Any]]:
    """Declare the answers of a route: the value of ``responses=``."""
    answer: dict[str, Any] = {"description": described, "headers": _declared(headers)}
    if model is not None:
        answer["model"] = model
    return {status: answer, **problems(*refusing)}


def not_modified() -> dict[int | str, dict[str, Any]]:
    """Declare the answer to a caller who has what is present."""
    return {304: {"description": "You have it already.", "headers": _declared(("ETag",))}}


def _declared(names: tuple[str, ...]) -> dict[str, Any]:
    return {name: {"description": _HEADERS[name], "schema": {"type": "string"}} for name in names}


class _Head:
    """Answers HEAD as the route of the same path answers GET; the server sends no body for it."""

    def __init__(self, route: APIRoute) -> None:
        self._route = route

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        scope["route"] = self._route
        await self._route.app(scope, receive, send)


def with_heads(routes: Iterable[BaseRoute]) -> Iterator[BaseRoute]:
    """Give each route, and for each that is read another one that answers its headers alone."""
    for route in routes:
        yield route
        if isinstance(route, APIRoute) and "GET" in (route.methods or ()):
            yield Route(route.path, _Head(route), methods=["HEAD"], include_in_schema=False)
