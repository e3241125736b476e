import json
import time

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.api.strict import LARGEST_INTEGER, LONGEST_NAME, parse_json, pointer_to
from service.errors import FieldsRefused, NotJson, RimewardError

NAMES = st.text(st.characters(exclude_categories=["Cs", "Cc"]), max_size=LONGEST_NAME)
JSON_VALUES = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-LARGEST_INTEGER, LARGEST_INTEGER)
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(st.characters(exclude_categories=["Cs", "Cc"])),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(NAMES, inner, max_size=4),
    max_leaves=20,
)


def outcome(body):
    try:
        return parse_json(body)
    except RimewardError as error:
        return error


@given(st.binary(max_size=200))
def test_arbitrary_bytes_are_parsed_or_refused(body):
    found = outcome(body)
    assert not isinstance(found, RimewardError) or found.errors
    assert not isinstance(found, RimewardError) or found.status in (400, 422)


@given(st.text(alphabet='{}[]",:\\u0d8tfn1e-+. NaI\n', max_size=60))
def test_text_made_of_the_signs_of_json_is_parsed_or_refused(text):
    found = outcome(text.encode())
    assert found.errors if isinstance(found, RimewardError) else found == json.loads(text)


@given(JSON_VALUES)
def test_what_is_sound_is_read_as_the_standard_library_reads_it(value):
    assert parse_json(json.dumps(value).encode()) == value


@pytest.mark.parametrize(
    ("body", "kind", "code", "pointer"),
    [
        (b'{"a":{"b":1,"b":2}}', NotJson, "duplicate-name", "/a/b"),
        (b'{"a":[0,NaN]}', NotJson, "not-finite", "/a/1"),
        (b'{"a":Infinity}', NotJson, "not-finite", "/a"),
        (b'{"a":-Infinity}', NotJson, "not-finite", "/a"),
        (b'{"a":1e400}', FieldsRefused, "number-too-large", "/a"),
        (b'{"a":123456789012345678901234567890}', FieldsRefused, "number-too-large", "/a"),
        (b'{"a":9007199254740993}', FieldsRefused, "number-too-large", "/a"),
        (b'{"a":"\\ud800"}', FieldsRefused, "lone-surrogate", "/a"),
        (b'{"a":"\\udc00\\ud800"}', FieldsRefused, "lone-surrogate", "/a"),
        (b'{"a":"\\u0000"}', FieldsRefused, "control-character", "/a"),
        (b'{"a":"\\u001b"}', FieldsRefused, "control-character", "/a"),
        (b'{"a":"\\u007f"}', FieldsRefused, "control-character", "/a"),
        (b'{"a":{"\\u0000":1}}', FieldsRefused, "control-character", "/a"),
        (b'{"a~b/c":"\\u0000"}', FieldsRefused, "control-character", "/a~0b~1c"),
        (b'{"' + b"n" * 300 + b'":1}', FieldsRefused, "name-too-long", ""),
        (b'{"a":"\x00"}', NotJson, "syntax", ""),
        (b'{"a":"\xff"}', NotJson, "not-utf-8", ""),
        (b'{"a":"\xed\xa0\x80"}', NotJson, "not-utf-8", ""),
        ('{"a":1}'.encode("utf-16"), NotJson, "not-utf-8", ""),
        (b'\xef\xbb\xbf{"a":1}', NotJson, "byte-order-mark", ""),
        (b"", NotJson, "empty", ""),
        (b"  \n", NotJson, "empty", ""),
        (b'{"a":1,}', NotJson, "syntax", ""),
        (b'{"a":1} x', NotJson, "syntax", ""),
        (b"{'a':1}", NotJson, "syntax", ""),
        (b'{"a":01}', NotJson, "syntax", ""),
        (b"[" * 33 + b"]" * 33, NotJson, "too-deep", ""),
        (b"[" * 500_000, NotJson, "too-deep", ""),
        (b'{"a":' * 100_000, NotJson, "too-deep", ""),
    ],
)
def test_a_hostile_body_is_refused_where_it_is_wrong(body, kind, code, pointer):
    with pytest.raises(kind) as refused:
        parse_json(body)
    assert (refused.value.errors[0].code, refused.value.errors[0].pointer) == (code, pointer)


@pytest.mark.parametrize("body", [b"[" * 32 + b"]" * 32, b'["[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[[["]'])
def test_depth_is_counted_outside_of_texts_only(body):
    assert isinstance(parse_json(body), list)


@pytest.mark.parametrize("unit", [b'"', b'"\\', b'\\"', b"[]", b"1,", b'"a":'])
def test_a_large_body_costs_linear_time(unit):
    body = unit * (1_000_000 // len(unit))
    begun = time.perf_counter()
    with pytest.raises(RimewardError):
        parse_json(body)
    assert time.perf_counter() - begun < 2.0


def test_a_number_of_a_million_digits_is_refused_at_once():
    begun = time.perf_counter()
    with pytest.raises(FieldsRefused):
        parse_json(b'{"a":' + b"7" * 1_000_000 + b"}")
    assert time.perf_counter() - begun < 2.0


def test_tabs_and_line_feeds_pass_for_notes():
    assert parse_json(b'{"notes":"a\\tb\\r\\nc"}') == {"notes": "a\tb\r\nc"}


def test_minus_zero_is_zero():
    assert str(parse_json(b"[-0.0, -0]")) == "[0.0, 0]"


def test_refusals_are_counted_and_not_without_end():
    with pytest.raises(FieldsRefused) as refused:
        parse_json(b"[" + b",".join([b"1e400"] * 1000) + b"]")
    assert len(refused.value.errors) == 50


def test_no_refusal_repeats_what_was_sent():
    with pytest.raises(RimewardError) as refused:
        parse_json(b'{"a":"secret-\\u0000"}')
    assert "secret" not in str(refused.value)


@pytest.mark.parametrize(
    ("name", "pointer"),
    [("foo", "/foo"), ("", "/"), ("a/b", "/a~1b"), ("m~n", "/m~0n"), (" ", "/ "), ("c%d", "/c%d")],
)
def test_pointers_escape_tilde_and_slash(name, pointer):
    """RFC 6901, section 5."""
    assert pointer_to("", name) == pointer
