"""The schemas of bases."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, StringConstraints

from service.api.fields import RecordIdText, ShortText, Tag, patch_of
from service.api.schemas.record import (
    NEVER_NULL,
    WORDED_ANEW,
    Answer,
    OfSite,
    RecordPatch,
    SharedRecordRead,
    Written,
    read_of,
)

ValueName = Annotated[str, StringConstraints(strict=True, pattern=r"^[a-z][a-z0-9_]{0,62}$")]


class BasisCreate(OfSite):
    """A new basis: a copy of a shipped one with the values that differ."""

    derived_from_id: RecordIdText | None = None
    derived_from: Tag | None = Field(
        default=None,
        description="The shipped basis it is a copy of, by tag or id; this or "
        "'derived_from_id' is needed.",
    )
    values: Annotated[dict[ValueName, Any], Field(max_length=100)] = Field(
        default={},
        description="The values that differ.",
        examples=[{"oxygen_deficient_pct": 19.0}],
    )
    sources: Annotated[dict[ValueName, ShortText], Field(max_length=100)] = Field(
        default={}, description="For each of these values where it comes from."
    )


@patch_of(
    BasisCreate,
    never_null=NEVER_NULL,
    but=WORDED_ANEW | {"sources", "derived_from", "derived_from_id"},
)
class BasisPatch(RecordPatch):
    """A change to a basis of a site; its tag and its origin never change."""

    sources: Annotated[dict[ValueName, ShortText | None], Field(max_length=100)] = Field(
        default={}, description="Sources to set; null takes one away."
    )


class EffectiveValue(Answer):
    """A value that counts, and where it comes from."""

    value: Any
    source: str


@read_of(BasisCreate)
class BasisRead(SharedRecordRead):
    """A basis: the values a site is judged by, each with its source."""

    values: dict[str, Any]
    sources: dict[str, str]
    effective: dict[str, EffectiveValue] = Field(
        description="Every value that counts: its own, else that of the basis it is a copy of."
    )


class BasisWritten(BasisRead, Written):
    """A basis after a write, and what that did."""
