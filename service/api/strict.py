"""JSON that means one thing only: bytes to values, or a refusal with a pointer.

The parser of the standard library keeps the last of two equal names, reads ``NaN``, turns 1e400
into infinity, passes half a surrogate pair on, and recurses as deep as it is told to. Each of
these would be a silent change of what was sent, or a fault further on, so each is refused here.
"""

import json
import math
import re
from dataclasses import dataclass
from typing import Any, Final, TypeAlias

from service.errors import FieldError, FieldsRefused, NotJson

Json: TypeAlias = bool | int | float | str | list["Json"] | dict[str, "Json"] | None

DEEPEST: Final = 32
LARGEST_INTEGER: Final = 2**53
LONGEST_NAME: Final = 200
MOST_ERRORS: Final = 50

# A string with or without its closing quote, or a bracket. Possessive, so that it stays linear.
_STRING_OR_BRACKET: Final = re.compile(r'"(?:[^"\\]|\\.)*+"?|[\[\]{}]', re.DOTALL)
_SURROGATE: Final = re.compile("[\ud800-\udfff]")
# C0 without tab, line feed and carriage return, which notes may have; delete; C1.
_CONTROL: Final = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f]")


@dataclass(frozen=True, slots=True)
class _Refused:
    """Stands for a value that the parser met and that cannot be taken."""

    code: str
    detail: str
    not_json: bool = False


@dataclass(frozen=True, slots=True)
class _Members:
    """The members of an object in the order sent, equal names included."""

    pairs: list[tuple[str, Any]]


def pointer_to(pointer: str, step: str | int) -> str:
    """Lengthen an RFC 6901 pointer by one member name or index."""
    return f"{pointer}/{str(step).replace('~', '~0').replace('/', '~1')}"


def parse_json(body: bytes) -> Json:
    """Parse one JSON text.

    Raises
    ------
    NotJson
        It is not UTF-8, no JSON, too deeply nested, or names a member twice.
    FieldsRefused
        It holds a number or a text that no field could take.
    """
    text = _decoded(body)
    _refuse_depth(text)
    try:
        parsed = json.loads(
            text,
            object_pairs_hook=_Members,
            parse_constant=_constant,
            parse_float=_float,
            parse_int=_integer,
        )
    except json.JSONDecodeError as error:
        place = f"line {error.lineno}, column {error.colno}"
        raise NotJson.at("", "syntax", f"Not JSON at {place}: {_lower(error.msg)}.") from None
    reader = _Reader([], [])
    value = reader.read(parsed, "")
    reader.refuse()
    return value


def _decoded(body: bytes) -> str:
    if not body.strip():
        raise NotJson.at("", "empty", "The body is empty; a JSON text is expected.")
    if body.startswith(b"\xef\xbb\xbf"):
        raise NotJson.at("", "byte-order-mark", "The body begins with a byte order mark.")
    try:
        return body.decode("utf-8")
    except UnicodeDecodeError as error:
        detail = f"The body is not UTF-8 at byte {error.start}."
        raise NotJson.at("", "not-utf-8", detail) from None


def _refuse_depth(text: str) -> None:
    """Count brackets outside of strings, before anything recurses over them."""
    depth = 0
    for token in _STRING_OR_BRACKET.finditer(text):
        mark = text[token.start()]
        if mark in "[{":
            depth += 1
        elif mark in "]}":
            depth -= 1
        if depth > DEEPEST:
            raise NotJson.at("", "too-deep", f"Lists and objects nest at most {DEEPEST} deep.")


def _lower(message: str) -> str:
    return message[:1].lower() + message[1:].removesuffix(" at").rstrip(": ")


def _constant(_name: str) -> _Refused:
    return _Refused("not-finite", "JSON has no NaN and no Infinity.", not_json=True)


def _float(text: str) -> float | _Refused:
    value = float(text)
    if not math.isfinite(value):
        return _Refused("number-too-large", "The number is too large.")
    return value + 0.0  # Minus zero would be written back as another text than zero.


def _integer(text: str) -> int | _Refused:
    # The length comes first: the digits of a long one take quadratic time to convert.
    if len(text) > 17 or abs(int(text)) > LARGEST_INTEGER:
        detail = f"An integer lies within plus and minus {LARGEST_INTEGER}."
        return _Refused("number-too-large", detail)
    return int(text)


@dataclass(frozen=True, slots=True)
class _Reader:
    """Walks what was parsed, makes plain values of it and gathers what is refused."""

    not_json: list[FieldError]
    fields: list[FieldError]

    def read(self, parsed: Any, pointer: str) -> Json:
        """Make the plain value of one node; a refused one becomes null and is noted."""
        match parsed:
            case _Members(pairs):
                return self._object(pairs, pointer)
            case list():
                return [self.read(item, pointer_to(pointer, i)) for i, item in enumerate(parsed)]
            case str():
                self._check_text(parsed, pointer)
            case _Refused(code, detail, not_json):
                into = self.not_json if not_json else self.fields
                into.append(FieldError(pointer, code, detail))
                return None
        plain: Json = parsed
        return plain

    def _object(self, pairs: list[tuple[str, Any]], pointer: str) -> dict[str, Json]:
        plain: dict[str, Json] = {}
        for name, parsed in pairs:
            if not self._check_name(name, pointer):
                continue
            below = pointer_to(pointer, name)
            if name in plain:
                detail = "The name stands twice in one object."
                self.not_json.append(FieldError(below, "duplicate-name", detail))
            plain[name] = self.read(parsed, below)
        return plain

    def _check_name(self, name: str, pointer: str) -> bool:
        """A name becomes part of a pointer, so a bad one is told of at the object around it."""
        if len(name) > LONGEST_NAME:
            detail = f"A member's name has at most {LONGEST_NAME} characters."
            self.fields.append(FieldError(pointer, "name-too-long", detail))
            return False
        return self._check_text(name, pointer, "A member's name")

    def _check_text(self, text: str, pointer: str, what: str = "The text") -> bool:
        if _SURROGATE.search(text):
            detail = f"{what} has half of a surrogate pair, which is no character."
            self.fields.append(FieldError(pointer, "lone-surrogate", detail))
            return False
        if _CONTROL.search(text):
            detail = f"{what} has a control character."
            self.fields.append(FieldError(pointer, "control-character", detail))
            return False
        return True

    def refuse(self) -> None:
        """Raise if anything was noted; what is no JSON at all comes first."""
        if self.not_json:
            raise NotJson(errors=self.not_json[:MOST_ERRORS])
        if self.fields:
            raise FieldsRefused(errors=self.fields[:MOST_ERRORS])
