"""What pydantic refuses, in our words: a pointer, a code of ours, a sentence without the input.

Its own messages and contexts may repeat what was sent, so none is passed on; a kind of error that
is not in the table gets a sentence that says nothing but that.
"""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any, Final

from service.api.strict import MOST_ERRORS, Json, pointer_to
from service.errors import FieldError

# The names of bounds in an error's context are ours: they come from the schema, not the caller.
_SENTENCES: Final[Mapping[str, tuple[str, str]]] = {
    "missing": ("required", "This is required."),
    "extra_forbidden": ("unknown-field", "There is no such field."),
    "string_type": ("not-a-text", "A text is expected."),
    "string_too_short": ("too-short", "At least {min_length} characters."),
    "string_too_long": ("too-long", "At most {max_length} characters."),
    "string_pattern_mismatch": ("wrong-form", "The text has not the form expected."),
    "float_type": ("not-a-number", "A number is expected."),
    "float_parsing": ("not-a-number", "A number is expected."),
    "finite_number": ("not-finite", "A finite number is expected."),
    "int_type": ("not-an-integer", "An integer is expected."),
    "int_parsing": ("not-an-integer", "An integer is expected."),
    "int_parsing_size": ("number-too-large", "The integer is too large."),
    "int_from_float": ("not-an-integer", "An integer is expected."),
    "bool_type": ("not-a-boolean", "true or false is expected."),
    "bool_parsing": ("not-a-boolean", "true or false is expected."),
    "greater_than": ("out-of-range", "It must be above {gt}."),
    "greater_than_equal": ("out-of-range", "It must be at least {ge}."),
    "less_than": ("out-of-range", "It must be below {lt}."),
    "less_than_equal": ("out-of-range", "It must be at most {le}."),
    "multiple_of": ("out-of-range", "It must be a multiple of {multiple_of}."),
    "literal_error": ("not-one-of", "One of {expected} is expected."),
    "enum": ("not-one-of", "One of {expected} is expected."),
    "list_type": ("not-a-list", "A list is expected."),
    "tuple_type": ("not-a-list", "A list is expected."),
    "dict_type": ("not-an-object", "An object is expected."),
    "model_type": ("not-an-object", "An object is expected."),
    "model_attributes_type": ("not-an-object", "An object is expected."),
    "too_short": ("too-few", "At least {min_length} entries."),
    "too_long": ("too-many", "At most {max_length} entries."),
    "union_tag_invalid": ("not-one-of", "{discriminator} must be one of {expected_tags}."),
    "union_tag_not_found": ("required", "{discriminator} is required."),
    "none_required": ("must-be-null", "Only null is expected here."),
}
_ANYTHING_ELSE: Final = "This cannot be taken here."


def field_errors(
    found: Iterable[Mapping[str, Any]], sent: Json = None, *, at: str = ""
) -> tuple[FieldError, ...]:
    """Turn pydantic's list of errors in a body into ours, each place and code once."""
    made = (
        FieldError(pointer_of(error["loc"], sent, at), *_code_and_detail(error)) for error in found
    )
    return tuple(dict.fromkeys(made))[:MOST_ERRORS]


def parameter_errors(found: Iterable[Mapping[str, Any]]) -> tuple[FieldError, ...]:
    """Turn errors in the query, the path or headers into ours."""
    made = (
        FieldError("", *_code_and_detail(error), parameter=str(error["loc"][-1])[:100])
        for error in found
    )
    return tuple(dict.fromkeys(made))[:MOST_ERRORS]


def pointer_of(place: Sequence[str | int], sent: Json, at: str = "") -> str:
    """Follow an error's place through what was sent.

    Pydantic mixes the names of its own choices in a union into the place. They are told from
    member names by not being there; the last step may be absent, since it may be what is missing.
    """
    pointer, node = at, sent
    for number, step in enumerate(place):
        last = number == len(place) - 1
        if isinstance(node, dict) and isinstance(step, str):
            if step in node:
                pointer, node = pointer_to(pointer, step), node[step]
            elif last and step != "[key]":
                pointer = pointer_to(pointer, step)
        elif isinstance(node, list) and isinstance(step, int) and step < len(node):
            pointer, node = pointer_to(pointer, step), node[step]
    return pointer


def _code_and_detail(error: Mapping[str, Any]) -> tuple[str, str]:
    kind, context = error["type"], error.get("ctx", {})
    if kind in _SENTENCES:
        code, sentence = _SENTENCES[kind]
        return code, sentence.format_map({name: _plain(value) for name, value in context.items()})
    if kind in ("value_error", "assertion_error"):
        # A validator of ours raised it, and those do not repeat what they refuse.
        return "not-allowed", str(context.get("error", "")) or _ANYTHING_ELSE
    if "detail" in context:
        return context.get("code", kind), context["detail"]
    return kind.replace("_", "-"), _ANYTHING_ELSE


def _plain(value: Any) -> str:
    return f"{value:.15g}" if isinstance(value, float) else str(value)
