"""The one place where an error becomes an answer: a problem document by RFC 9457.

It reads a class's ``status``, ``type`` and ``title`` and an error's ``detail``, ``errors`` and
``headers``, and nothing else. What was sent is never repeated but in the pointer to it.
"""

import json
import logging
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from http import HTTPStatus
from http.client import responses
from typing import Any, Final
from uuid import uuid4

from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from fastapi.routing import iter_route_contexts
from starlette.exceptions import HTTPException
from starlette.requests import ClientDisconnect
from starlette.responses import Response
from starlette.routing import Match
from starlette.types import Scope, Send

from service.api.refusals import field_errors, parameter_errors
from service.errors import (
    BodyTooLarge,
    Busy,
    FieldError,
    FieldsRefused,
    InternalFault,
    KeyMissing,
    KeyUnknown,
    MediaTypeRefused,
    MethodRefused,
    NotAcceptable,
    NotAllowed,
    NotJson,
    PathNotFound,
    RimewardError,
    TooManyRequests,
)

PROBLEM_JSON: Final = "application/problem+json"
# What any operation with a key may answer, whatever it does.
ALWAYS: Final[tuple[type[RimewardError], ...]] = (
    KeyMissing,
    KeyUnknown,
    NotAllowed,
    FieldsRefused,
    TooManyRequests,
    InternalFault,
    Busy,
)

_REQUEST_ID: Final = "rimeward.request_id"
_UUID: Final = re.compile(r"[0-9a-f]{8}(?:-[0-9a-f]{4}){3}-[0-9a-f]{12}")
_LOG: Final = logging.getLogger("rimeward.api")
_BY_STATUS: Final[Mapping[int, type[RimewardError]]] = {
    404: PathNotFound,
    406: NotAcceptable,
    413: BodyTooLarge,
    415: MediaTypeRefused,
}
PROBLEM_SCHEMA: Final[Mapping[str, Any]] = {
    "type": "object",
    "description": "What went wrong (RFC 9457).",
    "required": ["type", "title", "status", "detail", "instance", "errors"],
    "properties": {
        "type": {
            "type": "string",
            "format": "uri-reference",
            "description": "Which problem; it resolves to its description.",
        },
        "title": {"type": "string"},
        "status": {"type": "integer", "minimum": 400, "maximum": 599},
        "detail": {"type": "string"},
        "instance": {
            "type": "string",
            "format": "uri-reference",
            "description": "The request, by the id that X-Request-Id answers and the log has.",
        },
        "errors": {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["code", "detail"],
                "properties": {
                    "pointer": {
                        "type": "string",
                        "description": "Where in the body, by RFC 6901; the whole body is ''.",
                    },
                    "parameter": {
                        "type": "string",
                        "description": "Which query parameter, part of the path or header.",
                    },
                    "code": {"type": "string"},
                    "detail": {"type": "string"},
                },
            },
        },
    },
}


@dataclass(frozen=True, slots=True)
class Problem:
    """A problem on its way out."""

    type: str
    title: str
    status: int
    detail: str
    errors: tuple[FieldError, ...]
    headers: Mapping[str, str]

    @classmethod
    def of(cls, error: RimewardError) -> "Problem":
        """Read an error of the tree."""
        return cls(
            error.uri(), error.title, error.status, error.detail, error.errors, error.headers
        )

    def body(self, request_id: str) -> bytes:
        """Write the document."""
        document = {
            "type": self.type,
            "title": self.title,
            "status": self.status,
            "detail": self.detail,
            "instance": instance_of(request_id),
            "errors": [_written(error) for error in self.errors],
        }
        # In ASCII, so that no character can be one that UTF-8 has no form for.
        return json.dumps(document).encode()

    def all_headers(self) -> dict[str, str]:
        """Give its headers with those of every problem; a cache must not keep a refusal."""
        return {"Content-Type": PROBLEM_JSON, "Cache-Control": "no-store", **self.headers}


def _written(error: FieldError) -> dict[str, str]:
    place = {"parameter": error.parameter} if error.parameter else {"pointer": error.pointer}
    return place | {"code": error.code, "detail": error.detail}


def request_id_of(scope: Scope) -> str:
    """Give the id of a request, making one where nothing in front has done so."""
    request_id: str = scope.setdefault(_REQUEST_ID, "") or str(uuid4())
    scope[_REQUEST_ID] = request_id
    return request_id


def set_request_id(scope: Scope, request_id: str) -> None:
    """Fix the id of a request."""
    scope[_REQUEST_ID] = request_id


def instance_of(request_id: str) -> str:
    """Write a request's id as a URI."""
    kind = "uuid" if _UUID.fullmatch(request_id) else "x-request-id"
    return f"urn:{kind}:{request_id}"


def problem_bytes(error: RimewardError, request_id: str) -> bytes:
    """Write the problem document of an error, for answers given outside of the framework."""
    return Problem.of(error).body(request_id)


async def send_problem(send: Send, scope: Scope, error: RimewardError) -> None:
    """Answer an error from plain ASGI code."""
    problem = Problem.of(error)
    body = problem.body(request_id_of(scope))
    headers = problem.all_headers() | {"Content-Length": str(len(body))}
    await send(
        {
            "type": "http.response.start",
            "status": problem.status,
            "headers": [
                (name.lower().encode("latin-1"), value.encode("latin-1"))
                for name, value in headers.items()
            ],
        }
    )
    await send({"type": "http.response.body", "body": body})


