"""The fields of records as they are sent: texts, ids, days, moments, and quantities with units.

Every type here is an ``Annotated`` name, so that a schema reads as a list of what is meant:
``capacity_l: Litres``. Where other bounds are wanted: ``Annotated[float, Quantity(units.LITRES,
gt=0, le=500)]``. What is refused is refused with a code of our own and never repeated.
"""

import json
import re
import unicodedata
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from datetime import date
from functools import cache
from types import NoneType, UnionType
from typing import Annotated, Any, Final, LiteralString, TypeVar, Union, get_args, get_origin

from pydantic import (
    AfterValidator,
    BaseModel,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    GetJsonSchemaHandler,
    StringConstraints,
    create_model,
)
from pydantic.fields import FieldInfo
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from service import units
from service.api.strict import pointer_to
from service.clock import moment_of, text_of

# Marks that reorder the text around them, so that a label shows as another than it is.
_BIDIRECTIONAL: Final = re.compile("[\u202a-\u202e\u2066-\u2069\u200e\u200f\u061c]")
# Controls, formats, surrogates, private use, line and paragraph separators.
_UNPRINTED: Final = frozenset({"Cc", "Cf", "Cs", "Co", "Zl", "Zp"})
_UUID_7: Final = r"^[0-9a-f]{8}-[0-9a-f]{4}-7[0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}$"
_DAY: Final = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
_EARLIEST_DAY: Final = date(1900, 1, 1)
_LATEST_DAY: Final = date(2199, 12, 31)


def refused(code: LiteralString, detail: str) -> PydanticCustomError:
    """Make the error that a validator raises: a code of ours and a sentence without the input."""
    return PydanticCustomError(code, "{detail}", {"detail": detail})


class Edge(BaseModel):
    """A model of what comes in: unknown members refused, nothing converted, no NaN."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)


# Texts.


@dataclass(frozen=True, slots=True)
class Text:
    """What a text may be: its length in characters and in bytes, and which characters."""

    longest: int
    shortest: int = 0
    most_bytes: int | None = None
    label: bool = False
    """A label on a thing: what is not seen is refused, spaces at the ends too."""
    lines: bool = False
    """Line feeds and tabs are allowed."""
    example: str | None = None

    def __get_pydantic_core_schema__(
        self, _source: Any, _handler: GetCoreSchemaHandler
    ) -> CoreSchema:
        """Check a text after it is known to be one."""
        return core_schema.no_info_after_validator_function(
            self.checked, core_schema.str_schema(strict=True)
        )

    def __get_pydantic_json_schema__(
        self, schema: CoreSchema, handler: GetJsonSchemaHandler
    ) -> dict[str, Any]:
        """Publish the lengths."""
        published = handler(schema) | {"minLength": self.shortest, "maxLength": self.longest}
        return published | ({"examples": [self.example]} if self.example else {})

    def checked(self, sent: str) -> str:
        """Return the text in composed form, or refuse it."""
        text = unicodedata.normalize("NFC", sent)
        if self.lines:
            text = text.replace("\r\n", "\n")
        self._check_length(text)
        self._check_characters(text)
        return text

    def _check_length(self, text: str) -> None:
        if len(text) < self.shortest:
            least = f"At least {self.shortest} characters." if self.shortest > 1 else "Not empty."
            raise refused("too-short", least)
        if len(text) > self.longest:
            raise refused("too-long", f"At most {self.longest} characters.")
        most = self.most_bytes or 4 * self.longest
        if len(text.encode("utf-8", "surrogatepass")) > most:
            raise refused("too-long", f"At most {most} bytes in UTF-8.")

    def _check_characters(self, text: str) -> None:
        if self.shortest and not text.strip():
            raise refused("blank", "Not blank.")
        if _BIDIRECTIONAL.search(text):
            raise refused("bidirectional-mark", "No marks that change the direction of writing.")
        if self.label and text != text.strip():
            raise refused("not-trimmed", "No spaces at the beginning or the end.")
        unseen = _UNPRINTED if self.label else frozenset({"Cc", "Cs", "Zl", "Zp"})
        spared = "\n\t" if self.lines else ""
        if any(unicodedata.category(sign) in unseen and sign not in spared for sign in text):
            raise refused("control-character", "No control characters and none without a shape.")


Tag = Annotated[str, Text(64, shortest=1, most_bytes=192, label=True, example="DEW-014")]
ExternalId = Annotated[str, Text(128, shortest=1, most_bytes=256, label=True, example="A-77120")]
Name = Annotated[str, Text(200, most_bytes=600)]
Notes = Annotated[str, Text(4000, most_bytes=8000, lines=True)]
ShortText = Annotated[str, Text(200, shortest=1, most_bytes=600)]
LabelName = Annotated[
    str, StringConstraints(strict=True, pattern=r"^[A-Za-z0-9][A-Za-z0-9._/-]{0,62}$")
]
LabelValue = Annotated[str, Text(200, most_bytes=600, label=True)]
Labels = Annotated[
    dict[LabelName, LabelValue], Field(max_length=20, examples=[{"department": "cardiology"}])
]
RecordIdText = Annotated[
    str,
    StringConstraints(strict=True, pattern=_UUID_7),
    Field(examples=["01890a5d-ac96-774b-bcce-b302099a8057"]),
]


def is_record_id(text: str) -> bool:
    """Tell whether a text has the form of a record's id: UUIDv7, lower case."""
    return len(text) == 36 and re.match(_UUID_7, text) is not None


