"""Moments as text, and the ends of days."""

import re
from datetime import UTC, date, datetime, timedelta, timezone
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.clock import FixedClock, SystemClock, end_of_day, moment_of, text_of

NOON = datetime(2027, 3, 1, 12, 0, tzinfo=UTC)
MOMENTS = st.datetimes(timezones=st.just(UTC))


def test_the_system_clock_tells_an_aware_moment_in_utc():
    before = datetime.now(UTC)
    told = SystemClock().now()
    assert told.tzinfo is UTC
    assert before <= told <= datetime.now(UTC)


def test_a_fixed_clock_moves_only_when_told():
    clock = FixedClock(NOON)
    assert clock.now() == clock.now() == NOON
    assert clock.advance(timedelta(hours=1)) == clock.now() == NOON + timedelta(hours=1)
    clock.set(NOON - timedelta(days=1))
    assert clock.now() == NOON - timedelta(days=1)


def test_a_fixed_clock_turns_any_zone_into_utc_and_refuses_none():
    clock = FixedClock(NOON.astimezone(timezone(timedelta(hours=5))))
    assert clock.now().tzinfo is UTC
    with pytest.raises(ValueError, match="time zone"):
        clock.set(NOON.replace(tzinfo=None))


@pytest.mark.parametrize(
    ("text", "moment"),
    [
        # RFC 3339, section 5.8.
        ("1985-04-12T23:20:50.52Z", datetime(1985, 4, 12, 23, 20, 50, 520000, UTC)),
        ("1996-12-19T16:39:57-08:00", datetime(1996, 12, 20, 0, 39, 57, tzinfo=UTC)),
        ("1937-01-01T12:00:27.87+00:20", datetime(1937, 1, 1, 11, 40, 27, 870000, UTC)),
        # Section 5.6: lower case and a space may stand in; section 4.3: an unknown local offset.
        ("1985-04-12t23:20:50z", datetime(1985, 4, 12, 23, 20, 50, tzinfo=UTC)),
        ("1985-04-12 23:20:50Z", datetime(1985, 4, 12, 23, 20, 50, tzinfo=UTC)),
        ("1985-04-12T23:20:50-00:00", datetime(1985, 4, 12, 23, 20, 50, tzinfo=UTC)),
    ],
)
def test_the_examples_of_rfc_3339_are_read(text, moment):
    assert moment_of(text) == moment
    assert moment_of(text).tzinfo is UTC


def test_digits_below_a_microsecond_are_cut_off():
    assert moment_of("2027-03-01T12:00:00.123456999Z").microsecond == 123456


@pytest.mark.parametrize(
    ("text", "why"),
    [
        ("2027-03-01T12:00:00", "offset"),
        ("1990-12-31T23:59:60Z", "leap second"),  # RFC 3339, section 5.8.
        ("1996-12-19T16:39:57-08:00[America/Los_Angeles]", "brackets"),  # RFC 9557, section 4.2.
        ("2022-07-08T00:14:07Z[!u-ca=gregory]", "brackets"),
        ("2027-03-01T12:00:00 01:00", "RFC 3339"),
        ("2027-03-01", "RFC 3339"),
        ("2027-W09-1T12:00:00Z", "RFC 3339"),
        ("20270301T120000Z", "RFC 3339"),
        ("2027-03-01T12:00Z", "RFC 3339"),
        ("2027-03-01T12:00:00,5Z", "RFC 3339"),
        ("٢٠٢٧-03-01T12:00:00Z", "RFC 3339"),
        ("2027-03-01T12:00:00Z\n", "RFC 3339"),
        ("", "RFC 3339"),
        ("2027-02-29T12:00:00Z", "day"),
        ("2027-03-01T24:00:00Z", "hour"),
        ("2027-03-01T12:00:00+24:00", "23:59"),
        ("2027-03-01T12:00:00+01:60", "23:59"),
        ("0001-01-01T00:00:00+01:00", "years"),
    ],
)
def test_what_is_no_moment_is_refused_with_a_sentence(text, why):
    with pytest.raises(ValueError, match=why):
        moment_of(text)


@given(MOMENTS)
def test_a_moment_survives_being_written_and_read(moment):
    assert moment_of(text_of(moment)) == moment


@given(MOMENTS, MOMENTS)
def test_moments_sort_as_their_texts(one, other):
    assert (one < other) == (text_of(one) < text_of(other))


def test_a_text_has_always_the_same_width():
    assert text_of(NOON) == "2027-03-01T12:00:00.000000Z"
    assert text_of(datetime(33, 4, 3, tzinfo=UTC)) == "0033-04-03T00:00:00.000000Z"
    shifted = NOON.astimezone(timezone(timedelta(hours=-9)))
    assert text_of(shifted) == text_of(NOON)
    with pytest.raises(ValueError, match="naive"):
        text_of(NOON.replace(tzinfo=None))


# The offsets and transitions are those of the IANA time zone database.
@pytest.mark.parametrize(
    ("day", "zone", "ends"),
    [
        (date(2027, 3, 1), "UTC", "2027-03-02T00:00:00Z"),
        (date(2026, 1, 15), "Europe/Berlin", "2026-01-16T00:00:00+01:00"),
        (date(2026, 7, 15), "Europe/Berlin", "2026-07-16T00:00:00+02:00"),
        # A day of 23 hours and one of 25: the offset is that of the day's end.
        (date(2026, 3, 29), "Europe/Berlin", "2026-03-30T00:00:00+02:00"),
        (date(2026, 10, 25), "Europe/Berlin", "2026-10-26T00:00:00+01:00"),
        # Midnight is skipped: at 00:00 -03:00 the clocks showed 01:00 -02:00.
        (date(2018, 11, 3), "America/Sao_Paulo", "2018-11-04T00:00:00-03:00"),
        # Midnight is passed twice: at 01:00 +00:00 the clocks went back to 00:00 -01:00.
        (date(2025, 10, 25), "Atlantic/Azores", "2025-10-26T00:00:00+00:00"),
        # Samoa left out the 30th of December 2011.
        (date(2011, 12, 29), "Pacific/Apia", "2011-12-30T10:00:00Z"),
    ],
)
def test_a_day_ends_at_the_next_local_midnight(day, zone, ends):
    assert end_of_day(day, zone) == moment_of(ends)
    assert end_of_day(day, zone).tzinfo is UTC


@pytest.mark.parametrize("zone", ["", "Mars/Olympus", "../etc/passwd", "/etc/passwd", "America"])
def test_an_unknown_zone_is_refused(zone):
    with pytest.raises(ValueError, match="no time zone"):
        end_of_day(date(2027, 3, 1), zone)


def test_the_last_day_of_all_has_no_end():
    with pytest.raises(ValueError, match="9999"):
        end_of_day(date.max, "UTC")


def test_no_other_module_asks_for_the_present_moment():
    asks = re.compile(r"\b(?:datetime\.(?:now|utcnow|today)|date\.today)\b")
    package = Path(__file__).parent.parent / "service"
    modules = [path for path in package.rglob("*.py") if path != package / "clock.py"]
    assert modules
    assert [path.name for path in modules if asks.search(path.read_text("utf-8"))] == []
