"""Headers that make a write conditional, named, or repeatable; and tags of what was answered."""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Final
from urllib.parse import unquote_to_bytes

from starlette.datastructures import Headers

from service.clock import moment_of
from service.errors import HeaderRefused, PreconditionNeeded

LONGEST_REASON: Final = 500
LONGEST_KEY: Final = 255
# Clocks of callers run a little ahead.
AHEAD_AT_MOST: Final = timedelta(minutes=5)

# RFC 9110, section 8.8.3: an opaque tag holds any visible character but the quote.
_ENTITY_TAG: Final = re.compile(r'(W/)?"([\x21\x23-\x7e\x80-\xff]*)"')
_SEPARATOR: Final = re.compile(r"[ \t]*(?:,[ \t]*)+|[ \t]*$")
_CONTROL: Final = re.compile("[\x00-\x1f\x7f-\x9f\u2028\u2029]")
_QUOTED: Final = re.compile(r'"((?:[\x20\x21\x23-\x5b\x5d-\x7e]|\\["\\])*)"')
_VISIBLE: Final = re.compile(r"[\x21-\x7e]+")
_RFC_8187: Final = re.compile(r"UTF-8'[A-Za-z-]*'", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class EntityTag:
    """An entity tag: what stands between the quotes, and whether it is weak."""

    opaque: str
    weak: bool = False

    def __str__(self) -> str:
        """Write it as in a header."""
        return f'{"W/" if self.weak else ""}"{self.opaque}"'


@dataclass(frozen=True, slots=True)
class EntityTags:
    """The value of ``If-Match`` or ``If-None-Match``: a list of tags, or any."""

    tags: tuple[EntityTag, ...]
    any: bool = False

    def matches_strongly(self, present: EntityTag) -> bool:
        """Compare as for ``If-Match``: equal, and neither weak."""
        return self.any or (not present.weak and present in self.tags)

    def matches_weakly(self, present: EntityTag) -> bool:
        """Compare as for ``If-None-Match``: equal, weak or not."""
        return self.any or any(tag.opaque == present.opaque for tag in self.tags)


@dataclass(frozen=True, slots=True)
class WriteHeaders:
    """What the headers of a write say."""

    if_match: frozenset[int] | None
    """Revisions at which the record may be changed; none: at any."""
    reason: str | None
    stated_at: datetime | None
    idempotency_key: str | None


def record_tag(revision: int) -> str:
    """Write the strong tag of a record at a revision."""
    return str(EntityTag(str(revision)))


def parse_entity_tags(value: str, header: str) -> EntityTags:
    """Parse a list of entity tags."""
    text = value.strip(" \t")
    if text == "*":
        return EntityTags((), any=True)
    tags: list[EntityTag] = []
    at = _leading_commas(text)
    while at < len(text):
        found = _ENTITY_TAG.match(text, at)
        after = _SEPARATOR.match(text, found.end()) if found else None
        if found is None or after is None:
            detail = 'A list of quoted tags is expected, such as "7", or *.'
            raise HeaderRefused.named(header, "not-entity-tags", detail)
        tags.append(EntityTag(found[2], weak=found[1] is not None))
        at = after.end()
    if not tags:
        raise HeaderRefused.named(header, "not-entity-tags", "No tag is given.")
    return EntityTags(tuple(tags))


def _leading_commas(text: str) -> int:
    return len(text) - len(text.lstrip(" \t,"))


def if_match_revisions(value: str | None, *, demanded: bool = False) -> frozenset[int] | None:
    """Read ``If-Match`` as the revisions that may be changed; none: any.

    A weak tag and one that is no revision match nothing, by the strong comparison.
    """
    if value is None:
        if demanded:
            raise PreconditionNeeded("Send If-Match with the ETag of the record as you read it.")
        return None
    found = parse_entity_tags(value, "If-Match")
    if found.any:
        return None
    return frozenset(
        int(tag.opaque)
        for tag in found.tags
        if not tag.weak and re.fullmatch(r"0|[1-9][0-9]{0,17}", tag.opaque)
    )


def not_modified(if_none_match: str | None, present: str) -> bool:
    """Tell whether the caller has what is present; a header that cannot be read has nothing."""
    if if_none_match is None:
        return False
    tag = _ENTITY_TAG.fullmatch(present)
    if tag is None:
        raise ValueError("The present tag is no entity tag.")
    try:
        return parse_entity_tags(if_none_match, "If-None-Match").matches_weakly(EntityTag(tag[2]))
    except HeaderRefused:
        return False  # RFC 9110 lets a reader ignore it; the full answer is always right.


def parse_reason(value: str) -> str | None:
    """Read ``Change-Reason``: UTF-8 as it stands, or in the form of RFC 8187."""
    try:
        marked = _RFC_8187.match(value)
        raw = unquote_to_bytes(value[marked.end() :]) if marked else value.encode("latin-1")
        text = raw.decode("utf-8").strip(" ")
    except (UnicodeDecodeError, UnicodeEncodeError):
        detail = "Write it in UTF-8, or as UTF-8''… with percent signs."
        raise HeaderRefused.named("Change-Reason", "not-utf-8", detail) from None
    if _CONTROL.search(text):
        raise HeaderRefused.named("Change-Reason", "control-character", "No control characters.")
    if len(text) > LONGEST_REASON:
        detail = f"At most {LONGEST_REASON} characters."
        raise HeaderRefused.named("Change-Reason", "too-long", detail)
    return text or None


def parse_stated_at(value: str, now: datetime) -> datetime:
    """Read ``Change-Stated-At``: when it happened in the world, which is not to come."""
    try:
        moment = moment_of(value.strip())
    except ValueError as error:
        raise HeaderRefused.named("Change-Stated-At", "not-a-moment", str(error)) from None
    if moment > now + AHEAD_AT_MOST:
        detail = "The moment lies in the future."
        raise HeaderRefused.named("Change-Stated-At", "in-the-future", detail)
    return moment


def parse_idempotency_key(value: str) -> str:
    """Read ``Idempotency-Key``: the quoted string of the draft, or the same characters bare."""
    text = value.strip(" \t")
    quoted = _QUOTED.fullmatch(text)
    key = re.sub(r'\\(["\\])', r"\1", quoted[1]) if quoted else text
    if not _VISIBLE.fullmatch(key) or len(key) > LONGEST_KEY or (not quoted and '"' in key):
        detail = f"1 to {LONGEST_KEY} visible ASCII characters, in quotes or bare."
        raise HeaderRefused.named("Idempotency-Key", "wrong-form", detail)
    return key


def write_headers(
    headers: Headers, now: datetime, *, if_match_demanded: bool = False
) -> WriteHeaders:
    """Read all headers of a write."""
    reason = _single(headers, "Change-Reason")
    stated_at = _single(headers, "Change-Stated-At")
    key = _single(headers, "Idempotency-Key")
    return WriteHeaders(
        if_match=if_match_revisions(_joined(headers, "If-Match"), demanded=if_match_demanded),
        reason=None if reason is None else parse_reason(reason),
        stated_at=None if stated_at is None else parse_stated_at(stated_at, now),
        idempotency_key=None if key is None else parse_idempotency_key(key),
    )


def _joined(headers: Headers, name: str) -> str | None:
    """Join the lines of a header that is a list (RFC 9110, section 5.3)."""
    lines: Sequence[str] = headers.getlist(name)
    return ", ".join(lines) if lines else None


def _single(headers: Headers, name: str) -> str | None:
    lines: Sequence[str] = headers.getlist(name)
    if len(lines) > 1:
        raise HeaderRefused.named(name, "sent-twice", "Send this header once.")
    return lines[0] if lines else None
