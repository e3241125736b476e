"""The schema of a case's course; more members may be added."""

from __future__ import annotations

from typing import Any

from pydantic import Field

from service.api.fields import Instant, RecordIdText
from service.api.schemas.status import CaseRead, Currency, Growing


class AirRead(Growing):
    """The air at a moment; null stands for a number that this hazard does not have."""

    at_s: float
    oxygen_pct: float
    oxygen_kpa: float
    released_pct: float | None = Field(
        description="The gas let go that counts, by volume, where oxygen is judged."
    )
    gas_pct: float | None = Field(description="The gas judged, by volume, where it is not oxygen.")
    lower_limit_pct: float | None = Field(
        description="The share of the lower flammable limit, by the rule of Le Chatelier."
    )


class CurvePointRead(AirRead):
    """The air at a moment of the course, and what happens then."""

    events: list[str] = Field(
        description="start, lowest or highest, first-mark, second-mark, third-mark, alarm, out, "
        "back, flow-changes, end."
    )


class ExtremeRead(AirRead):
    """The worst of the course, which the case is judged by."""

    what: str = Field(description="lowest or highest, of what the hazard is judged by.")


class CurveAlarmRead(Growing):
    """The first alarm of the case."""

    at_s: float
    detector: dict[str, Any]


class CurveRead(Growing):
    """The course of a case of a room."""

    room_id: RecordIdText
    tag: str
    name: str
    site_id: RecordIdText
    position: int
    assessed_at: Instant
    currency: Currency
    basis: str
    basis_id: RecordIdText
    basis_revision: int
    method_version: str = Field(description="By which the assessment was stored.")
    computed_by: str = Field(description="The method by which this course is computed.")
    note: str | None = Field(description="Where the two differ: what that means.")
    judges: str
    case: CaseRead = Field(description="The case whose course it is, as in the assessment.")
    cases_matching: int = Field(description="How many cases of the room are like that asked for.")
    before: AirRead = Field(description="The air as the release begins.")
    extreme: ExtremeRead
    alarm: CurveAlarmRead | None = Field(description="Null: no detector that counts gives one.")
    out_s: float | None = Field(description="When people are out; null: nothing warns them.")
    margin_s: float | None = Field(description="Between being out and the second mark.")
    back_s: float | None = Field(description="When the room is back inside the first mark.")
    ends_s: float
    points: list[CurvePointRead] = Field(description="In the order of time.")
    cautions: str