# Days and moments, kept as text.


def _day(text: str) -> str:
    if _DAY.fullmatch(text) is None:
        raise refused("not-a-day", "A day is written YYYY-MM-DD.")
    try:
        day = date.fromisoformat(text)
    except ValueError:
        raise refused("not-a-day", "There is no such day in the calendar.") from None
    if not _EARLIEST_DAY <= day <= _LATEST_DAY:
        raise refused("out-of-range", f"A day from {_EARLIEST_DAY} to {_LATEST_DAY}.")
    return text


def _instant(text: str) -> str:
    try:
        return text_of(moment_of(text))
    except ValueError as error:
        raise refused("not-a-moment", str(error)) from None


Day = Annotated[
    str, AfterValidator(_day), Field(json_schema_extra={"format": "date"}, examples=["2027-03-01"])
]
Instant = Annotated[
    str,
    AfterValidator(_instant),
    Field(json_schema_extra={"format": "date-time"}, examples=["2027-03-01T08:00:00Z"]),
]


# Quantities.


@dataclass(frozen=True, slots=True, kw_only=True)
class _Bounds:
    gt: float | None = None
    ge: float | None = None
    lt: float | None = None
    le: float | None = None


class Quantity:
    """A number in the unit of the field's name, or a text with a number and its own unit."""

    __slots__ = ("bounds", "unit")

    def __init__(
        self,
        unit: units.FieldUnit,
        *,
        gt: float | None = None,
        ge: float | None = None,
        lt: float | None = None,
        le: float | None = None,
    ) -> None:
        self.unit = unit
        self.bounds = _Bounds(gt=gt, ge=ge, lt=lt, le=le)

    def __get_pydantic_core_schema__(
        self, _source: Any, _handler: GetCoreSchemaHandler
    ) -> CoreSchema:
        """Read a text with a unit first, then check the number and its bounds."""
        limits = self.bounds
        return core_schema.no_info_before_validator_function(
            self._number,
            core_schema.float_schema(
                strict=True,
                allow_inf_nan=False,
                gt=limits.gt,
                ge=limits.ge,
                lt=limits.lt,
                le=limits.le,
            ),
        )

    def __get_pydantic_json_schema__(
        self, schema: CoreSchema, handler: GetJsonSchemaHandler
    ) -> dict[str, Any]:
        """Publish both forms, with the unit and an example of each."""
        number = handler(schema) | {"type": "number"}
        # Bounds given by a Field around this one arrive under the names of the validator.
        names = {
            "gt": "exclusiveMinimum",
            "lt": "exclusiveMaximum",
            "ge": "minimum",
            "le": "maximum",
        }
        for name, published in names.items():
            if name in number:
                number[published] = number.pop(name)
        number["description"] = f"In {self.unit.unit.name}."
        if handler.mode == "serialization":
            return number  # Answers are in the unit of the name, always.
        text = {
            "type": "string",
            "maxLength": units.LONGEST_TEXT,
            "description": f"A number with a unit: {', '.join(self.unit.accepted)}.",
            "examples": [self.unit.example],
        }
        return {"anyOf": [number, text]}

    def _number(self, sent: Any) -> Any:
        if not isinstance(sent, str):
            return sent
        try:
            return units.read_quantity(sent, self.unit).value
        except units.UnitRefused as error:
            raise PydanticCustomError(
                "quantity", "{detail}", {"code": error.code, "detail": error.detail}
            ) from None


