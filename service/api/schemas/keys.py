"""The schemas of keys."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service import units
from service.api.fields import Edge, Instant, Quantity, RecordIdText, ShortText
from service.api.schemas.record import Answer

Role = Literal["reader", "recorder", "auditor", "administrator"]
Overlap = Annotated[float, Quantity(units.SECONDS, ge=0.0, le=30 * 86400.0)]


class KeyCreate(Edge):
    """A new key."""

    holder: ShortText = Field(description="The person or system that has it.")
    role: Role
    sites: Annotated[list[RecordIdText], Field(min_length=1, max_length=200)] | None = Field(
        default=None,
        description="The ids of the sites it reaches; null for all. A key that is limited itself "
        "makes keys of its own sites, and those are meant where none are sent.",
    )
    expires_at: Instant | None = None


class KeyRotate(Edge):
    """How a key is followed by a new one."""

    overlap_s: Overlap = Field(default=86400.0, description="How long the old one still works.")


class KeyRead(Answer):
    """A key, without its text."""

    id: RecordIdText
    prefix: str = Field(description="What stands after 'rw_' in its text.")
    holder: str
    role: Role
    sites: list[RecordIdText] | None
    created_at: Instant
    expires_at: Instant | None
    revoked_at: Instant | None
    last_used_at: Instant | None
    replaced_by: RecordIdText | None


class KeyMade(KeyRead):
    """A new key, with its text."""

    key: str = Field(description="The key itself; it is shown this once and not kept.")


class KeyList(Answer):
    """The keys that this key reaches."""

    items: list[KeyRead]
