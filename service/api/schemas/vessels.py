"""The schemas of vessels."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import (
    Day,
    Edge,
    Fraction,
    Instant,
    Kilograms,
    KilogramsPerDay,
    Litres,
    LitresPerDay,
    Quantity,
    RecordIdText,
    ShortText,
    Tag,
    patch_of,
)
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

VesselKind = Literal[
    "open-dewar",
    "pressurised-dewar",
    "freezer",
    "tank",
    "cryostat",
    "magnet",
    "dry-ice-box",
    "cylinder",
]
Insulation = Literal["vacuum-multilayer", "vacuum-powder", "foam", "none"]
VentTo = Literal["room", "outdoors"]
VesselState = Literal["in-service", "empty", "withdrawn"]
FilledBy = Literal["automatic", "attended", "exchanged"]
NeckPlug = Literal["vented", "sealed"]
FillFlow = Annotated[float, Quantity(units.LITRES_PER_MINUTE, gt=0.0, le=10_000.0)]
ClosingTime = Annotated[float, Quantity(units.SECONDS, ge=0.0, le=86_400.0)]
SetPressure = Annotated[float, Quantity(units.KILOPASCALS, gt=0.0, le=1e5)]
FlowArea = Annotated[float, Quantity(units.SQUARE_MILLIMETRES, gt=0.0, le=1e6)]
DischargeCoefficient = Annotated[float, Quantity(units.FRACTION, gt=0.0, le=1.0)]
PipeBore = Annotated[float, Quantity(units.MILLIMETRES, gt=0.0, le=2000.0)]
PipeLength = Annotated[float, Quantity(units.METRES, gt=0.0, le=1000.0)]
QuenchDuration = Annotated[float, Quantity(units.SECONDS, gt=0.0, le=86_400.0)]
TareKilograms = Annotated[float, Quantity(units.KILOGRAMS, gt=0.0, le=1e6)]
Footprint = Annotated[float, Quantity(units.SQUARE_METRES, gt=0.0, le=1000.0)]
ColdArea = Annotated[float, Quantity(units.SQUARE_METRES, ge=0.0, le=10_000.0)]
WithdrawalBore = Annotated[float, Quantity(units.MILLIMETRES, gt=0.0, le=1000.0)]
# Helium is pumped below the atmosphere; nothing lies below a vacuum.
WorkingPressure = Annotated[float, Quantity(units.KILOPASCALS, gt=-101.325, le=1e5)]
CapacityLitres = Annotated[float, Quantity(units.LITRES, gt=0.0, le=1e6)]
CapacityKilograms = Annotated[float, Quantity(units.KILOGRAMS, gt=0.0, le=1e6)]


class FillingRead(Edge):
    """How the vessel is filled, and what ends it."""

    by: FilledBy | None = None
    flow_l_min: FillFlow | None = Field(default=None, description="Of liquid.")
    independent_high_level: bool | None = Field(
        default=None,
        description="A high level of its own closes the valve where the level control fails.",
    )
    closes_in_s: ClosingTime | None = Field(
        default=None, description="From the independent high level to the shut valve."
    )
    supply_line_id: RecordIdText | None = Field(
        default=None, description="The line that fills it; not removed while this names it."
    )
    tested_on: Day | None = Field(default=None, description="When that shut-off was last tested.")
    test_every_days: EveryDays | None = None


class Filling(FillingRead):
    """How the vessel is filled, with the line that does it by its id or its tag."""

    supply_line: Tag | None = Field(
        default=None, description="The tag of the line, in place of its id."
    )


class Relief(Edge):
    """The relief of the vessel itself: valve or disc."""

    fitted: bool | None = None
    set_pressure_kpa: SetPressure | None = None
    flow_area_mm2: FlowArea | None = None
    discharge_coefficient: DischargeCoefficient | None = None
    inspected_on: Day | None = None
    inspect_every_days: EveryDays | None = None
    discharge_to: VentTo | None = None


class QuenchPipe(Edge):
    """The pipe that takes a magnet's helium outdoors."""

    bore_mm: PipeBore | None = None
    length_m: PipeLength | None = None
    inspected_on: Day | None = None
    inspect_every_days: EveryDays | None = None
    outlet_clear: bool | None = None


