"""The schemas of vessels."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import (
    Edge,
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
CapacityLitres = Annotated[float, Quantity(units.LITRES, gt=0.0, le=1e6)]
CapacityKilograms = Annotated[float, Quantity(units.KILOGRAMS, gt=0.0, le=1e6)]


class Filling(Edge):
    """How the vessel is filled."""

    by: FilledBy | None = None


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
        default=None, description="Net liquid; this or 'capacity_kg' is needed."
    )
    capacity_kg: CapacityKilograms | None = Field(
        default=None, description="For dry-ice boxes and cylinders."
    )
    gross_l: CapacityLitres | None = None
    contents_l: Litres | None = Field(default=None, description="To 120 % of the capacity.")
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
    filling: Filling | None = None
    manifold: ShortText | None = Field(
        default=None, description="Vessels that name one manifold let go together."
    )
    mobile: bool | None = None
    state: VesselState = "in-service"


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

    fluid_id: RecordIdText
    fluid: str


class VesselWritten(VesselRead, Written):
    """A vessel after a write, and what that did."""
