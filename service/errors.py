"""Errors that a caller can see: one shallow tree.

    RimewardError
    ├── what was sent
    │   ├── NotJson               400  the body is no JSON text that this service takes
    │   ├── HeaderRefused         400  a request header cannot be read
    │   ├── CursorRefused         400  a page cursor of another list, filter or installation
    │   ├── BodyTooLarge          413  more bytes than this path takes
    │   ├── MediaTypeRefused      415  no JSON, or compressed
    │   ├── FieldsRefused         422  fields or parameters with a value that cannot be
    │   └── IdempotencyMismatch   422  the same Idempotency-Key with another request
    ├── who asks
    │   ├── KeyMissing            401  no key was sent
    │   ├── KeyUnknown            401  a key that is unknown, revoked or expired
    │   ├── NotAllowed            403  the key's role does not reach so far
    │   └── TooManyRequests       429  the rate of this key is used up
    ├── what is there
    │   ├── RecordNotFound        404  no such record for this key
    │   ├── AsOfTooEarly          404  a moment before the first, or one no longer kept
    │   ├── NoSuchCase            404  the room has no case like the one asked for
    │   ├── PathNotFound          404  no such path
    │   ├── MethodRefused         405  the path does not take this method
    │   ├── NotAcceptable         406  no form of the answer that the caller takes
    │   ├── RevisionMoved         412  the record has changed since it was read
    │   ├── PreconditionNeeded    428  this site wants If-Match on every write
    │   └── Conflict              409  what is there stands against it
    │       ├── DuplicateTag           the tag is taken in this site and kind
    │       ├── DuplicateExternalId    the external id is taken likewise
    │       ├── CannotCompute          the room's numbers cannot be computed
    │       ├── StillReferred          other records refer to what was to go
    │       ├── ReadOnlyRecord         a shipped basis or fluid
    │       ├── IdempotencyRunning     the first request with this key still runs
    │       └── SecretShownOnce        a replay cannot show the secret again
    └── the installation
        ├── InternalFault         500  a fault of the service
        ├── Busy                  503  too much waits to be written
        ├── OlderMethod           503  this process computes by an older method
        ├── NewerDatabase         503  the database was made by a newer release
        ├── HeldByAnother         503  another process holds the database file
        └── StorageFull           507  the disk is full

A class sets ``status``, ``type`` and ``title``; whatever turns an error into an answer reads
nothing else of it but ``detail``, ``errors`` and ``headers``. The four headings are no classes.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import ClassVar, Self

PROBLEM_PATH = "/docs/problems"


@dataclass(frozen=True, slots=True)
class FieldError:
    """One bad field: where it is, a code for programs, a sentence for people.

    ``pointer`` is an RFC 6901 pointer into the request body. What was sent outside of the body
    has ``parameter`` instead, the name of the query parameter, path part or header.
    """

    pointer: str
    code: str
    detail: str
    parameter: str = ""

    @property
    def place(self) -> str:
        """Name where the field is, for a sentence."""
        return self.parameter or self.pointer or "the body"


class RimewardError(Exception):
    """An error with an answer of its own; the root of the tree."""

    status: ClassVar[int] = 500
    type: ClassVar[str] = "internal-fault"
    title: ClassVar[str] = "The service has a fault"

    detail: str
    errors: tuple[FieldError, ...]
    headers: Mapping[str, str]

    def __init__(
        self,
        detail: str = "",
        *,
        errors: Iterable[FieldError] = (),
        headers: Mapping[str, str] | None = None,
    ) -> None:
        self.errors = tuple(errors)
        self.detail = detail or self._detail_of_errors() or f"{self.title}."
        self.headers = MappingProxyType(dict(headers or {}))
        super().__init__(self.detail)

    def _detail_of_errors(self) -> str:
        if not self.errors:
            return ""
        first = f"{self.errors[0].place}: {self.errors[0].detail}"
        return first if len(self.errors) == 1 else f"{first} And {len(self.errors) - 1} more."

    @classmethod
    def uri(cls) -> str:
        """Give the problem type as a reference that resolves to the shipped documentation."""
        return f"{PROBLEM_PATH}#{cls.type}"


# What was sent.


class NotJson(RimewardError):
    """The body is not one JSON text in UTF-8 that means the same to every reader."""

    status, type, title = 400, "not-json", "The body is not JSON that can be read one way only"

    @classmethod
    def at(cls, pointer: str, code: str, detail: str) -> Self:
        """Refuse one field of the body."""
        return cls(errors=(FieldError(pointer, code, detail),))


class HeaderRefused(RimewardError):
    """A request header cannot be read."""

    status, type, title = 400, "header-refused", "A request header cannot be read"

    @classmethod
    def named(cls, header: str, code: str, detail: str) -> Self:
        """Refuse one header by its name."""
        return cls(errors=(FieldError("", code, detail, parameter=header),))


class CursorRefused(RimewardError):
    """A page cursor that this list with this filter did not give."""

    status, type, title = 400, "cursor-refused", "The page cursor does not belong to this list"


class BodyTooLarge(RimewardError):
    """The body has more bytes than this path takes."""

    status, type, title = 413, "body-too-large", "The body is too large"

    @classmethod
    def above(cls, limit: int) -> Self:
        """Say the limit in bytes, and that the connection ends with this answer."""
        detail = f"This path takes at most {limit} bytes."
        return cls(detail, headers={"Connection": "close"})


class MediaTypeRefused(RimewardError):
    """The body is in a form that this path does not take."""

    status, type, title = 415, "media-type-refused", "The body is in a form this path does not take"


class FieldsRefused(RimewardError):
    """Fields of the body or parameters of the request have a value that cannot be."""

    status, type, title = 422, "fields-refused", "Some fields cannot be taken"

    @classmethod
    def at(cls, pointer: str, code: str, detail: str) -> Self:
        """Refuse one field of the body."""
        return cls(errors=(FieldError(pointer, code, detail),))

    @classmethod
    def parameter(cls, name: str, code: str, detail: str) -> Self:
        """Refuse one query parameter or part of the path by its name."""
        return cls(errors=(FieldError("", code, detail, parameter=name),))


class IdempotencyMismatch(RimewardError):
    """The Idempotency-Key was used before with another request."""

    status, type, title = 422, "idempotency-mismatch", "The key was used for another request"


# Who asks.


class KeyMissing(RimewardError):
    """The path needs a key, sent as `Authorization: Bearer` or `X-API-Key`."""

    status, type, title = 401, "key-missing", "A key is needed"

    def __init__(self, detail: str = "") -> None:
        super().__init__(
            detail or "Send a key as 'Authorization: Bearer …' or 'X-API-Key: …'.",
            headers={"WWW-Authenticate": "Bearer"},
        )


class KeyUnknown(RimewardError):
    """The key is unknown, revoked or expired; which of them is not said."""

    status, type, title = 401, "key-unknown", "The key is not valid"

    def __init__(self) -> None:
        # One answer for all three: a caller without a valid key learns nothing about keys.
        super().__init__(
            "The key is unknown, revoked or expired.",
            headers={"WWW-Authenticate": 'Bearer error="invalid_token"'},
        )


class NotAllowed(RimewardError):
    """The key is valid, and its role or its sites do not reach so far."""

    status, type, title = 403, "role-not-enough", "The role of this key does not allow that"


class TooManyRequests(RimewardError):
    """The rate that this key may ask at is used up."""

    status, type, title = 429, "too-many-requests", "Too many requests"

    def __init__(
        self, detail: str = "", *, retry_after_s: int = 1, headers: Mapping[str, str] | None = None
    ) -> None:
        super().__init__(
            detail or f"Ask again in {retry_after_s} s.",
            headers={**(headers or {}), "Retry-After": str(retry_after_s)},
        )


# What is there.


class RecordNotFound(RimewardError):
    """No record of that kind and id that this key may see."""

    status, type, title = 404, "record-not-found", "There is no such record"

    @classmethod
    def of(cls, kind: str) -> Self:
        """Say which kind of record is not there; the id that was asked for is not repeated."""
        return cls(f"There is no such {kind}, or this key does not reach it.")


class AsOfTooEarly(RimewardError):
    """The moment asked for lies before the first entry, or before what is still kept."""

    status, type, title = 404, "as-of-too-early", "Nothing is kept from that moment"


class NoSuchCase(RimewardError):
    """The room has no case like the one asked for; the detail says which it has."""

    status, type, title = 404, "no-such-case", "The room has no such case"

    @classmethod
    def parameter(cls, name: str, detail: str) -> Self:
        """Name the parameter that no case of the room has, and what there is."""
        return cls(errors=(FieldError("", "no-such-case", detail, parameter=name),))


class PathNotFound(RimewardError):
    """The service has no such path."""

    status, type, title = 404, "path-not-found", "There is no such path"


class MethodRefused(RimewardError):
    """The path is there and does not take this method; `Allow` names those it takes."""

    status, type, title = 405, "method-refused", "The path does not take this method"

    @classmethod
    def but(cls, allowed: Iterable[str]) -> Self:
        """Name the methods that the path does take."""
        allow = ", ".join(sorted(set(allowed)))
        return cls(f"This path takes {allow}." if allow else "", headers={"Allow": allow})


class NotAcceptable(RimewardError):
    """The answer has no form that the caller's `Accept` takes."""

    status, type, title = 406, "not-acceptable", "The answer has no form that you take"


