from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st
from starlette.datastructures import Headers

from service.api.conditional import (
    EntityTag,
    if_match_revisions,
    not_modified,
    parse_entity_tags,
    parse_idempotency_key,
    parse_reason,
    parse_stated_at,
    record_tag,
    write_headers,
)
from service.errors import HeaderRefused, PreconditionNeeded

NOW = datetime(2027, 3, 1, 8, tzinfo=UTC)


@pytest.mark.parametrize(
    ("first", "second", "strong", "weak"),
    [
        ('W/"1"', 'W/"1"', False, True),
        ('W/"1"', 'W/"2"', False, False),
        ('W/"1"', '"1"', False, True),
        ('"1"', '"1"', True, True),
    ],
)
def test_tags_are_compared_strongly_and_weakly(first, second, strong, weak):
    """RFC 9110, section 8.8.3.2, table 3."""
    sent = parse_entity_tags(first, "If-Match")
    present = parse_entity_tags(second, "ETag").tags[0]
    assert sent.matches_strongly(present) is strong
    assert sent.matches_weakly(present) is weak


@pytest.mark.parametrize("value", ['"xyzzy"', 'W/"xyzzy"', '"xyzzy", "r2d2xxxx", "c3piozzzz"', "*"])
def test_the_examples_of_the_standard_match_their_tag(value):
    """RFC 9110, sections 13.1.1 and 13.1.2."""
    assert not_modified(value, '"xyzzy"')


def test_a_tag_may_hold_commas_and_a_list_empty_places():
    assert parse_entity_tags(' ,"a,b" ,, W/"c",', "If-Match").tags == (
        EntityTag("a,b"),
        EntityTag("c", weak=True),
    )


@pytest.mark.parametrize("value", ["", ",", "7", '"7', '7"', '"7" "8"', '"7",8', 'w/"7"', '"a b"'])
def test_what_is_no_list_of_tags_is_refused_or_ignored(value):
    with pytest.raises(HeaderRefused) as refused:
        if_match_revisions(value)
    assert refused.value.errors[0].parameter == "If-Match"
    assert not_modified(value, '"7"') is False


@given(st.text(max_size=40))
def test_any_header_is_read_or_refused(value):
    assert not_modified(value, '"4711-c"') in (True, False)
    for parse in (if_match_revisions, parse_reason, parse_idempotency_key):
        refused = refusal_of(parse, value)
        assert refused is None or refused.errors


def refusal_of(parse, value):
    try:
        parse(value)
    except HeaderRefused as error:
        return error
    return None


@given(st.lists(st.integers(1, 10**12), min_size=1, max_size=5))
def test_the_tag_of_a_record_comes_back_as_its_revision(revisions):
    value = ", ".join(record_tag(revision) for revision in revisions)
    assert if_match_revisions(value) == frozenset(revisions)


def test_a_weak_tag_and_one_of_another_kind_match_no_revision():
    assert if_match_revisions('W/"7", "4711-c", "07"') == frozenset()


def test_any_revision_may_be_asked_for_and_a_precondition_demanded():
    assert if_match_revisions("*", demanded=True) is None
    assert if_match_revisions(None) is None
    with pytest.raises(PreconditionNeeded):
        if_match_revisions(None, demanded=True)


def test_a_reason_is_read_as_utf_8_or_in_its_escaped_form():
    sent = "Lüfter geprüft".encode().decode("latin-1")
    assert parse_reason(sent) == "Lüfter geprüft"
    assert parse_reason("UTF-8''%c2%a3%20rates") == "£ rates"  # RFC 8187, section 3.2.3.
    assert parse_reason("  ") is None


@pytest.mark.parametrize("value", ["a\tb", "UTF-8''%00", "UTF-8''%0d%0a", "\xff", "x" * 501])
def test_a_reason_with_controls_or_too_long_is_refused(value):
    with pytest.raises(HeaderRefused):
        parse_reason(value)


def test_a_change_is_stated_in_the_past_or_just_now():
    assert parse_stated_at("2027-03-01T09:05:00+01:00", NOW) == NOW + timedelta(minutes=5)
    for wrong in ("2027-03-01T08:05:01Z", "2027-03-01T08:00:00", "yesterday"):
        with pytest.raises(HeaderRefused):
            parse_stated_at(wrong, NOW)


def test_a_key_is_one_quoted_or_bare():
    plain = "8e03978e-40d5-43dd-bc93-6894a57f9324"
    assert parse_idempotency_key(f'"{plain}"') == parse_idempotency_key(plain) == plain
    assert parse_idempotency_key(r'"a\"b\\c"') == r'a"b\c'
    assert len(parse_idempotency_key("k" * 255)) == 255


@pytest.mark.parametrize("value", ["", '""', "k" * 256, "a b", '"a b"', 'a"b', '"a', "ü", "a\n"])
def test_a_key_of_another_form_is_refused(value):
    with pytest.raises(HeaderRefused):
        parse_idempotency_key(value)


def test_the_headers_of_a_write_are_read_together():
    found = write_headers(
        Headers(
            {
                "if-match": '"7"',
                "change-reason": "moved",
                "change-stated-at": "2027-03-01T07:00:00Z",
                "idempotency-key": '"k1"',
            }
        ),
        NOW,
    )
    assert found.if_match == frozenset({7})
    assert found.reason == "moved"
    assert found.stated_at == NOW - timedelta(hours=1)
    assert found.idempotency_key == "k1"


def test_lines_of_a_list_are_joined_and_a_single_header_comes_once():
    twice = Headers(raw=[(b"if-match", b'"7"'), (b"if-match", b'"8"')])
    assert write_headers(twice, NOW).if_match == frozenset({7, 8})
    keys = Headers(raw=[(b"idempotency-key", b"a"), (b"idempotency-key", b"b")])
    with pytest.raises(HeaderRefused):
        write_headers(keys, NOW)
