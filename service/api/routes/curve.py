"""The course of one case of a room: as values, as a table, as a picture."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Annotated, Any, Final

from fastapi import APIRouter, Query, Request
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import LONGEST_PARAMETER, READ, allowed
from service.api.curve_picture import curve_picture
from service.api.deps import JSON, AsOf, Reader
from service.api.forms import CSV, SVG, FormatText, csv_bytes, form_of
from service.api.rendering import FRESH
from service.api.routes.declared import READING_PAST, answering
from service.api.routes.room_answers import RoomId, assessment_asked_for
from service.api.schemas.curve import CurveRead
from service.audit.air import AIRFLOWS, PROVEN
from service.audit.curve import Choice
from service.audit.hazards import HAZARDS
from service.audit.inputs import RoomValues
from service.audit.release_rows import VARIANTS
from service.audit.releases import RELEASES
from service.changes.answers import rendered
from service.changes.curve import (
    COLUMNS,
    CourseOfRoom,
    course_of_room,
    curve_document,
    curve_rows,
    room_asked_of,
)
from service.errors import CannotCompute, FieldsRefused, NoSuchCase, NotAcceptable
from service.store.history import StoredAssessment
from service.store.scope import Scope

router = APIRouter(prefix="/v1/rooms", tags=["Rooms"])

FEWEST: Final = 2
MOST: Final = 2000
USUAL: Final = 200
# A picture has its own style and nothing else.
PICTURE_POLICY: Final = "default-src 'none'; style-src 'unsafe-inline'; frame-ancestors 'none'"
WORDS: Final[Mapping[str, tuple[str, ...]]] = {
    "release": tuple(release.slug for release in RELEASES),
    "airflow": tuple(airflow for airflow in AIRFLOWS if airflow != PROVEN),
    "hazard": tuple(dict.fromkeys(hazard.slug for hazard in HAZARDS)),
    "gas": tuple(dict.fromkeys(hazard.gas for hazard in HAZARDS)),
    "variant": VARIANTS,
}


def _word(name: str, text: str) -> Any:
    return Query(
        max_length=LONGEST_PARAMETER,
        description=text,
        json_schema_extra={"enum": list(WORDS[name])},
    )


Release = Annotated[str | None, _word("release", "What is let go.")]
Airflow = Annotated[str | None, _word("airflow", "The air that counts.")]
Hazard = Annotated[str | None, _word("hazard", "What it is judged for.")]
Gas = Annotated[str | None, _word("gas", "The gas judged.")]
VesselId = Annotated[
    str | None,
    Query(
        max_length=LONGEST_PARAMETER,
        description="The id of a vessel that is let go, or of a line that breaks.",
    ),
]
Variant = Annotated[str | None, _word("variant", "The form of a release that has several.")]
Points = Annotated[
    int,
    Query(
        ge=FEWEST,
        le=MOST,
        description="How many points at most. Those at which something happens come first, "
        "the others lie where the course changes.",
    ),
]
_FORMS: Final[dict[str, Any]] = {
    CSV: {"schema": {"type": "string", "description": f"A row a point: {', '.join(COLUMNS)}."}},
    SVG: {"schema": {"type": "string", "description": "A picture, complete by itself."}},
}


def _answers() -> dict[int | str, dict[str, Any]]:
    declared = answering(
        CurveRead,
        (*READING_PAST, NoSuchCase, CannotCompute, NotAcceptable),
        described="The course.",
    )
    declared[200]["content"] = _FORMS
    return declared


@router.get(
    "/{room_id}/curve",
    dependencies=[allowed(READ)],
    operation_id="getRoomCurve",
    response_model=None,
    responses=_answers(),
)
async def get_curve(
    room_id: RoomId,
    request: Request,
    read: Reader,
    as_of: AsOf,
    release: Release = None,
    airflow: Airflow = None,
    hazard: Hazard = None,
    gas: Gas = None,
    vessel_id: VesselId = None,
    variant: Variant = None,
    points: Points = USUAL,
    format_: FormatText = None,
) -> Response:
    """Follow a case through time: what people breathe, the marks, the alarm, the way out.

    Without a choice it is the case that the status calls `worst`. Of several cases like the one
    asked for, that case comes first, then those that count, then the nearest to a mark. The course
    belongs to the room's assessment, now or `as_of` a moment: it is computed from the versions of
    records that the assessment rests on, at its moment, and nothing of it is stored. It ends when
    the room is back inside the first mark, at the latest after the sustained time of the basis.
    """
    form = form_of(request, format_)
    choice = Choice(release, airflow, hazard, gas, vessel_id, variant)
    _refuse_unknown(choice)
    now = read.service.clock.now()
    asked = await read(_asked_of, room_id, as_of, now)
    body = await read.service.questions(_course, asked, choice, points, _BODIES[form])
    headers = {**FRESH, "Vary": "Accept"}
    if form == SVG:
        headers["Content-Security-Policy"] = PICTURE_POLICY
    return Response(body, 200, headers, form)


def _refuse_unknown(choice: Choice) -> None:
    for name, known in WORDS.items():
        word = getattr(choice, name)
        if word is not None and word not in known:
            detail = f"One of {', '.join(known)} is expected."
            raise FieldsRefused.parameter(name, "not-one-of", detail)


@dataclass(frozen=True, slots=True)
class _AskedOf:
    """What a course is computed from, read in one snapshot."""

    assessment: StoredAssessment
    room: RoomValues
    currency: str


def _asked_of(
    scope: Scope, connection: Connection, room_id: str, as_of: datetime | None, now: datetime
) -> _AskedOf:
    assessment, poll, _ = assessment_asked_for(scope, connection, room_id, as_of, now)
    return _AskedOf(assessment, room_asked_of(connection, assessment), poll.currency)


def _course(
    asked: _AskedOf, choice: Choice, points: int, body: Callable[[CourseOfRoom, str], bytes]
) -> bytes:
    return body(course_of_room(asked.assessment, asked.room, choice, points), asked.currency)


def _as_json(course: CourseOfRoom, currency: str) -> bytes:
    return rendered(curve_document(course, currency))


def _as_csv(course: CourseOfRoom, _currency: str) -> bytes:
    return csv_bytes(COLUMNS, curve_rows(course))


_BODIES: Final[Mapping[str, Callable[[CourseOfRoom, str], bytes]]] = {
    JSON: _as_json,
    CSV: _as_csv,
    SVG: curve_picture,
}
