"""The body of a request: read within a limit, parsed strictly, made into a model.

A route writes ``vessel: Annotated[VesselCreate, body_of(VesselCreate)]``. Being a dependency, it
runs after those that ask who calls, so that a caller without a key learns nothing but that.
FastAPI does not know it as a body; ``declare_bodies`` puts it into the OpenAPI document.
"""

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from email.message import Message
from typing import Any, Final, Generic, TypeVar

from fastapi import Depends, Request
from fastapi.routing import iter_route_contexts
from pydantic import BaseModel, ValidationError
from pydantic.json_schema import models_json_schema
from starlette.routing import BaseRoute

from service.api.refusals import field_errors
from service.api.strict import Json, parse_json
from service.errors import BodyTooLarge, FieldsRefused, MediaTypeRefused

Model = TypeVar("Model", bound=BaseModel)

LARGEST_BODY: Final = 1_000_000
MEDIA_TYPES: Final = ("application/json", "application/merge-patch+json")
_SENT: Final = "rimeward.sent"
_REFERENCE: Final = "#/components/schemas/{model}"


@dataclass(frozen=True, slots=True)
class Sent:
    """A body as it came: its bytes, and the plain values in them."""

    raw: bytes
    value: Json


async def read_body(request: Request, model: type[Model], *, limit: int = LARGEST_BODY) -> Model:
    """Read, parse and validate the body of a request.

    Raises
    ------
    MediaTypeRefused, BodyTooLarge, NotJson, FieldsRefused
        The body is not what it should be; nothing of it is repeated.
    """
    refuse_encoding(request)
    refuse_media_type(request)
    raw = await read_bytes(request, limit)
    sent = Sent(raw, parse_json(raw))
    request.scope[_SENT] = sent
    return _validated(model, raw, sent.value, "")


def sent_body(request: Request) -> Sent:
    """Give the body that ``read_body`` has read: for its fingerprint and for ``read_as``."""
    sent: Sent = request.scope[_SENT]
    return sent


def validated(model: type[Model], value: Json, *, at: str = "") -> Model:
    """Validate values that were parsed already, such as one entry of a list of changes."""
    return _validated(model, json.dumps(value, ensure_ascii=False).encode(), value, at)


def _validated(model: type[Model], raw: bytes, value: Json, at: str) -> Model:
    try:
        # From JSON and not from the values: only then does a strict model take "in-service" for a
        # member of an enumeration.
        return model.model_validate_json(raw)
    except ValidationError as error:
        found = error.errors(include_url=False, include_input=False)
        raise FieldsRefused(errors=field_errors(found, value, at=at)) from None


def refuse_encoding(request: Request) -> None:
    """Refuse a compressed body: there is nothing to unpack, so nothing can burst."""
    if request.headers.get("content-encoding", "identity").strip().lower() != "identity":
        raise MediaTypeRefused(
            "Send the body without Content-Encoding.", headers={"Accept-Encoding": "identity"}
        )


def refuse_media_type(request: Request) -> None:
    """Refuse what does not say that it is JSON in UTF-8."""
    message = Message()
    message["content-type"] = request.headers.get("content-type", "")
    kind = message.get_content_type() if request.headers.get("content-type") else ""
    charset = str(message.get_param("charset", "utf-8")).lower()
    is_json = kind == "application/json" or (kind.count("/") == 1 and kind.endswith("+json"))
    if not is_json or charset not in ("utf-8", "utf8"):
        raise MediaTypeRefused(
            f"Send Content-Type: {' or '.join(MEDIA_TYPES)}, in UTF-8.",
            headers={"Accept": ", ".join(MEDIA_TYPES), "Accept-Patch": ", ".join(MEDIA_TYPES)},
        )


async def read_bytes(request: Request, limit: int = LARGEST_BODY) -> bytes:
    """Read the body as it comes in, and stop at once where it grows beyond the limit."""
    announced = request.headers.get("content-length", "")
    if announced.isascii() and announced.isdigit() and int(announced[:20]) > limit:
        raise BodyTooLarge.above(limit)
    body = bytearray()
    async for chunk in request.stream():
        body += chunk
        if len(body) > limit:
            raise BodyTooLarge.above(limit)
    return bytes(body)


class BodyReader(Generic[Model]):
    """The dependency that reads a body into a model; it carries the model for the document."""

    def __init__(self, model: type[Model], limit: int) -> None:
        self.model = model
        self.limit = limit

    async def __call__(self, request: Request) -> Model:
        """Read the body of this request."""
        return await read_body(request, self.model, limit=self.limit)


def body_of(model: type[BaseModel], *, limit: int = LARGEST_BODY) -> Any:
    """Make the mark beside a parameter: ``Annotated[VesselCreate, body_of(VesselCreate)]``."""
    return Depends(BodyReader(model, limit))


def declare_bodies(document: dict[str, Any], routes: Sequence[BaseRoute]) -> None:
    """Write the request bodies of all routes into an OpenAPI document, in place."""
    bodies = list(_bodies(routes))
    models = list(dict.fromkeys(model for _, _, model in bodies))
    keyed, made = models_json_schema(
        [(model, "validation") for model in models], ref_template=_REFERENCE
    )
    present = document.setdefault("components", {}).setdefault("schemas", {})
    references, definitions = _apart(
        {model: keyed[model, "validation"] for model in models}, made.get("$defs", {}), present
    )
    present.update(definitions)
    for path, method, model in bodies:
        operation = document.get("paths", {}).get(path, {}).get(method.lower())
        if operation is not None:
            kinds = MEDIA_TYPES if method == "PATCH" else MEDIA_TYPES[:1]
            content = {kind: {"schema": references[model]} for kind in kinds}
            operation["requestBody"] = {"required": True, "content": content}


def _apart(
    references: Mapping[type[BaseModel], Any], definitions: Any, present: Mapping[str, Any]
) -> tuple[dict[type[BaseModel], Any], dict[str, Any]]:
    """Rename what is there already in another form: an object as answered has all its members."""
    taken = [
        name for name in definitions if present.get(name, definitions[name]) != definitions[name]
    ]
    text = json.dumps([list(references.values()), definitions])
    for name in taken:
        text = text.replace(
            json.dumps(_REFERENCE.format(model=name)),
            json.dumps(_REFERENCE.format(model=f"{name}Sent")),
        )
    renamed_references, renamed = json.loads(text)
    return (
        dict(zip(references, renamed_references, strict=True)),
        {f"{name}Sent" if name in taken else name: schema for name, schema in renamed.items()},
    )


def _bodies(routes: Sequence[BaseRoute]) -> Iterator[tuple[str, str, type[BaseModel]]]:
    for context in iter_route_contexts(routes):
        dependant = getattr(context, "dependant", None)
        if dependant is None or context.path_format is None:
            continue
        for reader in _readers(dependant):
            for method in sorted(context.methods or ()):
                yield context.path_format, method, reader.model


def _readers(dependant: Any) -> Iterator[BodyReader[Any]]:
    if isinstance(dependant.call, BodyReader):
        yield dependant.call
    for below in dependant.dependencies:
        yield from _readers(below)