def _upto(unit: units.FieldUnit, le: float, ge: float = 0.0) -> Quantity:
    return Quantity(unit, ge=ge, le=le)


ABSOLUTE_ZERO_C: Final = -273.15
STANDARD_ATMOSPHERE_KPA: Final = 101.325

Litres = Annotated[float, _upto(units.LITRES, 1e7)]
CubicMetres = Annotated[float, _upto(units.CUBIC_METRES, 1e7)]
Kilograms = Annotated[float, _upto(units.KILOGRAMS, 1e7)]
SquareMetres = Annotated[float, _upto(units.SQUARE_METRES, 1e6)]
SquareMillimetres = Annotated[float, _upto(units.SQUARE_MILLIMETRES, 1e8)]
Metres = Annotated[float, _upto(units.METRES, 1e4)]
Millimetres = Annotated[float, _upto(units.MILLIMETRES, 1e5)]
Elevation = Annotated[float, _upto(units.METRES, 9000.0, -500.0)]
CubicMetresPerHour = Annotated[float, _upto(units.CUBIC_METRES_PER_HOUR, 1e7)]
SignedCubicMetresPerHour = Annotated[float, _upto(units.CUBIC_METRES_PER_HOUR, 1e7, -1e7)]
LitresPerMinute = Annotated[float, _upto(units.LITRES_PER_MINUTE, 1e6)]
LitresPerDay = Annotated[float, _upto(units.LITRES_PER_DAY, 1e7)]
KilogramsPerHour = Annotated[float, _upto(units.KILOGRAMS_PER_HOUR, 1e6)]
KilogramsPerDay = Annotated[float, _upto(units.KILOGRAMS_PER_DAY, 1e7)]
Celsius = Annotated[float, _upto(units.CELSIUS, 1000.0, ABSOLUTE_ZERO_C)]
Kelvins = Annotated[float, _upto(units.KELVINS, 2000.0)]
# Nothing lies further below the atmosphere than a vacuum does.
Kilopascal = Annotated[float, _upto(units.KILOPASCALS, 1e5, -STANDARD_ATMOSPHERE_KPA)]
KilopascalAbsolute = Annotated[float, _upto(units.KILOPASCALS_ABSOLUTE, 1e5)]
KilopascalOfLoad = Annotated[float, _upto(units.KILOPASCALS_OF_LOAD, 1e5)]
Seconds = Annotated[float, _upto(units.SECONDS, 1e9)]
Hours = Annotated[float, _upto(units.HOURS, 1e6)]
Days = Annotated[float, _upto(units.DAYS, 36525.0)]
Percent = Annotated[float, _upto(units.PERCENT, 100.0)]
Fraction = Annotated[float, _upto(units.FRACTION, 1.0)]
Newtons = Annotated[float, _upto(units.NEWTONS, 1e6)]


@dataclass(frozen=True, slots=True)
class ReadAs:
    """What was made of a quantity that came with a unit."""

    pointer: str
    sent: str
    read: float
    unit: str
    note: str | None


def read_as(raw: Any, model: BaseModel | type[BaseModel], *, at: str = "") -> list[ReadAs]:
    """List each quantity that was sent with a unit and what it was read as, in the order sent.

    ``raw`` is the parsed body, and ``model`` what was made of it, or the class that takes it.
    ``at`` is put before each pointer.
    """
    made = model.model_validate_json(json.dumps(raw)) if isinstance(model, type) else model
    return list(_readings(None, (), raw, made, at))


def _readings(
    annotation: Any, marks: tuple[Any, ...], raw: Any, value: Any, pointer: str
) -> Iterator[ReadAs]:
    """Follow what was sent and what was made of it side by side."""
    if isinstance(value, BaseModel) and isinstance(raw, Mapping):
        fields = type(value).model_fields
        for name in raw:
            if name in fields:
                field, below = fields[name], pointer_to(pointer, name)
                made = getattr(value, name)
                yield from _readings(
                    field.annotation, tuple(field.metadata), raw[name], made, below
                )
    elif isinstance(value, list) and isinstance(raw, list):
        for index, (item, made) in enumerate(zip(raw, value, strict=True)):
            yield from _readings(annotation, marks, item, made, pointer_to(pointer, index))
    elif isinstance(value, float) and isinstance(raw, str):
        # Only a quantity makes a number of a text, so there is one in the type.
        unit = next(mark.unit for mark in _marks(annotation, marks) if isinstance(mark, Quantity))
        reading = units.read_quantity(raw, unit)
        yield ReadAs(pointer, raw, reading.value, reading.unit_read, reading.note)