class RevisionMoved(RimewardError):
    """The record is no longer at the revision that `If-Match` names."""

    status, type, title = 412, "revision-moved", "The record has changed since it was read"

    def __init__(self, present: int | str, detail: str = "") -> None:
        # The strong tag of the present revision lets a caller see at once that it must read again.
        super().__init__(
            detail or f"The record is at revision {present} now. Read it again before changing it.",
            headers={"ETag": f'"{present}"'},
        )


class PreconditionNeeded(RimewardError):
    """The site demands `If-Match` on every change and removal."""

    status, type, title = 428, "precondition-needed", "This site wants If-Match on every change"


class Conflict(RimewardError):
    """What is there stands against the change."""

    status, type, title = 409, "conflict", "What is there stands against it"


class DuplicateTag(Conflict):
    """Another record of this kind in this site has the tag, upper and lower case being one."""

    type, title = "tag-taken", "The tag is taken"

    def __init__(self, kind: str = "record") -> None:
        detail = f"Another {kind} of this site has this tag; upper and lower case are one."
        super().__init__(errors=(FieldError("/tag", "tag-taken", detail),))


class DuplicateExternalId(Conflict):
    """Another record of this kind in this site has the external id."""

    type, title = "external-id-taken", "The external id is taken"

    def __init__(self, kind: str = "record") -> None:
        detail = f"Another {kind} of this site has this external id."
        super().__init__(errors=(FieldError("/external_id", "external-id-taken", detail),))


