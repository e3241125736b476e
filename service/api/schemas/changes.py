"""The schemas of several record changes in one transaction."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field

from service.api.fields import Edge, RecordIdText
from service.api.schemas.record import Answer, EffectRead, ReadAsRead

MOST_CHANGES = 100

Kind = Literal[
    "site",
    "room",
    "opening",
    "ventilation-unit",
    "vessel",
    "supply-line",
    "detector",
    "control",
    "basis",
    "fluid",
]
Operation = Literal["create", "change", "remove"]


class RecordChangeSent(Edge):
    """One change to one record."""

    op: Operation
    kind: Kind
    id: RecordIdText | None = Field(
        default=None, description="Which record; not for a new one, which gets its id here."
    )
    fields: Annotated[dict[str, Any], Field(max_length=100)] = Field(
        default={}, description="As in the request that creates or changes such a record."
    )
    if_revision: Annotated[int, Field(ge=1)] | None = Field(
        default=None, description="Refuse the whole if the record is at another revision."
    )


class ChangesSent(Edge):
    """Several changes that are made together or not at all."""

    changes: Annotated[list[RecordChangeSent], Field(min_length=1, max_length=MOST_CHANGES)]


class ChangeDone(Answer):
    """What became of one change."""

    op: Operation
    kind: Kind
    id: RecordIdText
    revision: int
    changed: bool = Field(description="False: what was sent is what was there.")
    record: dict[str, Any] | None = Field(description="The record as it is now; null: removed.")


class ChangesDone(Answer):
    """What became of several changes, and what they did together."""

    items: list[ChangeDone]
    positions: dict[str, int] = Field(description="The position of each site touched.")
    recalculating: bool
    effects: list[EffectRead]
    read_as: list[ReadAsRead]
