"""The schemas of fluids."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, StringConstraints

from service import units
from service.api.fields import Fraction, Quantity, ShortText, patch_of
from service.api.schemas.record import (
    NEVER_NULL,
    WORDED_ANEW,
    OfSite,
    RecordPatch,
    SharedRecordRead,
    Written,
    read_of,
)

Hazard = Literal["asphyxiant", "oxidiser", "toxic", "flammable"]
Settles = Literal["low", "high", "methane"]
BoilingPoint = Annotated[float, Quantity(units.KELVINS, gt=0.0, le=400.0)]
MolarMass = Annotated[float, Field(strict=True, gt=0.0, le=500.0)]
CondensedDensity = Annotated[float, Field(strict=True, gt=0.0, le=10_000.0)]
FlammableLimit = Annotated[float, Quantity(units.PERCENT, gt=0.0, lt=100.0)]
PropertyName = Annotated[str, StringConstraints(strict=True, pattern=r"^[a-z][a-z0-9_]{0,62}$")]


class FluidCreate(OfSite):
    """A new fluid of a site, such as a mixture."""

    molar_mass_g_mol: MolarMass
    boiling_k: BoilingPoint = Field(description="At one atmosphere; for a solid, sublimation.")
    condensed_density_kg_m3: CondensedDensity = Field(
        description="Of the liquid at its boiling point, or of the solid."
    )
    oxygen_fraction: Fraction = Field(description="Of oxygen in the gas, by volume.")
    solid: bool = Field(description="Kept as a solid, such as dry ice.")
    hazards: Annotated[list[Hazard], Field(min_length=1, max_length=4)]
    settles: Settles = Field(description="Where the cold gas goes.")
    lfl_pct: FlammableLimit | None = Field(
        default=None,
        description="The lower flammable limit in air, by volume; needed where the hazards hold "
        "'flammable', and only there. Those that come with the service have theirs in the basis.",
    )
    sources: Annotated[dict[PropertyName, ShortText], Field(max_length=40)] = Field(
        default={}, description="For each property where it comes from."
    )


@patch_of(
    FluidCreate,
    never_null=NEVER_NULL,
    but=WORDED_ANEW | {"sources"},
)
class FluidPatch(RecordPatch):
    """A change to a fluid of a site; its tag never changes."""

    sources: Annotated[dict[PropertyName, ShortText | None], Field(max_length=40)] = Field(
        default={}, description="Sources to set; null takes one away."
    )


@read_of(FluidCreate)
class FluidRead(SharedRecordRead):
    """A fluid."""

    sources: dict[str, str]


class FluidWritten(FluidRead, Written):
    """A fluid after a write, and what that did."""
