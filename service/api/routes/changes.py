"""Several record changes in one transaction: all of them or none."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import asdict, replace
from functools import partial
from typing import Annotated, Any

from fastapi import APIRouter, Request
from starlette.responses import Response

from service.api.access import WRITE, Caller, allowed, operation_to_write
from service.api.body import body_of, sent_body, validated
from service.api.deps import Answered, Writing
from service.api.fields import ReadAs, read_as
from service.api.rendering import document_of, effect_document
from service.api.resources import RESOURCES
from service.api.routes.declared import WRITING, answering
from service.api.schemas.changes import ChangesDone, ChangesSent, RecordChangeSent
from service.changes.answers import rendered
from service.changes.records import WrittenTogether, change_several
from service.changes.requested import CREATE, REMOVE, RecordChange, pointing
from service.errors import FieldError, FieldsRefused
from service.store.session import WriteSession

router = APIRouter(prefix="/v1/changes", tags=["Changes"])


@router.post(
    "",
    dependencies=[allowed(WRITE)],
    operation_id="changeSeveral",
    response_model=None,
    responses=answering(ChangesDone, WRITING),
)
async def change_all(
    body: Annotated[ChangesSent, body_of(ChangesSent)], request: Request, write: Writing
) -> Response:
    """Create, change and remove records together, as one entry in each site's history.

    A new record can be named by its tag in those that come after it: a room and the vessels in it
    are made at once. What a vessel leaves and what it enters is judged once, at the end.
    """
    sent = body.changes
    require_kinds(write.caller, sent)
    changes, readings = read_changes(sent, _fields_sent(request))
    answer = partial(_answered, sent, readings)
    return await write(_change_several, changes, answer=answer)


def require_kinds(caller: Caller, sent: Sequence[RecordChangeSent]) -> None:
    """Refuse kinds of records that the caller's role does not write."""
    for operation in {operation_to_write(change.kind) for change in sent}:
        caller.require(operation)


def _fields_sent(request: Request) -> list[Any]:
    value: Any = sent_body(request).value
    return [change.get("fields", {}) for change in value["changes"]]


def read_changes(
    sent: Sequence[RecordChangeSent], fields: Sequence[Any]
) -> tuple[list[RecordChange], list[ReadAs]]:
    """Read each change by the schemas of its kind; what is wrong is gathered over all of them."""
    changes: list[RecordChange] = []
    readings: list[ReadAs] = []
    wrong: list[FieldError] = []
    for number, change in enumerate(sent):
        at = f"/changes/{number}"
        try:
            changes.append(_read_change(change, fields[number], at))
        except FieldsRefused as error:
            wrong.extend(error.errors)
            continue
        readings.extend(_readings(change, fields[number], at))
    if wrong:
        raise FieldsRefused(errors=wrong)
    return changes, readings


def _read_change(change: RecordChangeSent, fields: Any, at: str) -> RecordChange:
    resource = RESOURCES[change.kind]
    if (change.op == CREATE) != (change.id is None):
        detail = "A new record gets its id here." if change.op == CREATE else "Say which record."
        raise FieldsRefused.at(f"{at}/id", "not-allowed", detail)
    if change.op == CREATE and change.if_revision is not None:
        raise FieldsRefused.at(f"{at}/if_revision", "not-allowed", "A new record has none.")
    if change.op == REMOVE:
        if fields:
            raise FieldsRefused.at(f"{at}/fields", "not-allowed", "A removal has no fields.")
        read: dict[str, Any] = {}
    elif change.op == CREATE:
        read = validated(resource.create, fields, at=f"{at}/fields").changes()
    else:
        read = validated(resource.patch, fields, at=f"{at}/fields").changes()
    return RecordChange(change.op, change.kind, change.id, read, change.if_revision)


def _readings(change: RecordChangeSent, fields: Any, at: str) -> Iterator[ReadAs]:
    if change.op == REMOVE:
        return
    resource = RESOURCES[change.kind]
    model = resource.create if change.op == CREATE else resource.patch
    for reading in read_as(fields, model):
        yield replace(reading, pointer=f"{at}/fields{reading.pointer}")


def _change_several(session: WriteSession, changes: Sequence[RecordChange]) -> WrittenTogether:
    # One change alone is worded without its place in a list, which it has here all the same.
    with pointing("/changes/0/fields" if len(changes) == 1 else ""):
        return change_several(session, changes)


def _answered(
    sent: Sequence[RecordChangeSent],
    readings: Sequence[ReadAs],
    session: WriteSession,
    written: WrittenTogether,
) -> Answered:
    items = [
        {
            "op": change.op,
            "kind": change.kind,
            "id": item.record.id,
            "revision": item.record.revision,
            "changed": item.changed,
            "record": None
            if item.removed
            else document_of(session.scope, session.connection, item.record),
        }
        for change, item in zip(sent, written.items, strict=True)
    ]
    document = {
        "items": items,
        "positions": dict(written.positions),
        "recalculating": written.recalculating,
        "effects": [effect_document(effect) for effect in written.effects],
        "read_as": [asdict(reading) for reading in readings],
    }
    return Answered(200, rendered(document))
