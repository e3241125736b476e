"""Identifiers of records: UUID version 7, so that they sort by the time they were made."""

import secrets
import threading
from datetime import UTC, datetime, timedelta
from uuid import UUID

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_RANDOM_BITS = 74
_lock = threading.Lock()
_last = 0


def new_record_id(moment: datetime) -> str:
    """Make an id for a moment; within a process each is greater than the one before.

    RFC 9562, section 5.7: 48 bits of milliseconds, then version, variant and 74 random bits.
    """
    global _last
    milliseconds = (moment - _EPOCH) // timedelta(milliseconds=1)
    made = (milliseconds << _RANDOM_BITS) | secrets.randbits(_RANDOM_BITS)
    with _lock:
        # In the same millisecond, or after the clock went back, the last one is counted up
        # (RFC 9562, section 6.2, method 2).
        made = _last = made if made > _last else _last + 1 + secrets.randbits(32)
    return str(_uuid(made))


def _uuid(number: int) -> UUID:
    milliseconds, random = number >> _RANDOM_BITS, number & ((1 << _RANDOM_BITS) - 1)
    high, low = random >> 62, random & ((1 << 62) - 1)
    return UUID(int=(milliseconds << 80) | (0x7 << 76) | (high << 64) | (0b10 << 62) | low)