class Quench(Edge):
    """What happens when a magnet quenches."""

    duration_s: QuenchDuration | None = None
    share_to_room: Fraction | None = Field(
        default=None, description="Of the helium, into the room, with the pipe as it should be."
    )
    pipe: QuenchPipe | None = None


class VesselCreate(OfSite):
    """A new vessel; one without a room stands outdoors and needs its site."""

    room_id: RecordIdText | None = Field(default=None, description="Null: outdoors.")
    room: Tag | None = Field(default=None, description="The tag of the room, in place of its id.")
    fluid_id: RecordIdText | None = None
    fluid: Tag | None = Field(
        default=None, description="The tag of the fluid, or its id; this or 'fluid_id' is needed."
    )
    kind: VesselKind
    capacity_l: CapacityLitres | None = Field(
        default=None,
        description="Net liquid; of a cylinder its water volume, which 'working_pressure_kpa' goes "
        "with. This or 'capacity_kg' is needed.",
    )
    capacity_kg: CapacityKilograms | None = Field(
        default=None, description="For dry-ice boxes and cylinders."
    )
    gross_l: CapacityLitres | None = Field(
        default=None, description="With the space above the liquid; at least 'capacity_l'."
    )
    contents_l: Litres | None = Field(
        default=None,
        description="To 120 % of the capacity. A cylinder kept by volume has no contents: it is "
        "taken as charged to its working pressure, unless its state is 'empty'.",
    )
    contents_kg: Kilograms | None = Field(default=None, description="To 120 % of the capacity.")
    counted_at: Instant | None = Field(default=None, description="When the contents were read.")
    rated_evaporation_l_day: LitresPerDay | None = Field(
        default=None, description="The maker's normal evaporation rate, as liquid."
    )
    measured_evaporation_l_day: LitresPerDay | None = None
    measured_loss_kg_day: KilogramsPerDay | None = Field(default=None, description="For dry ice.")
    use_l_day: LitresPerDay | None = Field(
        default=None, description="Liquid taken from it and used in the room."
    )
    insulation: Insulation | None = None
    vent_to: VentTo | None = None
    filling: Filling | None = Field(
        default=None, description="Not of a dry-ice box or a cylinder: these are exchanged."
    )
    manifold: ShortText | None = Field(
        default=None, description="Vessels that name one manifold let go together."
    )
    mobile: bool | None = None
    state: VesselState = "in-service"
    tare_kg: TareKilograms | None = Field(default=None, description="Its mass when empty.")
    footprint_m2: Footprint | None = Field(default=None, description="The floor it stands on.")
    cold_area_m2: ColdArea | None = Field(
        default=None, description="Of the wall that the liquid cools."
    )
    working_pressure_kpa: WorkingPressure | None = Field(
        default=None,
        description="Of a cylinder kept by volume, the pressure it is charged to at 15 °C.",
    )
    withdrawal_bore_mm: WithdrawalBore | None = Field(
        default=None, description="Of the line or hose by which liquid is taken."
    )
    neck_plug: NeckPlug | None = Field(default=None, description="Of a vessel of liquid.")
    relief: Relief | None = None
    quench: Quench | None = Field(default=None, description="Of a magnet only.")


@patch_of(
    VesselCreate,
    never_null=NEVER_NULL | {"fluid", "fluid_id"},
    but=WORDED_ANEW,
)
class VesselPatch(RecordPatch):
    """A change to a vessel."""


@read_of(VesselCreate)
class VesselRead(RecordRead):
    """A vessel."""

    filling: FillingRead | None = Field(
        description="Not of a dry-ice box or a cylinder: these are exchanged."
    )
    fluid_id: RecordIdText
    fluid: str


class VesselWritten(VesselRead, Written):
    """A vessel after a write, and what that did."""
