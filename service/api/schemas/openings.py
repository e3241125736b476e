"""The schemas of openings."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import (
    CubicMetresPerHour,
    Quantity,
    RecordIdText,
    SignedCubicMetresPerHour,
    Tag,
    patch_of,
)
from service.api.schemas.record import (
    NEVER_NULL,
    WORDED_ANEW,
    OfSite,
    RecordPatch,
    RecordRead,
    Written,
    read_of,
)

OpeningKind = Literal["door", "hatch", "window", "grille", "curtain", "gap"]
OpeningLength = Annotated[float, Quantity(units.METRES, gt=0.0, le=100.0)]
OpeningArea = Annotated[float, Quantity(units.SQUARE_METRES, gt=0.0, le=10_000.0)]


class OpeningCreate(OfSite):
    """A new opening between a room and another one, or the outdoors.

    Gas that is let go on one side is followed to the other, so that both rooms are recalculated,
    and with them the rooms further on that this changes. Its rooms cannot be removed before it.
    """

    room_id: RecordIdText | None = Field(
        default=None, description="The id of its room; this or 'room' is needed."
    )
    room: Tag | None = Field(default=None, description="The tag of the room, in place of its id.")
    other_room_id: RecordIdText | None = Field(
        default=None, description="The room on its other side; null: the outdoors."
    )
    other_room: Tag | None = Field(
        default=None, description="The tag of the other room, in place of its id."
    )
    kind: OpeningKind
    width_m: OpeningLength | None = Field(
        default=None, description="With 'height_m', or 'area_m2' in place of both."
    )
    height_m: OpeningLength | None = None
    area_m2: OpeningArea | None = Field(
        default=None, description="The free area; at most width times height where these are sent."
    )
    exchange_flow_m3_h: CubicMetresPerHour | None = Field(
        default=None,
        description="Air that passes each way at the same time, in balance. Unknown and open: what "
        "one degree of difference moves through it.",
    )
    net_flow_m3_h: SignedCubicMetresPerHour | None = Field(
        default=None,
        description="Air that passes one way: positive from the other room (or the outdoors) into "
        "'room', negative out of 'room'.",
    )
    normally_open: bool | None = Field(
        default=None,
        description="Whether air passes; one that is not said to be shut counts as open indoors.",
    )


@patch_of(
    OpeningCreate,
    never_null=NEVER_NULL | {"room", "room_id"},
    but=WORDED_ANEW,
)
class OpeningPatch(RecordPatch):
    """A change to an opening."""


@read_of(OpeningCreate)
class OpeningRead(RecordRead):
    """An opening between a room and another one, or the outdoors."""

    room_id: RecordIdText


class OpeningWritten(OpeningRead, Written):
    """An opening after a write, and what that did."""
