"""What a room answers: its status and its assessment."""

from __future__ import annotations

from datetime import datetime
from typing import Annotated

from fastapi import APIRouter, Path, Query, Request
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import READ, allowed
from service.api.conditional import not_modified as has_it_already
from service.api.deps import JSON, AsOf, Reader
from service.api.routes.declared import READING_PAST, answering, not_modified
from service.api.routes.records import position_of
from service.api.schemas.status import AssessmentRead, StatusRead
from service.api.status import Poll, poll_at, poll_of, polled, wait_until_known
from service.api.strict import LARGEST_INTEGER
from service.changes.answers import assessment_answer, stored_status
from service.errors import RecordNotFound
from service.store.findings import findings_at, findings_of_rooms
from service.store.heads import head_of
from service.store.history import StoredAssessment, assessment_at, assessment_now, record_at
from service.store.scope import Scope

router = APIRouter(prefix="/v1/rooms", tags=["Rooms"])

RoomId = Annotated[str, Path(description="The id of the room.")]
AtLeast = Annotated[
    int | None,
    Query(
        ge=0,
        le=LARGEST_INTEGER,
        description="Wait up to 2 s until the site is known here at this position, such as the "
        "one that a write has answered.",
    ),
]


@router.get(
    "/{room_id}/status",
    dependencies=[allowed(READ)],
    operation_id="getRoomStatus",
    response_model=None,
    responses=answering(StatusRead, READING_PAST, "ETag") | not_modified(),
)
async def get_status(
    room_id: RoomId, request: Request, read: Reader, as_of: AsOf, at_least: AtLeast = None
) -> Response:
    """Poll a room: its standing, the case that decides, its findings counted.

    Send the ETag as If-None-Match and poll every few seconds; 304 says that nothing has changed.
    """
    if as_of is not None:
        return _poll_answer(request, await read(_poll_of_past, room_id, as_of))
    if at_least is not None:
        await wait_until_known(read.service, read.caller.scope, room_id, at_least)
    return _poll_answer(request, await poll_of(read.service, read.caller.scope, room_id))


@router.get(
    "/{room_id}/assessment",
    dependencies=[allowed(READ)],
    operation_id="getRoomAssessment",
    response_model=None,
    responses=answering(AssessmentRead, READING_PAST, "ETag") | not_modified(),
)
async def get_assessment(room_id: RoomId, request: Request, read: Reader, as_of: AsOf) -> Response:
    """Give everything that is known of a room: cases, inputs, what was assumed, findings."""
    answer = await read(_assessment, room_id, as_of, read.service.clock.now())
    return _tagged(request, *answer)


def _poll_answer(request: Request, poll: Poll) -> Response:
    if has_it_already(request.headers.get("if-none-match"), poll.etag):
        return Response(status_code=304, headers=dict(poll.headers))
    return Response(poll.body, 200, dict(poll.headers), JSON)


def _tagged(request: Request, poll: Poll, body: bytes) -> Response:
    if has_it_already(request.headers.get("if-none-match"), poll.etag):
        return Response(status_code=304, headers=dict(poll.headers))
    return Response(body, 200, dict(poll.headers), JSON)


def _past(
    scope: Scope, connection: Connection, room_id: str, moment: datetime
) -> tuple[StoredAssessment, int]:
    position = position_of(scope, connection, "room", room_id, moment)
    assessment = assessment_at(scope, connection, room_id, position)
    gone = record_at(scope, connection, "room", room_id, position) is None
    if assessment is None or gone:
        raise RecordNotFound.of("room")
    return assessment, position


def _poll_of_past(scope: Scope, connection: Connection, room_id: str, moment: datetime) -> Poll:
    assessment, position = _past(scope, connection, room_id, moment)
    return poll_at(scope, connection, assessment, position, moment)


def assessment_asked_for(
    scope: Scope, connection: Connection, room_id: str, as_of: datetime | None, now: datetime
) -> tuple[StoredAssessment, Poll, int | None]:
    """Give the assessment of a room, how current it is, and its position where it is past.

    Raises
    ------
    RecordNotFound
        There is no such room for this key, or there was none then.
    """
    if as_of is not None:
        assessment, position = _past(scope, connection, room_id, as_of)
        return assessment, poll_at(scope, connection, assessment, position, as_of), position
    found = assessment_now(scope, connection, room_id)
    if found is None:
        raise RecordNotFound.of("room")
    head = head_of(scope, connection, found.site_id)
    wanted = 0 if head is None else head.wanted_position
    return found, polled(stored_status(found), wanted, now), None


def _assessment(
    scope: Scope, connection: Connection, room_id: str, as_of: datetime | None, now: datetime
) -> tuple[Poll, bytes]:
    assessment, poll, past = assessment_asked_for(scope, connection, room_id, as_of, now)
    findings = (
        findings_of_rooms(scope, connection, [room_id])
        if past is None
        else findings_at(scope, connection, room_id, past)
    )
    open_still = [finding for finding in findings if finding["state"] != "cleared"]
    return poll, assessment_answer(assessment, open_still, poll.currency)
