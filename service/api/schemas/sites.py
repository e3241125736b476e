"""The schemas of sites."""

from __future__ import annotations

from typing import Annotated
from zoneinfo import ZoneInfo

from pydantic import AfterValidator, Field

from service import units
from service.api.fields import Elevation, Quantity, RecordIdText, ShortText, Tag, patch_of, refused
from service.api.schemas.record import (
    WORDED_ANEW,
    RecordCreate,
    RecordPatch,
    RecordRead,
    Written,
    read_of,
)


def _known_zone(text: str) -> str:
    try:
        ZoneInfo(text)
    except (KeyError, OSError, ValueError):
        # No such zone, a folder of zones, or a path that leads out of them.
        raise refused(
            "no-such-time-zone", "A name of the IANA list, such as Europe/Oslo."
        ) from None
    return text


TimeZone = Annotated[ShortText, AfterValidator(_known_zone)]
StationPressure = Annotated[float, Quantity(units.KILOPASCALS_ABSOLUTE, ge=30.0, le=120.0)]


class SiteCreate(RecordCreate):
    """A new site."""

    elevation_m: Elevation | None = Field(default=None, description="Above sea level.")
    station_pressure_kpa_abs: StationPressure | None = Field(
        default=None, description="The mean air pressure there; wins over the elevation."
    )
    basis_id: RecordIdText | None = Field(default=None, description="What the site is judged by.")
    basis: Tag | None = Field(
        default=None, description="The tag of the basis, or its id; 'baseline' where none is sent."
    )
    time_zone: TimeZone = Field(default="UTC", description="In which its days end.")
    contact: ShortText | None = None
    demo: bool = Field(default=False, description="Part of the demo estate.")


@patch_of(
    SiteCreate,
    never_null=frozenset({"basis", "basis_id"}),
    but=WORDED_ANEW,
)
class SitePatch(RecordPatch):
    """A change to a site."""


@read_of(SiteCreate)
class SiteRead(RecordRead):
    """A site."""

    basis_id: RecordIdText
    basis: str


class SiteWritten(SiteRead, Written):
    """A site after a write, and what that did."""
