import base64
from urllib.parse import parse_qs, urlsplit

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.api.paging import Cursor, decode_cursor, encode_cursor, filter_hash, next_link
from service.errors import CursorRefused

SECRET = b"a secret of the installation"
FILTERS = filter_hash("/v1/vessels", [("site", "north")])
SORT_KEYS = st.lists(
    st.none()
    | st.integers(-(2**53), 2**53)
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(max_size=20),
    max_size=3,
).map(tuple)


@given(SORT_KEYS, st.text(max_size=36))
def test_a_cursor_comes_back_as_it_was(sort_keys, record_id):
    cursor = Cursor(sort_keys, record_id)
    text = encode_cursor(cursor, FILTERS, SECRET)
    assert decode_cursor(text, FILTERS, SECRET) == cursor
    assert text.isascii()
    assert not set(text) & set("+/=&?")


@given(st.text(max_size=100))
def test_a_made_up_cursor_is_refused(text):
    with pytest.raises(CursorRefused):
        decode_cursor(text, FILTERS, SECRET)


@given(st.integers(min_value=0), st.integers(1, 255))
def test_a_cursor_with_one_byte_changed_is_refused(at, change):
    text = encode_cursor(Cursor(("D-1",), "id"), FILTERS, SECRET)
    signed = bytearray(base64.urlsafe_b64decode(text + "=" * (-len(text) % 4)))
    signed[at % len(signed)] ^= change
    with pytest.raises(CursorRefused):
        decode_cursor(base64.urlsafe_b64encode(signed).decode().rstrip("="), FILTERS, SECRET)


def test_a_cursor_belongs_to_its_list_filter_and_installation():
    text = encode_cursor(Cursor(("D-1",), "id"), FILTERS, SECRET)
    for filters, secret in (
        (filter_hash("/v1/rooms", [("site", "north")]), SECRET),
        (filter_hash("/v1/vessels", [("site", "south")]), SECRET),
        (FILTERS, b"another"),
    ):
        with pytest.raises(CursorRefused):
            decode_cursor(text, filters, secret)


def test_a_cursor_that_is_too_long_is_refused():
    with pytest.raises(CursorRefused):
        decode_cursor("A" * 3000, FILTERS, SECRET)


def test_the_order_of_parameters_and_the_page_size_leave_the_list_the_same():
    first = filter_hash("/v1/vessels", [("site", "n"), ("fluid", "helium"), ("limit", "5")])
    again = filter_hash("/v1/vessels", [("fluid", "helium"), ("cursor", "x"), ("site", "n")])
    assert first == again


def test_the_link_to_the_next_page_keeps_the_filter():
    header = next_link("/v1/vessels", [("q", 'a&b="<>'), ("cursor", "old"), ("limit", "5")], "new")
    target, _, relation = header["Link"].partition(">; ")
    assert relation == 'rel="next"'
    assert parse_qs(urlsplit(target.removeprefix("<")).query) == {
        "q": ['a&b="<>'],
        "limit": ["5"],
        "cursor": ["new"],
    }
