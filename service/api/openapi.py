"""The description of the API: what the framework knows of it, finished by hand."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, Final

from fastapi.openapi.utils import get_openapi
from fastapi.routing import APIRoute, iter_route_contexts
from starlette.routing import BaseRoute

from service.api.access import declared_operation
from service.api.body import declare_bodies
from service.api.problems import PROBLEM_JSON, declare_problems
from service.changes.cautions import CAUTIONS

TITLE: Final = "Rimeward"
DESCRIPTION: Final = f"""What the records of cryogen rooms say, recalculated with every change.

Send a key as `Authorization: Bearer …` or `X-API-Key: …`. Quantities are in the unit of their
name, and may be sent as a text with another one, such as `"47 gal"`. Errors are problem documents;
[their types in words](/docs/problems). Writes take `If-Match`, `Idempotency-Key`, `Change-Reason`
and `Change-Stated-At`.

**{CAUTIONS}**
"""
TAGS: Final = (
    ("Sites", "Where rooms are: elevation, time zone, and the basis that they are judged by."),
    ("Rooms", "Rooms and other spaces that people enter, with their status and assessment."),
    (
        "Openings",
        "Doors, hatches and other openings between rooms, through which gas that is let go in one "
        "is followed to the others.",
    ),
    ("VentilationUnits", "Fans and air handling units, and the rooms that they serve."),
    ("Vessels", "Vessels of cryogenic liquid, gas or ice; without a room they stand outdoors."),
    (
        "SupplyLines",
        "Lines that bring liquid or gas into rooms, with what feeds them and what shuts them.",
    ),
    ("Detectors", "Gas detectors."),
    ("Controls", "Administrative measures of rooms and vessels, with the day of their last check."),
    ("Bases", "The values that rooms are judged by, each with its source."),
    ("Fluids", "Reference data of fluids; a site may add its own mixtures."),
    ("Changes", "Several record changes in one transaction."),
    ("Findings", "What the records of rooms show to be wrong, and what to do."),
    ("Summary", "Sites in counts, and the rooms that stand worst."),
    ("Methods", "The methods that results name and the rules that findings come from, in words."),
    ("Keys", "Who may ask, in which role and for which sites."),
    ("Operation", "Whether the process lives and can serve."),
)
_SCHEMES: Final[Mapping[str, Mapping[str, str]]] = {
    "bearer": {"type": "http", "scheme": "bearer", "description": "A key as a bearer token."},
    "apiKey": {"type": "apiKey", "in": "header", "name": "X-API-Key", "description": "A key."},
}
_WRITE_HEADERS: Final[Mapping[str, tuple[str, Mapping[str, Any]]]] = {
    "Idempotency-Key": (
        "Repeat the request with the same key, and it is done once.",
        {"pattern": "^[!#-~]{1,255}$"},
    ),
    "Change-Reason": ("Why, in a few words; it stays in the history.", {"maxLength": 500}),
    "Change-Stated-At": (
        "When it happened in the world, if that was earlier.",
        {"format": "date-time"},
    ),
}
_IF_MATCH: Final[Mapping[str, tuple[str, Mapping[str, Any]]]] = {
    "If-Match": (
        "The ETag of the record as you read it.",
        {"pattern": r'^(\*|(W/)?"[0-9]{1,18}"(, ?(W/)?"[0-9]{1,18}"){0,9})$'},
    ),
}
_WRITES: Final = frozenset({"post", "put", "patch", "delete"})


def described(routes: Sequence[BaseRoute], version: str) -> dict[str, Any]:
    """Make the OpenAPI document of some routes."""
    document = get_openapi(
        title=TITLE,
        version=version,
        openapi_version="3.1.0",
        description=DESCRIPTION,
        routes=routes,
        tags=[{"name": name, "description": text} for name, text in TAGS],
        servers=[{"url": "/"}],
        license_info={"name": "Apache-2.0", "identifier": "Apache-2.0"},
    )
    declare_bodies(document, routes)
    declare_problems(document)
    document.setdefault("components", {})["securitySchemes"] = {
        name: dict(scheme) for name, scheme in _SCHEMES.items()
    }
    for path, method in _with_a_key(routes):
        operation = document["paths"].get(path, {}).get(method)
        if operation is not None:
            operation["security"] = [{name: []} for name in _SCHEMES]
            operation.setdefault("parameters", []).extend(_headers(path, method))
            if not operation["parameters"]:
                del operation["parameters"]
    for path in document["paths"].values():
        _without_own_validation_error(path)
    _share_problems(document)
    return document


def _with_a_key(routes: Iterable[BaseRoute]) -> Iterable[tuple[str, str]]:
    for context in iter_route_contexts(list(routes)):
        route = context.original_route
        if isinstance(route, APIRoute) and declared_operation(route):
            for method in context.methods or ():
                yield str(context.path_format), method.lower()


def _headers(path: str, method: str) -> list[dict[str, Any]]:
    if method not in _WRITES:
        return []
    conditional = method in ("patch", "delete", "put") and not path.startswith("/v1/keys")
    named = {**_WRITE_HEADERS, **_IF_MATCH} if conditional else _WRITE_HEADERS
    return [
        {
            "name": name,
            "in": "header",
            "required": False,
            "description": text,
            "schema": {"type": "string", **form},
        }
        for name, (text, form) in named.items()
    ]


def _without_own_validation_error(path: dict[str, Any]) -> None:
    """Drop the 422 that the framework adds to an open path, which refuses nothing."""
    for operation in path.values():
        if "security" not in operation:
            operation.get("responses", {}).pop("422", None)


def _share_problems(document: dict[str, Any]) -> None:
    """Write each answer of a problem once, and refer to it: else most of the document is these."""
    shared: dict[str, dict[str, Any]] = {}
    names: dict[str, str] = {}
    for path in document["paths"].values():
        for operation in path.values():
            for status, response in operation["responses"].items():
                if status[:1] not in "45" or PROBLEM_JSON not in response.get("content", {}):
                    continue
                text = json.dumps(response, sort_keys=True)
                name = names.setdefault(text, f"Problem{status}-{_nth(names, status)}")
                shared[name] = response
                operation["responses"][status] = {"$ref": f"#/components/responses/{name}"}
    document["components"]["responses"] = shared


def _nth(names: Mapping[str, str], status: str) -> int:
    return 1 + sum(name.startswith(f"Problem{status}-") for name in names.values())
