"""The schemas of controls."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import Day, Quantity, RecordIdText, ShortText, Tag, patch_of
from service.api.schemas.record import (
    NEVER_NULL,
    WORDED_ANEW,
    EveryDays,
    OfSite,
    RecordPatch,
    RecordRead,
    Written,
    read_of,
)

ControlKind = Literal[
    "signage",
    "procedure",
    "training",
    "personal-monitor",
    "alarm-response",
    "rescue",
    "lone-working",
    "protective-equipment",
    "access",
    "delivery-route",
    "bund",
]
BundArea = Annotated[float, Quantity(units.SQUARE_METRES, gt=0.0, le=10_000.0)]


class ControlCreate(OfSite):
    """A new administrative measure, of a room or of a vessel.

    That of a vessel belongs to the room where the vessel stands, and goes with it.
    """

    room_id: RecordIdText | None = Field(
        default=None, description="The id of its room; a control has a room or a vessel."
    )
    room: Tag | None = Field(default=None, description="The tag of the room, in place of its id.")
    vessel_id: RecordIdText | None = None
    vessel: Tag | None = Field(
        default=None, description="The tag of the vessel, in place of its id."
    )
    kind: ControlKind
    reference: ShortText | None = Field(
        default=None, description="Where it is laid down: a document, a drawing, a register."
    )
    area_m2: BundArea | None = Field(
        default=None, description="The floor inside of a bund; needed there, and only there."
    )
    checked_on: Day | None = None
    check_every_days: EveryDays | None = None


@patch_of(ControlCreate, never_null=NEVER_NULL, but=WORDED_ANEW)
class ControlPatch(RecordPatch):
    """A change to a control."""


@read_of(ControlCreate)
class ControlRead(RecordRead):
    """An administrative measure of a room or of a vessel."""


class ControlWritten(ControlRead, Written):
    """A control after a write, and what that did."""
