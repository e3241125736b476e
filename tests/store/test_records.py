import json
from datetime import UTC, datetime, timedelta
from uuid import UUID

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.store.ids import new_record_id
from service.store.records import body, canonical, digest, folded_tag, record_from_body
from tests.store.estate import MOMENT, a_record

json_values = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(st.characters(exclude_categories=["Cs"])),
    lambda inner: st.lists(inner) | st.dictionaries(st.text("abÄ\U0001f9ca"), inner),
    max_leaves=10,
)


@given(json_values)
def test_canonical_json_reads_back_as_what_it_was(value):
    assert json.loads(canonical(value)) == value


@given(st.dictionaries(st.text("abcdef"), st.integers()))
def test_canonical_json_does_not_depend_on_the_order_of_keys(value):
    assert canonical(value) == canonical(dict(reversed(value.items())))


def test_canonical_json_has_one_form():
    value = {"b": [1, 1.0, 1e16, 0.1], "a": "ü\n", "ä": None, "A": True}
    # RFC 8259 allows it; sorted by code point, no spaces, floats by the shortest text (Python's).
    assert canonical(value).decode() == ('{"A":true,"a":"ü\\n","b":[1,1.0,1e+16,0.1],"ä":null}')


@pytest.mark.parametrize("value", [float("nan"), float("inf"), "\ud800"])
def test_what_is_no_json_is_refused(value):
    with pytest.raises(ValueError, match=r"JSON|surrogates"):
        canonical({"value": value})


def test_the_digest_is_sha_256():
    """FIPS 180-4, the example of the one-block message 'abc'."""
    assert digest(b"abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_a_record_is_made_again_from_its_body():
    record = a_record("vessel", "site", counted_at="2027-02-28T23:59:59.000001Z")
    assert record_from_body("vessel", json.loads(canonical(body(record)))) == record


@pytest.mark.parametrize(
    ("left", "right"),
    [("D-12", "d-12"), ("STRASSE", "straße"), ("A\u030angstrom", "Ångstrom"), ("\u212b", "å"),
     ("ΟΔΟΣ", "οδος")],
)  # fmt: skip
def test_tags_that_people_take_for_one_fold_to_one(left, right):
    assert folded_tag(left) == folded_tag(right)


@given(st.text())
def test_folding_twice_is_folding_once(text):
    assert folded_tag(folded_tag(text)) == folded_tag(text)


def test_ids_are_uuids_of_version_7_that_carry_their_moment():
    """RFC 9562, section 5.7."""
    made = UUID(new_record_id(datetime(2100, 1, 1, tzinfo=UTC)))
    assert (made.version, made.variant) == (7, "specified in RFC 4122")
    assert made.int >> 80 == int(datetime(2100, 1, 1, tzinfo=UTC).timestamp() * 1000)


def test_ids_grow_even_when_the_clock_does_not():
    later = datetime(2100, 1, 2, tzinfo=UTC)
    moments = [later, later, later - timedelta(days=1), MOMENT, later + timedelta(milliseconds=1)]
    made = [new_record_id(moment) for moment in moments for _ in range(50)]
    assert made == sorted(made)
    assert len(set(made)) == len(made)