class CannotCompute(Conflict):
    """The records of the room do not allow its numbers to be computed; the detail says why."""

    type, title = "cannot-compute", "The room cannot be computed"


class StillReferred(Conflict):
    """Other records still refer to the one that was to be removed."""

    type, title = "still-referred", "Other records still refer to it"

    #: Named one by one up to this many, so that an answer stays small.
    NAMED: ClassVar[int] = 20

    @classmethod
    def by(cls, referring: Iterable[str]) -> Self:
        """Name what refers to it, such as ``vessel D-12``."""
        names = list(referring)
        named = ", ".join(names[: cls.NAMED])
        more = f" and {len(names) - cls.NAMED} more" if len(names) > cls.NAMED else ""
        return cls(
            f"Still referred to by {named}{more}.",
            errors=(FieldError("", "referred-by", f"{name}.") for name in names[: cls.NAMED]),
        )


class ReadOnlyRecord(Conflict):
    """A basis or fluid that comes with the service; copy it and change the copy."""

    type, title = "read-only-record", "This record comes with the service and cannot be changed"


class IdempotencyRunning(Conflict):
    """The first request with this Idempotency-Key has not ended yet."""

    type, title = "idempotency-running", "The first request with this key still runs"

    def __init__(self, detail: str = "", *, retry_after_s: int = 1) -> None:
        super().__init__(detail, headers={"Retry-After": str(retry_after_s)})


class SecretShownOnce(Conflict):
    """The request was done; its answer held a secret, which is not kept and not shown again."""

    type, title = "secret-shown-once", "The secret was shown once and is not kept"


# The installation.


class InternalFault(RimewardError):
    """A fault of the service; the log has the details under the request id."""

    status, type, title = 500, "internal-fault", "The service has a fault"

    def __init__(self) -> None:
        super().__init__("The fault is in the log under the request id given as 'instance'.")


class Busy(RimewardError):
    """More waits to be done than the service takes on."""

    status, type, title = 503, "busy", "The service is busy"

    def __init__(self, detail: str = "", *, retry_after_s: int = 1) -> None:
        super().__init__(detail, headers={"Retry-After": str(retry_after_s)})


class OlderMethod(RimewardError):
    """The database is computed by a newer method than this process has; it only reads."""

    status, type, title = 503, "older-method", "This process computes by an older method"


class NewerDatabase(RimewardError):
    """The database was made by a newer release than this one."""

    status, type, title = 503, "newer-database", "The database is of a newer release"


class HeldByAnother(RimewardError):
    """Another process has the database file; two writers could damage it."""

    status, type, title = 503, "held-by-another", "Another process holds the database"


class StorageFull(RimewardError):
    """The disk is full; nothing can be written, what is there can be read."""

    status, type, title = 507, "storage-full", "The disk is full"


def every_problem() -> tuple[type[RimewardError], ...]:
    """List every class of the tree that can be answered, by slug."""
    found: dict[str, type[RimewardError]] = {}
    waiting: list[type[RimewardError]] = [RimewardError]
    while waiting:
        for below in waiting.pop().__subclasses__():
            found[below.type] = below
            waiting.append(below)
    return tuple(found[slug] for slug in sorted(found))
