"""Records as values, and the one byte form in which they are hashed, stored and compared."""

import hashlib
import json
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from service.clock import moment_of, text_of

COMMON_FIELDS: Final = ("tag", "external_id", "name", "notes", "labels")
_HEADING: Final = ("id", "site_id", "revision", "created_at", "updated_at")

# The built-in encoder writes a float by its shortest repr, which reads back to the same float.
_ENCODER: Final = json.JSONEncoder(
    ensure_ascii=False, allow_nan=False, sort_keys=True, separators=(",", ":")
)


@dataclass(frozen=True, slots=True)
class Record:
    """One record in one revision; what belongs to every site has no site."""

    kind: str
    id: str
    site_id: str | None
    revision: int
    created_at: datetime
    updated_at: datetime
    fields: Mapping[str, Any]


def body(record: Record) -> dict[str, Any]:
    """Return a record as the object that is hashed, versioned and answered."""
    return {
        "id": record.id,
        "site_id": record.site_id,
        "revision": record.revision,
        "created_at": text_of(record.created_at),
        "updated_at": text_of(record.updated_at),
        **record.fields,
    }


def record_from_body(kind: str, body: Mapping[str, Any]) -> Record:
    """Return the record that a body was made from."""
    return Record(
        kind=kind,
        id=body["id"],
        site_id=body["site_id"],
        revision=body["revision"],
        created_at=moment_of(body["created_at"]),
        updated_at=moment_of(body["updated_at"]),
        fields={name: value for name, value in body.items() if name not in _HEADING},
    )


def canonical(value: Any) -> bytes:
    """Write a value as canonical JSON: UTF-8, sorted keys, no spaces, no NaN.

    Raises
    ------
    ValueError
        A number is not finite, or a text is no Unicode.
    """
    return _ENCODER.encode(value).encode()


def digest(data: bytes) -> str:
    """Return the SHA-256 of bytes in hexadecimal."""
    return hashlib.sha256(data).hexdigest()


def folded_tag(text: str) -> str:
    """Fold a tag so that spellings which people take for one are one."""
    # Folding can take a text out of NFC, so that it is composed once before and once after.
    folded = unicodedata.normalize("NFC", text).casefold()
    return unicodedata.normalize("NFC", folded)
