"""Records and what became of them -> the bytes that are answered."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict
from functools import cache
from typing import Any, Final, get_args

from sqlalchemy import Connection

from service.api.conditional import record_tag
from service.api.deps import Answered
from service.api.fields import ReadAs
from service.api.resources import RESOURCES
from service.api.schemas.record import Answer
from service.changes.answers import rendered
from service.changes.records import Written
from service.changes.replace import Effect
from service.store.heads import INSTALLATION, position_at
from service.store.history import record_at
from service.store.live import get_record
from service.store.records import Record, body
from service.store.scope import Scope
from service.store.session import WriteSession

FRESH: Final[Mapping[str, str]] = {"Cache-Control": "private, no-cache"}
"""Kept by the caller if it likes, but asked for again each time."""
_MADE_HERE: Final = frozenset({"effective"})


def document_of(scope: Scope, connection: Connection, record: Record) -> dict[str, Any]:
    """Give a record as it is answered."""
    document = _completed(record)
    if record.kind == "basis":
        origin_id = record.fields["derived_from_id"]
        origin = origin_id and get_record(scope, connection, "basis", origin_id)
        document["effective"] = _effective(record, origin or None)
    return document


def document_at(
    scope: Scope, connection: Connection, record: Record, moment: Any
) -> dict[str, Any]:
    """Give a record of the past as it was answered then."""
    document = _completed(record)
    if record.kind == "basis":
        origin_id = record.fields["derived_from_id"]
        position = position_at(scope, connection, INSTALLATION, moment)
        origin = origin_id and record_at(scope, connection, "basis", origin_id, position)
        document["effective"] = _effective(record, origin or None)
    return document


def _completed(record: Record) -> dict[str, Any]:
    """Give a record with every member of its objects: one that was never sent is null."""
    document = body(record)
    for name, model in _objects_of(RESOURCES[record.kind].read):
        document[name] = _whole(document.get(name), model)
    return document


def _whole(value: Any, model: type[Answer]) -> Any:
    if isinstance(value, list):
        return [_whole(each, model) for each in value]
    if not isinstance(value, Mapping):
        return value
    inner = dict(_objects_of(model))
    return {
        name: _whole(value.get(name), inner[name]) if name in inner else value.get(name)
        for name in model.model_fields
    }


@cache
def _objects_of(model: type[Answer]) -> tuple[tuple[str, type[Answer]], ...]:
    """Name the fields that hold an object or a list of them, each with the form of one."""
    found = (
        (name, _object_in(field.annotation))
        for name, field in model.model_fields.items()
        if name not in _MADE_HERE
    )
    return tuple((name, inner) for name, inner in found if inner is not None)


def _object_in(annotation: Any) -> type[Answer] | None:
    if isinstance(annotation, type) and issubclass(annotation, Answer):
        return annotation
    inner = (_object_in(each) for each in get_args(annotation))
    return next((each for each in inner if each is not None), None)


def _effective(basis: Record, origin: Record | None) -> dict[str, Any]:
    """Give every value that counts with its source: the basis's own, else its origin's."""
    counting: dict[str, Any] = {}
    for record in (origin, basis):
        if record is not None:
            sources = record.fields["sources"]
            counting |= {
                name: {"value": value, "source": sources.get(name, "")}
                for name, value in record.fields["values"].items()
            }
    return counting


def effect_document(effect: Effect) -> dict[str, Any]:
    """Give what a change did to one room."""
    return {
        "room_id": effect.room_id,
        "tag": effect.tag,
        "standing": {"before": effect.standing_before, "after": effect.standing_after},
        "worst_oxygen_pct": {
            "before": effect.worst_oxygen_before,
            "after": effect.worst_oxygen_after,
        },
        "findings": {
            "opened": [dict(finding) for finding in effect.opened],
            "cleared": [dict(finding) for finding in effect.cleared],
            "changed": [dict(finding) for finding in effect.changed],
        },
    }


def consequences(written: Written) -> dict[str, Any]:
    """Give what a write did."""
    return {
        "position": written.position,
        "recalculating": written.recalculating,
        "effects": [effect_document(effect) for effect in written.effects],
    }


def written_answer(
    session: WriteSession, written: Written, readings: Sequence[ReadAs] = ()
) -> Answered:
    """Answer a record after a write: 201 with its address where it is new."""
    record = written.record
    document = {
        **document_of(session.scope, session.connection, record),
        **consequences(written),
        "read_as": [asdict(reading) for reading in readings],
    }
    headers = {"ETag": record_tag(record.revision)}
    if written.created:
        headers["Location"] = f"/v1/{RESOURCES[record.kind].path}/{record.id}"
    return Answered(201 if written.created else 200, rendered(document), headers)


def removed_answer(_session: WriteSession, written: Written) -> Answered:
    """Answer the removal of a record with what that did."""
    return Answered(200, rendered({"id": written.record.id, **consequences(written)}))