def install_problem_handlers(app: FastAPI) -> None:
    """Let every error of an application be answered as a problem."""
    # Bodies made by `HTTPException` are plain JSON and those of the default handlers repeat input.
    app.add_exception_handler(RimewardError, _on_rimeward_error)
    app.add_exception_handler(RequestValidationError, _on_invalid_request)
    app.add_exception_handler(HTTPException, _on_http_exception)
    app.add_exception_handler(ClientDisconnect, _on_disconnect)
    app.add_exception_handler(Exception, _on_fault)


def _answer(request: Request, problem: Problem) -> Response:
    body = problem.body(request_id_of(request.scope))
    return Response(body, status_code=problem.status, headers=problem.all_headers())


async def _on_rimeward_error(request: Request, error: Exception) -> Response:
    if not isinstance(error, RimewardError):
        return await _on_fault(request, error)
    return _answer(request, Problem.of(error))


async def _on_invalid_request(request: Request, error: Exception) -> Response:
    if not isinstance(error, RequestValidationError):
        return await _on_fault(request, error)
    in_body = [found for found in error.errors() if found["loc"][:1] == ("body",)]
    elsewhere = [found for found in error.errors() if found["loc"][:1] != ("body",)]
    inside = [{**found, "loc": found["loc"][1:]} for found in in_body]
    errors = (*parameter_errors(elsewhere), *field_errors(inside, error.body))
    return _answer(request, Problem.of(FieldsRefused(errors=errors)))


async def _on_http_exception(request: Request, error: Exception) -> Response:
    if not isinstance(error, HTTPException):
        return await _on_fault(request, error)
    return _answer(request, _problem_of_status(request, error))


async def _on_disconnect(request: Request, _error: Exception) -> Response:
    # Nobody is there to read it; the log gets no fault for a caller who hung up.
    return _answer(request, Problem.of(NotJson("The body ended before it was complete.")))


async def _on_fault(request: Request, error: Exception) -> Response:
    log_fault(request.scope, error)
    return _answer(request, Problem.of(InternalFault()))


def log_fault(scope: Scope, error: Exception) -> None:
    """Write a fault of the service to the log, under the id that the caller is told."""
    _LOG.error(
        "Fault in %s %s, request %s",
        scope.get("method", ""),
        _route_template(scope),
        request_id_of(scope),
        exc_info=error,
        extra={"request_id": request_id_of(scope)},
    )


def _route_template(scope: Scope) -> str:
    # The template and not the path: a log line is no place for what a caller made up.
    return str(getattr(scope.get("route"), "path", "an unknown path"))


def _problem_of_status(request: Request, error: HTTPException) -> Problem:
    """Make a problem of what the framework raises; its detail may repeat input and stays out."""
    status = error.status_code
    if status == HTTPStatus.METHOD_NOT_ALLOWED:
        return Problem.of(MethodRefused.but(_methods_of(request)))
    headers = dict(error.headers or {})
    if status in _BY_STATUS:
        return Problem.of(_BY_STATUS[status](headers=headers))
    phrase = responses.get(status, "Error")
    return Problem("about:blank", phrase, status, f"{phrase}.", (), headers)


def _methods_of(request: Request) -> Iterator[str]:
    """List every method that a path takes; the framework names those of one route only."""
    for context in iter_route_contexts(request.app.routes):
        match, _ = context.matches(request.scope)
        if match is not Match.NONE:
            yield from context.methods or ()


def problems(*kinds: type[RimewardError]) -> dict[int | str, dict[str, Any]]:
    """Declare what an operation may refuse: the value of ``responses=``."""
    declared: dict[int | str, dict[str, Any]] = {}
    for status in sorted({kind.status for kind in kinds}):
        alike = [kind for kind in kinds if kind.status == status]
        examples = {kind.type: {"summary": kind.title, "value": _example(kind)} for kind in alike}
        content = {
            "schema": {"$ref": "#/components/schemas/Problem"},
            "examples": examples,
        }
        description = "; ".join(dict.fromkeys(kind.title for kind in alike)) + "."
        declared[status] = {"description": description, "content": {PROBLEM_JSON: content}}
    return declared


def _example(kind: type[RimewardError]) -> dict[str, Any]:
    return {
        "type": kind.uri(),
        "title": kind.title,
        "status": kind.status,
        "detail": f"{kind.title}.",
        "instance": "urn:uuid:01890a5d-ac96-774b-bcce-b302099a8057",
        "errors": [],
    }


def declare_problems(document: dict[str, Any]) -> None:
    """Finish an OpenAPI document, in place: errors are problem documents and nothing else."""
    schemas = document.setdefault("components", {}).setdefault("schemas", {})
    schemas["Problem"] = dict(PROBLEM_SCHEMA)
    for name in ("HTTPValidationError", "ValidationError"):
        schemas.pop(name, None)
    for path in document.get("paths", {}).values():
        for operation in path.values():
            for status, response in operation.get("responses", {}).items():
                if status[:1] in "45" or status == "default":
                    _only_problem(response, status)


def _only_problem(response: dict[str, Any], status: str) -> None:
    content = response.get("content", {})
    if PROBLEM_JSON in content:
        response["content"] = {PROBLEM_JSON: content[PROBLEM_JSON]}
    elif status == str(FieldsRefused.status):
        # The framework's own entry, for any operation with parameters.
        response.update(problems(FieldsRefused)[FieldsRefused.status])
    else:
        reference = {"schema": {"$ref": "#/components/schemas/Problem"}}
        response["content"] = {PROBLEM_JSON: reference}
