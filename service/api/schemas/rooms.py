"""The schemas of rooms."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import (
    CubicMetresPerHour,
    Edge,
    Metres,
    Quantity,
    RecordIdText,
    ShortText,
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

RoomKind = Literal["room", "corridor", "walk-in", "pit", "lift", "vehicle"]
RoomState = Literal["planned", "in-service", "out-of-service"]
GrossVolume = Annotated[float, Quantity(units.CUBIC_METRES, gt=0.0, le=1e6)]
FloorArea = Annotated[float, Quantity(units.SQUARE_METRES, gt=0.0, le=1e5)]
Height = Annotated[float, Quantity(units.METRES, gt=0.0, le=200.0)]
OccupiedFraction = Annotated[float, Quantity(units.FRACTION, ge=0.0, le=0.95)]
RoomTemperature = Annotated[float, Quantity(units.CELSIUS, ge=-200.0, le=60.0)]


class People(Edge):
    """Who is usually there."""

    attended: bool | None = Field(default=None, description="Somebody works there.")
    most: Annotated[int, Field(ge=0, le=10_000)] | None = Field(
        default=None, description="The most people at once."
    )


class RoomCreate(OfSite):
    """A new room, or another space that people enter."""

    kind: RoomKind = "room"
    state: RoomState = Field(
        default="in-service", description="Only rooms in service count in summaries and events."
    )
    building: ShortText | None = None
    floor: ShortText | None = None
    floor_area_m2: FloorArea | None = None
    height_m: Height | None = None
    volume_m3: GrossVolume | None = Field(
        default=None, description="Gross; where it is not sent, floor area times height."
    )
    occupied_fraction: OccupiedFraction | None = Field(
        default=None, description="The share of the volume that things take up."
    )
    temperature_c: RoomTemperature | None = None
    below_ground: bool | None = None
    purge_flow_m3_h: CubicMetresPerHour | None = Field(
        default=None, description="Gas let into the room for purging."
    )
    purge_fluid_id: RecordIdText | None = None
    purge_fluid: Tag | None = Field(default=None, description="The tag of the fluid, or its id.")
    people: People | None = None
    unaccompanied: bool | None = Field(
        default=None, description="Nobody rides or stands beside the vessel while it is in there."
    )
    egress_m: Metres | None = Field(default=None, description="The way out, from the far end.")
    contact: ShortText | None = None


@patch_of(RoomCreate, never_null=NEVER_NULL, but=WORDED_ANEW)
class RoomPatch(RecordPatch):
    """A change to a room."""


@read_of(RoomCreate)
class RoomRead(RecordRead):
    """A room."""

    volume_m3: float
    volume_derived: bool = Field(description="The volume was made of floor area and height.")


class RoomWritten(RoomRead, Written):
    """A room after a write, and what that did."""
