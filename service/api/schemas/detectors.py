"""The schemas of detectors."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import (
    Day,
    Instant,
    Metres,
    Percent,
    Quantity,
    RecordIdText,
    Seconds,
    Tag,
    patch_of,
)
from service.api.schemas.record import (
    NEVER_NULL,
    WORDED_ANEW,
    EveryDays,
    OfSite,
    Outages,
    RecordPatch,
    RecordRead,
    Written,
    read_of,
)

Placed = Literal["inside", "entrance"]
ZeroingPressure = Annotated[float, Quantity(units.KILOPASCALS_ABSOLUTE, ge=30.0, le=120.0)]
DetectorState = Literal["in-service", "fault", "off"]


class DetectorCreate(OfSite):
    """A new gas detector."""

    room_id: RecordIdText | None = Field(
        default=None, description="The id of its room; this or 'room' is needed."
    )
    room: Tag | None = Field(default=None, description="The tag of the room, in place of its id.")
    gas: Tag = Field(description="'oxygen', or the tag of the fluid that it measures.")
    height_m: Metres | None = Field(
        default=None, description="Above the floor; not above the ceiling of its room."
    )
    placed: Placed | None = None
    t90_s: Seconds | None = Field(
        default=None, description="Seconds until it shows nine tenths of a step."
    )
    delay_s: Seconds | None = Field(
        default=None, description="Between the threshold and the alarm."
    )
    alarms_pct: Annotated[list[Percent], Field(max_length=8)] | None = Field(
        default=None, description="Thresholds, by volume."
    )
    calibrated_on: Day | None = None
    calibrate_every_days: EveryDays | None = None
    state: DetectorState = "in-service"
    silenced_since: Instant | None = None
    heard_outside: bool | None = None
    display_outside: bool | None = None
    power_backed: bool | None = None
    monitored: bool | None = None
    zeroed_at_kpa_abs: ZeroingPressure | None = Field(
        default=None, description="The air pressure at which its cell was zeroed."
    )
    outages: Outages | None = Field(
        default=None, description="Planned times in which it sees nothing; they do not overlap."
    )


@patch_of(
    DetectorCreate,
    never_null=NEVER_NULL | {"room", "room_id"},
    but=WORDED_ANEW,
)
class DetectorPatch(RecordPatch):
    """A change to a detector."""


@read_of(DetectorCreate)
class DetectorRead(RecordRead):
    """A gas detector."""

    room_id: RecordIdText


class DetectorWritten(DetectorRead, Written):
    """A detector after a write, and what that did."""
