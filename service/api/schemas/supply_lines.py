"""The schemas of supply lines."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import Day, Edge, Quantity, RecordIdText, Tag, patch_of
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
from service.api.schemas.vessels import ClosingTime, Insulation, Relief

Phase = Literal["liquid", "gas"]
LineBore = Annotated[float, Quantity(units.MILLIMETRES, gt=0.0, le=1000.0)]
LineLength = Annotated[float, Quantity(units.METRES, gt=0.0, le=10_000.0)]
SourcePressure = Annotated[float, Quantity(units.KILOPASCALS, gt=0.0, le=1e5)]
Restrictor = Annotated[float, Quantity(units.KILOGRAMS_PER_HOUR, gt=0.0, le=1e6)]
SegmentLitres = Annotated[float, Quantity(units.LITRES, gt=0.0, le=1e6)]


class RunsThrough(Edge):
    """A room that a line runs through, said by its id or by its tag."""

    room_id: RecordIdText | None = None
    room: Tag | None = None


class ShutOff(Edge):
    """What closes the line, and what makes it close."""

    trigger: Tag | None = Field(
        default=None,
        description="'excess-flow', 'high-level', 'manual', or a detector in one of its rooms, by "
        "tag or id; answered as the id.",
    )
    closes_in_s: ClosingTime | None = Field(
        default=None, description="From the trigger to the shut valve."
    )
    fails_closed: bool | None = None
    tested_on: Day | None = None
    test_every_days: EveryDays | None = None


class Segment(Edge):
    """A part of the line between two valves, in which liquid can be trapped."""

    volume_l: SegmentLitres
    relief: Relief | None = None


class SupplyLineCreate(OfSite):
    """A new line that brings liquid or gas into rooms.

    It may break in each room that it runs through, and in those of the vessels that it fills.
    """

    source_vessel_id: RecordIdText | None = Field(
        default=None, description="The vessel that feeds it; null: none of the records."
    )
    source_vessel: Tag | None = Field(
        default=None, description="The tag of the vessel, in place of its id."
    )
    fluid_id: RecordIdText | None = None
    fluid: Tag | None = Field(
        default=None, description="The tag of the fluid, or its id; this or 'fluid_id' is needed."
    )
    phase: Phase
    rooms: Annotated[list[RunsThrough], Field(min_length=1, max_length=200)] = Field(
        description="The rooms that it runs through."
    )
    bore_mm: LineBore | None = Field(default=None, description="Its inner diameter.")
    length_m: LineLength | None = Field(
        default=None, description="Of no credit to what flows out of a break."
    )
    source_pressure_kpa: SourcePressure | None = Field(
        default=None, description="At its source. Unknown: the working pressure of its vessel."
    )
    restrictor_kg_h: Restrictor | None = Field(
        default=None,
        description="The most that passes a restrictor before all that can break in the rooms.",
    )
    shutoff: ShutOff | None = None
    insulation: Insulation | None = None
    segments: Annotated[list[Segment], Field(max_length=100)] | None = None


@patch_of(
    SupplyLineCreate,
    never_null=NEVER_NULL | {"fluid", "fluid_id"},
    but=WORDED_ANEW,
)
class SupplyLinePatch(RecordPatch):
    """A change to a supply line."""


class RunsThroughRead(Edge):
    """A room that a line runs through."""

    room_id: RecordIdText


@read_of(SupplyLineCreate)
class SupplyLineRead(RecordRead):
    """A supply line."""

    fluid_id: RecordIdText
    fluid: str
    rooms: list[RunsThroughRead]


class SupplyLineWritten(SupplyLineRead, Written):
    """A supply line after a write, and what that did."""
