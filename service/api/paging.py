"""Pages of a list: a signed cursor, a limit, a link to the next.

A cursor says where the last page ended, by sort key and id, so that records made or removed in
between neither repeat nor hide one that stays. It belongs to one list with one filter; the secret
that signs it is a row of the database, so that replicas and a restored copy agree.
"""

import base64
import binascii
import hashlib
import hmac
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Annotated, Final, TypeAlias
from urllib.parse import urlencode

from fastapi import Query

from service.errors import CursorRefused

SMALLEST_PAGE: Final = 1
LARGEST_PAGE: Final = 500
USUAL_PAGE: Final = 100
LONGEST_CURSOR: Final = 2000

Limit = Annotated[
    int, Query(ge=SMALLEST_PAGE, le=LARGEST_PAGE, description="How many at most in one page.")
]
CursorText = Annotated[
    str | None,
    Query(alias="cursor", max_length=LONGEST_CURSOR, description="`next` of the page before."),
]
SortKey: TypeAlias = str | int | float | None

_SIGNATURE_BYTES: Final = 16
_PURPOSE: Final = b"rimeward page cursor 1"
# These say which page, not which list.
_NO_FILTER: Final = frozenset({"cursor", "limit", "total"})


@dataclass(frozen=True, slots=True)
class Cursor:
    """Where a page ended: the sort keys of its last record, and the record's id."""

    sort_keys: tuple[SortKey, ...]
    record_id: str


def filter_hash(path: str, parameters: Sequence[tuple[str, str]]) -> str:
    """Name a list with its filter and order, whatever the order of the parameters."""
    told = sorted((name, value) for name, value in parameters if name not in _NO_FILTER)
    return hashlib.sha256(json.dumps([path, told]).encode()).hexdigest()[:16]


def encode_cursor(cursor: Cursor, filters: str, secret: bytes) -> str:
    """Write and sign a cursor."""
    content = [list(cursor.sort_keys), cursor.record_id, filters]
    payload = json.dumps(content, separators=(",", ":"), allow_nan=False).encode()
    return base64.urlsafe_b64encode(_signature(payload, secret) + payload).rstrip(b"=").decode()


def decode_cursor(text: str, filters: str, secret: bytes) -> Cursor:
    """Read a cursor that this installation gave for the same list and filter.

    Raises
    ------
    CursorRefused
        Somebody else made it, it was altered, or it belongs to another list or filter.
    """
    signed = _decoded(text)
    signature, payload = signed[:_SIGNATURE_BYTES], signed[_SIGNATURE_BYTES:]
    if not hmac.compare_digest(signature, _signature(payload, secret)):
        raise CursorRefused("The cursor was not given by this installation.")
    sort_keys, record_id, given_for = json.loads(payload)
    if given_for != filters:
        raise CursorRefused("The cursor was given for another list or another filter.")
    return Cursor(tuple(sort_keys), record_id)


def _decoded(text: str) -> bytes:
    try:
        if len(text) > LONGEST_CURSOR:
            raise CursorRefused
        signed = base64.b64decode(text + "=" * (-len(text) % 4), altchars=b"-_", validate=True)
    except (binascii.Error, ValueError):
        raise CursorRefused("The cursor was not given by this installation.") from None
    return signed


def _signature(payload: bytes, secret: bytes) -> bytes:
    # A key of its own, so that a signature made for another purpose is none here.
    key = hmac.digest(secret, _PURPOSE, "sha256")
    return hmac.digest(key, payload, "sha256")[:_SIGNATURE_BYTES]


def next_link(path: str, parameters: Sequence[tuple[str, str]], cursor: str) -> Mapping[str, str]:
    """Give the header that links to the next page (RFC 8288)."""
    kept = [(name, value) for name, value in parameters if name != "cursor"]
    query = urlencode([*kept, ("cursor", cursor)])
    return {"Link": f'<{path}?{query}>; rel="next"'}
