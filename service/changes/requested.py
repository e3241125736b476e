"""A requested record change, and the place it takes: which record, of which site."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import Any, Final

from service.changes.kinds import KINDS
from service.errors import FieldsRefused, NotAllowed, RecordNotFound, RimewardError
from service.store.ids import new_record_id
from service.store.live import get_record, record_by_tag
from service.store.records import Record, folded_tag
from service.store.session import INSTALLATION, WriteSession

CREATE: Final = "create"
CHANGE: Final = "change"
REMOVE: Final = "remove"


@dataclass(frozen=True, slots=True)
class RecordChange:
    """One change to one record, as it was sent."""

    operation: str  # create, change, remove
    kind: str
    record_id: str | None
    fields: Mapping[str, Any]
    if_revision: int | None = None


@dataclass(frozen=True, slots=True)
class Placed:
    """A requested change with its record's id and site; ``before`` is null for a new record."""

    change: RecordChange
    record_id: str
    site_id: str | None
    before: Record | None
    pointer: str = ""  # prefix of the pointers in errors

    @property
    def head_id(self) -> str:
        """Name the head that this change moves."""
        return INSTALLATION if self.site_id is None else self.site_id


@contextmanager
def pointing(prefix: str) -> Iterator[None]:
    """Put a prefix before the pointers of an error raised inside."""
    try:
        yield
    except RimewardError as error:
        error.errors = tuple(
            bad if bad.parameter else replace(bad, pointer=prefix + bad.pointer)
            for bad in error.errors
        )
        raise


def placed(session: WriteSession, changes: Sequence[RecordChange]) -> tuple[Placed, ...]:
    """Find the record and the site of each change; new records get their ids here."""
    places: list[Placed] = []
    new: dict[tuple[str, str | None, str], str] = {}
    for number, change in enumerate(changes):
        prefix = f"/changes/{number}" if len(changes) > 1 else ""
        with pointing(f"{prefix}/fields" if prefix else ""):
            if change.operation == CREATE:
                place = _place_of_new(session, change, new)
                tag = change.fields.get("tag")
                if isinstance(tag, str):
                    owner = None if change.kind == "site" else place.site_id
                    new[change.kind, owner, folded_tag(tag)] = place.record_id
            else:
                place = _place_of_present(session, change)
            places.append(replace(place, pointer=f"{prefix}/fields" if prefix else ""))
    _refuse_twice(places)
    return tuple(places)


def _refuse_twice(places: Sequence[Placed]) -> None:
    seen: set[str] = set()
    for number, place in enumerate(places):
        if place.record_id in seen:
            raise FieldsRefused.at(
                f"/changes/{number}/id", "named-twice", "Each record may be changed once at a time."
            )
        seen.add(place.record_id)


def _place_of_present(session: WriteSession, change: RecordChange) -> Placed:
    if change.record_id is None:
        raise FieldsRefused.at("/id", "missing", "Say which record.")
    record = get_record(session.scope, session.connection, change.kind, change.record_id)
    if record is None:
        raise RecordNotFound.of(change.kind)
    return Placed(change, record.id, record.site_id, record)


def _place_of_new(
    session: WriteSession, change: RecordChange, new: Mapping[tuple[str, str | None, str], str]
) -> Placed:
    record_id = new_record_id(session.moment)
    if change.kind == "site":
        if session.scope.sites is not None:
            raise NotAllowed("A key that is limited to sites makes no new site.")
        return Placed(change, record_id, record_id, None)
    return Placed(change, record_id, _site_of_new(session, change, new), None)


def _site_of_new(
    session: WriteSession, change: RecordChange, new: Mapping[tuple[str, str | None, str], str]
) -> str:
    fields = change.fields
    if fields.get("site_id") is not None:
        return _known_site(session, fields["site_id"], new)
    if fields.get("site") is not None:
        made = new.get(("site", None, folded_tag(fields["site"])))
        if made is not None:
            return made
        site = record_by_tag(session.scope, session.connection, "site", None, fields["site"])
        if site is None:
            raise FieldsRefused.at("/site", "not-found", "There is no site with this tag.")
        return site.id
    for name, kind, record_id in naming_its_site(change.kind, fields):
        record = get_record(session.scope, session.connection, kind, record_id)
        if record is None or record.site_id is None:
            raise FieldsRefused.at(f"/{name}", "not-found", f"There is no such {kind}.")
        return record.site_id
    if session.scope.sites is not None and len(session.scope.sites) == 1:
        return next(iter(session.scope.sites))
    raise FieldsRefused.at(
        "/site", "missing", "Say the site, as 'site' (its tag) or 'site_id', or a room by its id."
    )


def _known_site(
    session: WriteSession, site_id: str, new: Mapping[tuple[str, str | None, str], str]
) -> str:
    made = site_id in {made for (kind, _, _), made in new.items() if kind == "site"}
    if not made and get_record(session.scope, session.connection, "site", site_id) is None:
        raise FieldsRefused.at("/site_id", "not-found", "There is no such site.")
    return site_id


def naming_its_site(kind: str, fields: Mapping[str, Any]) -> Iterator[tuple[str, str, str]]:
    """Name the records that tell the site of a new one: the field, the kind, the id."""
    for name in KINDS[kind].site_from:
        said = fields.get(name)
        if name in ("serves", "rooms"):
            for number, served in enumerate(said or ()):
                if served.get("room_id") is not None:
                    yield f"{name}/{number}/room_id", "room", str(served["room_id"])
        elif said is not None:
            yield name, "vessel" if name.endswith("vessel_id") else "room", str(said)
