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
Swing = Literal["inwards", "outwards", "sliding"]
GrossVolume = Annotated[float, Quantity(units.CUBIC_METRES, gt=0.0, le=1e6)]
FloorArea = Annotated[float, Quantity(units.SQUARE_METRES, gt=0.0, le=1e5)]
Height = Annotated[float, Quantity(units.METRES, gt=0.0, le=200.0)]
OccupiedFraction = Annotated[float, Quantity(units.FRACTION, ge=0.0, le=0.95)]
PitArea = Annotated[float, Quantity(units.SQUARE_METRES, gt=0.0, le=1e5)]
PitDepth = Annotated[float, Quantity(units.METRES, gt=0.0, le=100.0)]
DoorLength = Annotated[float, Quantity(units.METRES, gt=0.0, le=20.0)]
CloserForce = Annotated[float, Quantity(units.NEWTONS, ge=0.0, le=1000.0)]
LeakageArea = Annotated[float, Quantity(units.SQUARE_METRES, ge=0.0, le=100.0)]
ReliefOpening = Annotated[float, Quantity(units.SQUARE_METRES, ge=0.0, le=1000.0)]
FloorRating = Annotated[float, Quantity(units.KILOPASCALS_OF_LOAD, gt=0.0, le=1000.0)]
RoomTemperature = Annotated[float, Quantity(units.CELSIUS, ge=-200.0, le=60.0)]


class People(Edge):
    """Who is usually there."""

    attended: bool | None = Field(default=None, description="Somebody works there.")
    most: Annotated[int, Field(ge=0, le=10_000)] | None = Field(
        default=None, description="The most people at once."
    )


class Pit(Edge):
    """A pit, trench or shaft in the floor."""

    area_m2: PitArea = Field(description="Of its opening; at most the floor of the room.")
    depth_m: PitDepth
    entered: bool | None = Field(default=None, description="People go down into it.")


class Door(Edge):
    """The door by which people leave."""

    swing: Swing | None = Field(default=None, description="Seen from inside the room.")
    width_m: DoorLength | None = None
    height_m: DoorLength | None = None
    closer_n: CloserForce | None = Field(
        default=None, description="The force that its closer takes, at the handle."
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
    pit: Pit | None = None
    door: Door | None = None
    leakage_area_m2: LeakageArea | None = Field(
        default=None, description="Of cracks and gaps, with the doors shut."
    )
    relief_opening_m2: ReliefOpening | None = Field(
        default=None, description="Free area of openings that let over-pressure out."
    )
    floor_rating_kpa: FloorRating | None = Field(
        default=None, description="The load that the floor is rated for, spread out."
    )


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
