"""The schemas of ventilation units."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import (
    CubicMetresPerHour,
    Day,
    Edge,
    Fraction,
    Quantity,
    RecordIdText,
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

Arrangement = Literal["supply", "exhaust", "balanced"]
TerminalHeight = Literal["low", "high"]
UnitState = Literal["running", "stopped", "failed"]
MixingFactor = Annotated[float, Quantity(units.FRACTION, ge=1.0, le=10.0)]


class Served(Edge):
    """A room that a unit serves, said by its id or by its tag."""

    room_id: RecordIdText | None = None
    room: Tag | None = None
    share: Fraction = Field(description="The share of the unit's flow that serves this room.")


class VentilationUnitCreate(OfSite):
    """A new fan or air handling unit."""

    arrangement: Arrangement | None = None
    design_flow_m3_h: CubicMetresPerHour | None = None
    measured_flow_m3_h: CubicMetresPerHour | None = None
    measured_on: Day | None = None
    measure_every_days: EveryDays | None = None
    outdoor_air_fraction: Fraction | None = None
    mixing_factor: MixingFactor | None = Field(
        default=None, description="Counts only with the day of its tracer test."
    )
    mixing_tested_on: Day | None = None
    state: UnitState = "running"
    standby_power: bool | None = None
    flow_proved: bool | None = Field(
        default=None, description="A switch proves the flow itself, not that the fan turns."
    )
    fail_alarm: bool | None = None
    serves: Annotated[list[Served], Field(max_length=200)] = Field(
        description="The rooms it serves; the shares come to at most 1 together."
    )
    outages: Outages | None = Field(
        default=None, description="Planned times in which it stands still; they do not overlap."
    )
    boost_flow_m3_h: CubicMetresPerHour | None = Field(
        default=None, description="Its flow once boosted; goes with 'boost_trigger'."
    )
    boost_trigger: Tag | None = Field(
        default=None,
        description="What boosts it: 'manual', or a detector in a room it serves, by tag or id; "
        "answered as the id.",
    )
    terminal_height: TerminalHeight | None = Field(
        default=None, description="Where it blows in or takes out: at the floor or the ceiling."
    )


@patch_of(
    VentilationUnitCreate,
    never_null=NEVER_NULL,
    but=WORDED_ANEW,
)
class VentilationUnitPatch(RecordPatch):
    """A change to a ventilation unit."""


class ServedRead(Edge):
    """A room that a unit serves."""

    room_id: RecordIdText
    share: float


@read_of(VentilationUnitCreate)
class VentilationUnitRead(RecordRead):
    """A ventilation unit."""

    serves: list[ServedRead]
    boost_trigger: str | None = Field(description="'manual', or the id of a detector.")


class VentilationUnitWritten(VentilationUnitRead, Written):
    """A ventilation unit after a write, and what that did."""