def _marks(annotation: Any, marks: tuple[Any, ...]) -> Iterator[Any]:
    """List what is written beside a type, in every choice and item of it too."""
    yield from marks
    if get_origin(annotation) is Annotated:
        inner, *beside = get_args(annotation)
        yield from _marks(inner, tuple(beside))
    else:
        for inner in get_args(annotation):
            yield from _marks(inner, ())


# Patches.


class Patch(Edge):
    """A merge patch (RFC 7396): what was sent is changed, everything else stays."""

    def changes(self) -> dict[str, Any]:
        """Return the members that were sent as plain JSON values; null stands for removal.

        An object holds only what was sent inside of it; a list is whole.
        """
        whole = self.model_dump(mode="json")
        sent = ((name, getattr(self, name)) for name in whole if name in self.model_fields_set)
        return {
            name: value.changes() if isinstance(value, Patch) else whole[name]
            for name, value in sent
        }


_UNIONS: Final = (Union, UnionType)
PatchClass = TypeVar("PatchClass", bound=Patch)


def patch_of(
    created: type[BaseModel],
    *,
    never_null: frozenset[str] = frozenset(),
    but: frozenset[str] = frozenset(),
) -> Callable[[type[PatchClass]], type[PatchClass]]:
    """Give a patch class every field of the model that creates the record, none of them required.

    Null is refused where the creating model does not take it, and for ``never_null`` besides.
    ``but`` leaves fields out, those that never change. Written as ``@patch_of(VesselCreate)``
    above ``class VesselPatch(Patch)``.
    """

    def filled(kind: type[PatchClass]) -> type[PatchClass]:
        fields: dict[str, Any] = {
            name: _patch_field(field, nullable=name not in never_null)
            for name, field in created.model_fields.items()
            if name not in but
        }
        made = create_model(
            kind.__name__, __base__=kind, __module__=kind.__module__, __doc__=kind.__doc__, **fields
        )
        made.__qualname__ = kind.__qualname__
        return made

    return filled


def patch_model(
    created: type[BaseModel], name: str, *, never_null: frozenset[str] = frozenset()
) -> type[Patch]:
    """Make a patch class by its name, as ``patch_of`` does."""
    members = {
        "__doc__": f"What changes; see {created.__name__}.",
        "__module__": created.__module__,
    }
    return patch_of(created, never_null=never_null)(type(name, (Patch,), members))


def _patch_field(field: FieldInfo, *, nullable: bool) -> tuple[Any, None]:
    """Keep a field's type, marks and words; the default is never read, only what was sent is."""
    annotation = _patched(field.annotation)
    if not nullable and get_origin(annotation) in _UNIONS:
        annotation = _union(kind for kind in get_args(annotation) if kind is not NoneType)
    extra = field.json_schema_extra
    kept = extra if isinstance(extra, dict) else {}

    def without_default(schema: dict[str, Any]) -> None:
        schema.pop("default", None)
        schema.update(kept)

    words = Field(
        description=field.description, examples=field.examples, json_schema_extra=without_default
    )
    return Annotated[(annotation, *field.metadata, words)], None


@cache
def _nested_patch(kind: type[BaseModel]) -> type[Patch]:
    return patch_model(kind, f"{kind.__name__}Patch")


def _patched(annotation: Any) -> Any:
    """Take each object in a type to its patch; lists stay, since they are replaced whole."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return _nested_patch(annotation)
    origin = get_origin(annotation)
    if origin is Annotated:
        inner, *marks = get_args(annotation)
        return Annotated[(_patched(inner), *marks)]
    if origin in _UNIONS:
        return _union(_patched(kind) for kind in get_args(annotation))
    return annotation


def _union(kinds: Iterable[Any]) -> Any:
    return Union[tuple(kinds)]  # noqa: UP007 - the choices are known only when this runs
