"""The question for the course of a case: of a stored assessment, computed again, nothing kept."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import orjson
from sqlalchemy import Connection

from service.audit.assessment import METHOD_VERSION
from service.audit.curve import Choice, Curve, NoCase, NotComputed, Point, curve_of
from service.audit.inputs import RoomValues
from service.changes.answers import case_document
from service.changes.cautions import CAUTIONS
from service.changes.rebuilt import VersionMissing, room_of
from service.changes.room_values import plain
from service.clock import text_of
from service.errors import AsOfTooEarly, CannotCompute, NoSuchCase
from service.store.history import StoredAssessment

_JUDGES: Final = "records, not the air"
_NAMED: Final = 12  # words of what a room has, in the sentence of a problem
_WORDS: Final = ("release", "airflow", "hazard", "gas", "variant")


@dataclass(frozen=True, slots=True)
class CourseOfRoom:
    """The course of a case, and the assessment that it belongs to."""

    assessment: StoredAssessment
    room: RoomValues
    curve: Curve

    @property
    def note(self) -> str | None:
        """Say where the numbers may not be those that were answered."""
        stored = self.assessment.method_version
        if stored == METHOD_VERSION:
            return None
        return (
            f"The assessment was stored by method {stored}. This course is computed from the same "
            f"records by method {METHOD_VERSION}, so that its numbers may differ from it."
        )


def room_asked_of(connection: Connection, assessment: StoredAssessment) -> RoomValues:
    """Give the values that a room was assessed from.

    Raises
    ------
    AsOfTooEarly
        What the assessment rests on is no longer kept.
    """
    try:
        return room_of(connection, assessment)
    except VersionMissing as missing:
        raise AsOfTooEarly(f"It cannot be computed again: {missing}.") from None


def course_of_room(
    assessment: StoredAssessment, room: RoomValues, choice: Choice, points: int
) -> CourseOfRoom:
    """Compute a course from the values that an assessment rests on, at its moment.

    Raises
    ------
    NoSuchCase
        The room has no case like the one asked for.
    CannotCompute
        The records of the room do not allow it.
    """
    try:
        curve = _curve(room, assessment, choice, points)
    except NotComputed as why:
        raise CannotCompute(str(why)) from None
    except NoCase as found:
        raise _no_such_case(found) from None
    return CourseOfRoom(assessment, room, curve)


def _curve(room: RoomValues, assessment: StoredAssessment, choice: Choice, points: int) -> Curve:
    """Compute what is asked for; where nothing is, the case that the status names."""
    at = assessment.assessed_at
    worst = orjson.loads(assessment.status)["worst"]
    # One that comes from another room has its course there.
    if choice != Choice() or worst is None or worst.get("from_room") is not None:
        return curve_of(room, at=at, choice=choice, points=points)
    vessels = [*worst["vessel_ids"], *worst.get("line_ids", ())]
    named = Choice(
        release=worst["release"],
        airflow=worst["airflow"],
        hazard=worst["hazard"],
        gas=worst["gas"],
        vessel_id=vessels[0] if vessels else None,
        variant=worst.get("variant"),
    )
    try:
        return curve_of(room, at=at, choice=named, points=points)
    except NoCase:
        # An older method may have named one that this one does not know.
        return curve_of(room, at=at, choice=choice, points=points)


def _no_such_case(found: NoCase) -> NoSuchCase:
    if found.part is None:
        return NoSuchCase("Nothing in this room can be let go, so that it has no case.")
    there = ", ".join(found.there[:_NAMED]) or "none"
    more = f" and {len(found.there) - _NAMED} more" if len(found.there) > _NAMED else ""
    detail = f"The room has no such case: its {found.part} can be {there}{more}."
    return NoSuchCase.parameter(found.part, detail)


def curve_document(course: CourseOfRoom, currency: str) -> dict[str, Any]:
    """Give a course as it is answered."""
    assessment, curve = course.assessment, course.curve
    return {
        "room_id": assessment.room_id,
        "tag": course.room.record.tag,
        "name": course.room.name,
        "site_id": assessment.site_id,
        "position": assessment.from_position,
        "assessed_at": text_of(assessment.assessed_at),
        "currency": currency,
        "basis": course.room.basis.record.tag,
        "basis_id": assessment.basis_id,
        "basis_revision": assessment.basis_revision,
        "method_version": assessment.method_version,
        "computed_by": METHOD_VERSION,
        "note": course.note,
        "judges": _JUDGES,
        "case": case_document(curve.case),
        "cases_matching": curve.matching,
        "before": _point_document(curve.before),
        "extreme": {"what": curve.extreme_name, **_point_document(curve.extreme)},
        "alarm": None
        if curve.alarm is None
        else {"at_s": curve.alarm.at_s, "detector": plain(curve.alarm.detector)},
        "out_s": curve.out_s,
        "margin_s": curve.case.margin_s,
        "back_s": curve.case.recovered_s,
        "ends_s": curve.ends_s,
        "points": [
            {**_point_document(point), "events": list(point.events)} for point in curve.points
        ],
        "cautions": CAUTIONS,
    }


def _point_document(point: Point) -> dict[str, Any]:
    return {
        "at_s": point.at_s,
        "oxygen_pct": point.oxygen_pct,
        "oxygen_kpa": point.oxygen_kpa,
        "released_pct": point.released_pct,
        "gas_pct": point.gas_pct,
        "lower_limit_pct": point.lower_limit_pct,
    }


COLUMNS: Final = (
    "room", *_WORDS, "position", "at_s", "oxygen_pct", "oxygen_kpa", "released_pct",
    "gas_pct", "lower_limit_pct", "events",
)  # fmt: skip


def curve_rows(course: CourseOfRoom) -> list[Sequence[str | float | None]]:
    """Give the points of a course as rows of a table; each says which course it belongs to."""
    case = course.curve.case
    said = (
        course.room.record.tag,
        *(getattr(case, word) for word in _WORDS),
        course.assessment.from_position,
    )
    return [
        (*said, *_point_document(point).values(), " ".join(point.events))
        for point in course.curve.points
    ]
