"""What every record has, as it is sent and as it is answered."""

from __future__ import annotations

from collections.abc import Callable
from types import UnionType
from typing import TYPE_CHECKING, Annotated, Any, Final, TypeVar, Union, get_args, get_origin

from pydantic import BaseModel, ConfigDict, Field, create_model

from service.api.fields import (
    Edge,
    ExternalId,
    Instant,
    LabelName,
    Labels,
    LabelValue,
    Name,
    Notes,
    Patch,
    Quantity,
    RecordIdText,
    ShortText,
    Tag,
)

EveryDays = Annotated[int, Field(ge=1, le=36_525)]
if TYPE_CHECKING:

    class Outage(Edge):
        """A planned time out of use; its first member is called 'from'."""

else:
    # A class statement cannot have a field of this name.
    Outage = create_model(
        "Outage",
        __base__=Edge,
        __module__=__name__,
        __doc__="A planned time out of use.",
        **{
            "from": (Instant, Field(description="When it begins.")),
            "to": (Instant, Field(description="When it ends; after it begins.")),
            "reason": (ShortText | None, None),
        },
    )

Outages = Annotated[list[Outage], Field(max_length=100)]
Answered = TypeVar("Answered", bound="AnyRecordRead")


class RecordCreate(Edge):
    """What a new record of any kind may say."""

    tag: Tag = Field(description="The label on the thing; unique in its site and kind.")
    external_id: ExternalId | None = Field(
        default=None, description="Its id in another system; unique in its site and kind."
    )
    name: Name | None = Field(default=None, description="What people call it.")
    notes: Notes | None = None
    labels: Labels = Field(default={}, description="Words of your own to sort and filter by.")

    def changes(self) -> dict[str, Any]:
        """Return the fields that were sent, as plain JSON values."""
        return self.model_dump(mode="json", exclude_unset=True)


class OfSite(RecordCreate):
    """A record that belongs to a site: said by its id or by its tag."""

    site_id: RecordIdText | None = Field(default=None, description="The id of its site.")
    site: Tag | None = Field(
        default=None,
        description="The tag of its site, in place of 'site_id'. Neither is needed where the room "
        "tells the site, or where the key reaches one site only. A record never changes its site.",
    )


class RecordPatch(Patch):
    """What a patch of any kind of record may say besides."""

    labels: dict[LabelName, LabelValue | None] = Field(
        default={}, description="Labels to set; null takes one away.", max_length=20
    )


#: Fields of a new record that a patch words differently.
WORDED_ANEW: Final = frozenset({"labels"})
#: Fields that no record is without, so that a patch refuses null for them.
NEVER_NULL: Final = frozenset({"site", "site_id"})


class Answer(BaseModel):
    """A model of what goes out; it describes and tests answers, and is not run for each."""

    model_config = ConfigDict(
        extra="forbid", allow_inf_nan=False, json_schema_serialization_defaults_required=True
    )


class Page(Answer):
    """A page of a list."""

    model_config = ConfigDict(json_schema_serialization_defaults_required=False)

    next: str | None = Field(description="The cursor of the next page; null: this is the last.")
    total: int | None = Field(default=None, description="Of all pages, where it was asked for.")


class AnyRecordRead(Answer):
    """What is answered of a record of any kind; null stands for what is not known."""

    id: RecordIdText
    revision: int = Field(ge=1, description="Goes up by one with each change; also the ETag.")
    created_at: Instant
    updated_at: Instant
    tag: str
    external_id: str | None
    name: str | None
    notes: str | None
    labels: dict[str, str]


class RecordRead(AnyRecordRead):
    """What is answered of a record that belongs to a site."""

    site_id: RecordIdText


class SharedRecordRead(AnyRecordRead):
    """What is answered of a record that may come with the service."""

    site_id: RecordIdText | None = Field(description="Null: it comes with the service.")


_UNIONS: Final = (Union, UnionType)
_NOT_ANSWERED: Final = frozenset({"site", "room", "other_room", "vessel", "source_vessel"})


def read_of(created: type[RecordCreate]) -> Callable[[type[Answered]], type[Answered]]:
    """Give an answer class every field of the model that creates the record, all of them present.

    Quantities are numbers in the unit of their name. Fields that the class words itself stay.
    """

    def filled(kind: type[Answered]) -> type[Answered]:
        fields: dict[str, Any] = {
            name: (_answered(field.annotation), Field(description=field.description))
            for name, field in created.model_fields.items()
            if name not in kind.model_fields and name not in _NOT_ANSWERED
        }
        return create_model(
            kind.__name__, __base__=kind, __module__=kind.__module__, __doc__=kind.__doc__, **fields
        )

    return filled


def _answered(annotation: Any) -> Any:
    """Take the type of a field as sent to the type as answered."""
    origin = get_origin(annotation)
    if origin is Annotated:
        inner, *marks = get_args(annotation)
        kept = [mark for mark in marks if not isinstance(mark, Quantity)]
        return Annotated[(_answered(inner), *kept)] if kept else _answered(inner)
    if origin in _UNIONS:
        return Union[tuple(_answered(kind) for kind in get_args(annotation))]  # noqa: UP007
    if origin is list:
        return list[_answered(get_args(annotation)[0])]  # type: ignore[misc]
    if isinstance(annotation, type) and issubclass(annotation, Edge):
        return _answered_object(annotation)
    return annotation


def _answered_object(kind: type[BaseModel]) -> type[Answer]:
    """Make the form of a nested object in which every member is present."""
    members: dict[str, Any] = {
        name: (_answered(field.annotation), Field(description=field.description))
        for name, field in kind.model_fields.items()
        if name not in _NOT_ANSWERED
    }
    return create_model(
        f"{kind.__name__}Read", __base__=Answer, __module__=kind.__module__, **members
    )


class Change(Answer):
    """A value before and after; null: there was none, or there is none."""

    before: str | None
    after: str | None


class NumberChange(Answer):
    """A number before and after; null: there was none, or there is none."""

    before: float | None
    after: float | None


class FindingBrief(Answer):
    """A finding in few words."""

    id: RecordIdText
    rule: str
    severity: str
    statement: str


class FindingsMoved(Answer):
    """What a change did to the findings of a room."""

    opened: list[FindingBrief]
    cleared: list[FindingBrief]
    changed: list[FindingBrief]


class EffectRead(Answer):
    """What a change did to one room."""

    room_id: RecordIdText
    tag: str
    standing: Change
    worst_oxygen_pct: NumberChange
    findings: FindingsMoved


class ReadAsRead(Answer):
    """What was made of a quantity that was sent with a unit."""

    pointer: str
    sent: str
    read: float
    unit: str
    note: str | None


class Consequences(Answer):
    """What a write did, and where it stands in the site's history."""

    position: int = Field(description="The site's position after the change.")
    recalculating: bool = Field(
        description="More rooms are touched than one change takes; they follow shortly."
    )
    effects: list[EffectRead]


class Written(Consequences):
    """What a write answers beside the record."""

    read_as: list[ReadAsRead] = Field(description="Quantities that were sent with a unit.")


class Removed(Consequences):
    """What the removal of a record did."""

    id: RecordIdText
