"""How a route declares what it answers and what it refuses."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter
from fastapi.routing import APIRoute
from pydantic import BaseModel

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


def add_heads(router: APIRouter) -> None:
    """Let every path that is read be asked for its headers alone."""
    for route in list(router.routes):
        if isinstance(route, APIRoute) and route.methods == {"GET"}:
            router.add_api_route(
                route.path.removeprefix(router.prefix),
                route.endpoint,
                methods=["HEAD"],
                dependencies=route.dependencies,
                response_model=None,
                include_in_schema=False,
                name=f"{route.name}-head",
            )
