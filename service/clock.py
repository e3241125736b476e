"""Time: the one place where the present moment comes from, and how a moment is written.

A moment is an aware ``datetime`` in UTC everywhere inside the service. As text it has a fixed
width, so that moments sort as text too.
"""

import re
from datetime import UTC, date, datetime, time, timedelta, timezone
from typing import Protocol
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

# RFC 3339, section 5.6. `datetime.fromisoformat` takes far more: week dates, missing seconds.
_RFC_3339 = re.compile(
    r"(?P<date>[0-9]{4}-[0-9]{2}-[0-9]{2})[Tt ]"
    r"(?P<clock>[0-9]{2}:[0-9]{2}:(?P<second>[0-9]{2}))(?:\.(?P<fraction>[0-9]+))?"
    r"(?P<offset>[Zz]|[+-][0-9]{2}:[0-9]{2})?"
)


class Clock(Protocol):
    """What tells the time; the service is given one and asks no other."""

    def now(self) -> datetime:
        """Return the present moment, aware and in UTC."""
        ...


class SystemClock:
    """The clock of the machine."""

    def now(self) -> datetime:
        """Return the present moment, aware and in UTC."""
        return datetime.now(UTC)


class FixedClock:
    """A clock that stands still until it is set or advanced."""

    def __init__(self, moment: datetime) -> None:
        self._moment = _in_utc(moment)

    def now(self) -> datetime:
        """Return the moment at which the clock stands."""
        return self._moment

    def set(self, moment: datetime) -> None:
        """Move the hands to a moment, forwards or back."""
        self._moment = _in_utc(moment)

    def advance(self, by: timedelta) -> datetime:
        """Move the hands by a duration and return the new moment."""
        self._moment += by
        return self._moment


def text_of(moment: datetime) -> str:
    """Write a moment as RFC 3339 in UTC with ``Z`` and always six digits after the second."""
    naive = _in_utc(moment).replace(tzinfo=None)
    return naive.isoformat(timespec="microseconds") + "Z"


def moment_of(text: str) -> datetime:
    """Read an RFC 3339 moment with any offset; what is finer than a microsecond is cut off.

    Raises
    ------
    ValueError
        The text has no offset, names a leap second, carries a suffix of RFC 9557, or is no moment.
    """
    if text.endswith("]"):
        raise ValueError("A suffix in brackets is not taken; write the offset alone.")
    match = _RFC_3339.fullmatch(text)
    if match is None:
        raise ValueError("Not a moment of RFC 3339, such as 2027-03-01T08:00:00Z.")
    if match["offset"] is None:
        raise ValueError("A moment needs its offset from UTC: end it with Z or, say, +01:00.")
    if match["second"] == "60":
        raise ValueError("A leap second is not taken; write the second before or after it.")
    naive = datetime.fromisoformat(f"{match['date']}T{match['clock']}")
    fraction = (match["fraction"] or "")[:6].ljust(6, "0")
    try:
        return naive.replace(
            microsecond=int(fraction), tzinfo=timezone(_offset_of(match["offset"]))
        ).astimezone(UTC)
    except OverflowError:
        raise ValueError("The moment lies outside of the years 1 to 9999.") from None


def end_of_day(day: date, zone: str) -> datetime:
    """Return the moment at which a day ends in a time zone: its next local midnight.

    Where the clocks skip that midnight, the day ends as they jump; where they pass it twice, at the
    first time, so that nothing falls due late.

    Raises
    ------
    ValueError
        The time zone is unknown, or the day is the last of all.
    """
    try:
        local = ZoneInfo(zone)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise ValueError(f"There is no time zone {zone!r}.") from None
    try:
        return datetime.combine(day + timedelta(days=1), time.min, local).astimezone(UTC)
    except OverflowError:
        raise ValueError("The day lies outside of the years 1 to 9999.") from None


def _offset_of(text: str) -> timedelta:
    if text in ("Z", "z"):
        return timedelta(0)
    hours, minutes = int(text[1:3]), int(text[4:6])
    if hours > 23 or minutes > 59:
        raise ValueError("An offset from UTC lies between -23:59 and +23:59.")
    offset = timedelta(hours=hours, minutes=minutes)
    return -offset if text.startswith("-") else offset


def _in_utc(moment: datetime) -> datetime:
    if moment.utcoffset() is None:
        raise ValueError("A moment needs a time zone; this one is naive.")
    return moment.astimezone(UTC)
