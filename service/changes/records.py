"""What it means to create, change and remove records: load, apply, assess, replace."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any, Final

from service.changes.apply import Applied, Pair, applied
from service.changes.assess import assess, findings_of_gone
from service.changes.neighbourhood import neighbourhood
from service.changes.replace import Effect, Outcome, next_positions, replace
from service.changes.requested import (
    CHANGE,
    CREATE,
    REMOVE,
    Placed,
    RecordChange,
    naming_its_site,
    placed,
)
from service.errors import FieldsRefused
from service.store.ids import new_record_id
from service.store.live import get_record, record_by_external_id, record_by_tag
from service.store.records import Record
from service.store.rows import triggering_detector
from service.store.session import WriteSession

_BUND: Final = "bund"


@dataclass(frozen=True, slots=True)
class Written:
    """What one record change left, and what it did to each room it touches."""

    record: Record
    created: bool
    changed: bool  # false: what was sent is what was there, and nothing was stored
    removed: bool
    site_id: str | None
    position: int
    effects: tuple[Effect, ...] = ()
    recalculating: bool = False  # rooms are left to the sweep


@dataclass(frozen=True, slots=True)
class WrittenTogether:
    """What several record changes left in one transaction."""

    items: tuple[Written, ...]
    positions: Mapping[str, int]
    effects: tuple[Effect, ...]
    recalculating: bool


def create_record(session: WriteSession, kind: str, fields: Mapping[str, Any]) -> Written:
    """Create a record and calculate every room it touches, in one transaction."""
    return _one(session, RecordChange(CREATE, kind, None, fields))


def change_record(
    session: WriteSession,
    kind: str,
    record_id: str,
    changes: Mapping[str, Any],
    *,
    if_revision: int | None = None,
) -> Written:
    """Change a record and recalculate every room it touches, in one transaction."""
    return _one(session, RecordChange(CHANGE, kind, record_id, changes, if_revision))


def remove_record(
    session: WriteSession, kind: str, record_id: str, *, if_revision: int | None = None
) -> Written:
    """Remove a record that nothing refers to, and recalculate every room it touched."""
    return _one(session, RecordChange(REMOVE, kind, record_id, {}, if_revision))


def put_record(
    session: WriteSession,
    kind: str,
    external_id: str,
    fields: Mapping[str, Any],
    *,
    if_revision: int | None = None,
) -> Written:
    """Create the record with an external id, or change it to have the fields sent."""
    site_id = _site_named(session, kind, fields)
    present = record_by_external_id(session.scope, session.connection, kind, site_id, external_id)
    sent = {**fields, "external_id": external_id}
    if present is None:
        return _one(session, RecordChange(CREATE, kind, None, sent))
    return _one(session, RecordChange(CHANGE, kind, present.id, sent, if_revision))


def change_several(session: WriteSession, changes: Sequence[RecordChange]) -> WrittenTogether:
    """Carry out several record changes as one: all or none, one entry in each site touched."""
    operation = "changes" if len(changes) != 1 else f"{changes[0].kind}-{changes[0].operation}"
    return carry_out(session, changes, operation)


def carry_out(
    session: WriteSession, changes: Sequence[RecordChange], operation: str
) -> WrittenTogether:
    """Take record changes down the whole line, in the order in which the design draws it."""
    places = placed(session, changes)
    heads = session.lock_heads({place.head_id for place in places})
    before = neighbourhood(session, places)
    after = applied(before, places)
    left_to_sweep = before.left_to_sweep
    assessed = assess(
        after.records,
        frozenset() if left_to_sweep else after.rooms,
        before.findings,
        at=session.moment,
        positions=next_positions(heads),
        new_id=partial(new_record_id, session.moment),
        around=before.around,
        last_read=before.joined if _passes_on(after) else {},
    )
    cleared = findings_of_gone(after, before, at=session.moment, positions=next_positions(heads))
    outcome = Outcome(operation, after.pairs, assessed, before.prior, left_to_sweep, cleared)
    effects = replace(session, heads, outcome)
    moved = {place.head_id for place, pair in zip(places, after.pairs, strict=True) if pair.changed}
    positions = {
        site_id: head.position + (1 if site_id in moved else 0) for site_id, head in heads.items()
    }
    recalculating = bool(left_to_sweep) and bool(moved)
    items = tuple(
        _written(place, pair, positions, effects, recalculating=recalculating)
        for place, pair in zip(places, after.pairs, strict=True)
    )
    return WrittenTogether(items, positions, effects, recalculating)


def _passes_on(after: Applied) -> bool:
    """Tell whether a change can be felt in other rooms than those it is made in."""
    return any(pair.changed and not _is_felt_here_alone(pair, after) for pair in after.pairs)


def _is_felt_here_alone(pair: Pair, after: Applied) -> bool:
    """Tell of a detector that shuts no line, and of a measure that slows no gas."""
    record = pair.record
    if record.kind == "control":
        forms = [form for form in (pair.before, pair.after) if form is not None]
        return all(form.fields["kind"] != _BUND for form in forms)
    if record.kind == "detector":
        lines = [each for each in after.records.values() if each.kind == "supply-line"]
        return all(triggering_detector(line) != record.id for line in lines)
    return False


def _one(session: WriteSession, change: RecordChange) -> Written:
    return carry_out(session, [change], f"{change.kind}-{change.operation}").items[0]


def _written(
    place: Placed,
    pair: Pair,
    positions: Mapping[str, int],
    effects: tuple[Effect, ...],
    *,
    recalculating: bool,
) -> Written:
    return Written(
        record=pair.record,
        created=pair.before is None,
        changed=pair.changed,
        removed=pair.after is None,
        site_id=place.site_id,
        position=positions[place.head_id],
        effects=effects,
        recalculating=recalculating,
    )


def _site_named(session: WriteSession, kind: str, fields: Mapping[str, Any]) -> str | None:
    """Name the site in which an external id is to be looked up; sites have theirs in none."""
    if kind == "site":
        return None
    if fields.get("site_id") is not None:
        return str(fields["site_id"])
    if fields.get("site") is not None:
        site = record_by_tag(session.scope, session.connection, "site", None, fields["site"])
        if site is None:
            raise FieldsRefused.at("/site", "not-found", "There is no site with this tag.")
        return site.id
    for _name, named, record_id in naming_its_site(kind, fields):
        record = get_record(session.scope, session.connection, named, record_id)
        if record is not None:
            return record.site_id
    if session.scope.sites is not None and len(session.scope.sites) == 1:
        return next(iter(session.scope.sites))
    raise FieldsRefused.at(
        "/site", "missing", "Say the site, as 'site' (its tag) or 'site_id', or a room by its id."
    )
