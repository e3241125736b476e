"""Record changes applied to values, with every rule that spans fields or records: pure."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Any

from service.changes.kinds import KINDS, Link, blank_fields, reaches_far, refers_to, rooms_reached
from service.changes.merge import merge_patch
from service.changes.neighbourhood import OXYGEN, Neighbourhood, TagKey
from service.changes.record_rules import derived_fields, record_problems
from service.changes.requested import CREATE, REMOVE, Placed, pointing
from service.clock import moment_of, text_of
from service.errors import (
    DuplicateExternalId,
    DuplicateTag,
    FieldError,
    FieldsRefused,
    ReadOnlyRecord,
    RecordNotFound,
    RevisionMoved,
    StillReferred,
)
from service.store.records import Record, folded_tag
from service.store.rows import instant_names, number_names
from service.store.tables.supply_lines import TRIGGERS
from service.store.tables.ventilation_units import MANUAL


@dataclass(frozen=True, slots=True)
class Pair:
    """A record before and after; before null: new, after null: removed, both alike: no change."""

    before: Record | None
    after: Record | None

    @property
    def changed(self) -> bool:
        """Tell whether anything is to be stored."""
        return self.before is not self.after

    @property
    def record(self) -> Record:
        """Give the newest form there is."""
        record = self.after or self.before
        if record is None:
            raise ValueError("A pair without a record.")
        return record


@dataclass(frozen=True, slots=True)
class Applied:
    """The records after the changes, the pairs in the order asked, and the rooms to compute."""

    pairs: tuple[Pair, ...]
    records: Mapping[str, Record]
    rooms: frozenset[str]


def applied(before: Neighbourhood, places: Sequence[Placed]) -> Applied:
    """Apply changes to a neighbourhood; refuse the whole where one cannot be."""
    records = dict(before.records)
    names = _Names(before, places)
    pairs: list[Pair] = []
    for place in places:
        with pointing(place.pointer):
            pair = _applied_one(before, records, names, place)
        pairs.append(pair)
        if pair.after is None:
            records.pop(place.record_id, None)
        else:
            records[place.record_id] = pair.after
    for place, pair in zip(places, pairs, strict=True):
        with pointing(place.pointer):
            _check_whole(records, pair, before.moment)
    return Applied(tuple(pairs), records, _rooms_to_compute(before, records, places, pairs))


class _Names:
    """Tags and external ids as they stand once all changes are made."""

    def __init__(self, before: Neighbourhood, places: Sequence[Placed]) -> None:
        self._by_tag = dict(before.by_tag)
        self._tags = dict(before.tags_taken)
        self._external_ids = dict(before.external_ids_taken)
        gone = {place.record_id for place in places if place.change.operation == REMOVE}
        for taken in (self._by_tag, self._tags, self._external_ids):
            for key in [key for key, holder in taken.items() if holder in gone]:
                del taken[key]
        for place in places:
            tag = place.change.fields.get("tag")
            if place.change.operation == CREATE and isinstance(tag, str):
                self._by_tag.setdefault(_tag_key(place, tag), place.record_id)

    def find(self, kind: str, site_id: str | None, tag: str) -> str | None:
        """Name the record that a tag stands for."""
        return self._by_tag.get((kind, site_id, folded_tag(tag)))

    def take(self, place: Placed, record: Record) -> None:
        """Give a record its tag and external id, or refuse what another has."""
        tag, external_id = record.fields["tag"], record.fields["external_id"]
        if self._tags.setdefault(_tag_key(place, tag), record.id) != record.id:
            raise DuplicateTag(record.kind)
        if external_id is None:
            return
        key = (record.kind, _owner(place), external_id)
        if self._external_ids.setdefault(key, record.id) != record.id:
            raise DuplicateExternalId(record.kind)


def _owner(place: Placed) -> str | None:
    return None if place.change.kind == "site" else place.site_id


def _tag_key(place: Placed, tag: str) -> TagKey:
    return place.change.kind, _owner(place), folded_tag(tag)


def _applied_one(
    before: Neighbourhood, records: Mapping[str, Record], names: _Names, place: Placed
) -> Pair:
    change = place.change
    present = records.get(place.record_id)
    if present is None and change.operation != CREATE:
        # It went between the moment it was found and the moment the heads were locked.
        raise RecordNotFound.of(change.kind)
    if present is not None:
        if present.site_id is None:
            raise ReadOnlyRecord("It comes with the service. Make a copy for a site and change it.")
        if change.if_revision is not None and change.if_revision != present.revision:
            raise RevisionMoved(present.revision)
    if change.operation == REMOVE:
        return Pair(present, None)
    fields = _fields_after(records, names, place, present)
    if present is not None:
        _refuse_fixed(present, fields)
        if fields == dict(present.fields):
            return Pair(present, present)
    after = (
        Record(
            kind=change.kind,
            id=place.record_id,
            site_id=place.site_id,
            revision=1,
            created_at=before.moment,
            updated_at=before.moment,
            fields=fields,
        )
        if present is None
        else replace(
            present, revision=present.revision + 1, updated_at=before.moment, fields=fields
        )
    )
    names.take(place, after)
    return Pair(present, after)


def _fields_after(
    records: Mapping[str, Record], names: _Names, place: Placed, present: Record | None
) -> dict[str, Any]:
    """Merge what was sent into what is there, with references resolved to ids."""
    kind, sent = place.change.kind, dict(place.change.fields)
    for name in ("site", "site_id"):
        _check_site(records, names, place, name, sent.pop(name, None))
    base = blank_fields(kind) if present is None else dict(present.fields)
    for link in KINDS[kind].links:
        _resolve(records, names, place, link, sent, base)
    for name in ("serves", "rooms"):
        if sent.get(name) is not None:
            sent[name] = list(_named_rooms(records, names, place, name, sent[name]))
    if kind == "detector" and sent.get("gas") not in (None, OXYGEN):
        sent["gas"] = _gas_tag(records, names, place, sent["gas"])
    if kind == "ventilation-unit" and sent.get("boost_trigger") not in (None, MANUAL):
        sent["boost_trigger"] = _detector_id(
            records, names, place, sent["boost_trigger"], "/boost_trigger"
        )
    if kind == "supply-line" and (sent.get("shutoff") or {}).get("trigger") is not None:
        sent["shutoff"] = dict(sent["shutoff"])
        if sent["shutoff"]["trigger"] not in TRIGGERS:
            sent["shutoff"]["trigger"] = _detector_id(
                records, names, place, sent["shutoff"]["trigger"], "/shutoff/trigger"
            )
    if kind == "vessel" and sent.get("filling") is not None:
        sent["filling"] = _filling(records, names, place, sent["filling"])
    unknown = sorted(sent.keys() - base.keys())
    if unknown:
        raise FieldsRefused(
            errors=[FieldError(f"/{name}", "unknown-field", "No such field.") for name in unknown]
        )
    merged = merge_patch(base, sent)
    # RFC 7396 removes a member that is null; a record keeps the field and says that it is unknown.
    fields = {name: merged.get(name) for name in base}
    if fields["labels"] is None:
        fields["labels"] = {}
    return written_one_way(kind, derived_fields(kind, fields, sent))


def written_one_way(kind: str, fields: dict[str, Any]) -> dict[str, Any]:
    """Write moments and numbers as they will be read back, so that they hash alike."""
    for name in instant_names(kind):
        fields[name] = None if fields[name] is None else text_of(moment_of(fields[name]))
    for name in number_names(kind):
        # Adding zero takes the sign of a negative zero, which not every database keeps.
        fields[name] = None if fields[name] is None else float(fields[name]) + 0.0
    return fields


def _check_site(
    records: Mapping[str, Record], names: _Names, place: Placed, name: str, said: str | None
) -> None:
    if said is None or place.change.kind == "site":
        return
    meant = names.find("site", None, said) if name == "site" else said
    site = records.get(place.site_id or "")
    if name == "site" and meant is None and site is not None:
        meant = site.id if folded_tag(site.fields["tag"]) == folded_tag(said) else None
    if meant != place.site_id:
        raise FieldsRefused.at(f"/{name}", "site-fixed", "A record never changes its site.")


def _resolve(
    records: Mapping[str, Record],
    names: _Names,
    place: Placed,
    link: Link,
    sent: dict[str, Any],
    base: dict[str, Any],
) -> None:
    """Replace a reference as sent, by id or tag, with the id (and the tag where it is kept)."""
    by_id, by_tag = sent.get(link.field), sent.get(link.said_as)
    if by_id is not None and by_tag is not None:
        raise FieldsRefused.at(
            f"/{link.field}", "said-twice", f"Send '{link.field}' or '{link.said_as}', not both."
        )
    said = link.field in sent or link.said_as in sent
    if not said and base.get(link.said_as) is not None and base[link.field] is None:
        by_tag, said = base[link.said_as], True  # the default of a new record
    if not said:
        return
    sent.pop(link.said_as, None)
    if by_id is None and by_tag is None:
        found = None
    elif by_tag is not None:
        target = names.find(link.kind, place.site_id, by_tag) or (
            by_tag if link.keeps_tag and by_tag in records else None
        )
        found = _target(records, place, link.kind, target, f"/{link.said_as}")
    else:
        found = _target(records, place, link.kind, by_id, f"/{link.field}")
    sent[link.field] = None if found is None else found[0]
    if link.keeps_tag:
        sent[link.said_as] = None if found is None else found[1]


def _target(
    records: Mapping[str, Record], place: Placed, kind: str, record_id: str | None, pointer: str
) -> tuple[str, str | None]:
    """Give id and tag of what is referred to; of this site, or shared."""
    target = None if record_id is None else records.get(record_id)
    if record_id is not None and target is None and record_id == place.record_id:
        return record_id, None
    if target is None or target.kind != kind or target.site_id not in (place.site_id, None):
        raise FieldsRefused.at(pointer, "not-found", f"There is no such {kind} in this site.")
    return target.id, target.fields["tag"]


def _filling(
    records: Mapping[str, Record], names: _Names, place: Placed, sent: Mapping[str, Any]
) -> dict[str, Any]:
    """Replace the line that fills a vessel, by id or tag, with the id."""
    filling = dict(sent)
    said_by_tag = "supply_line" in filling
    by_tag, by_id = filling.pop("supply_line", None), filling.get("supply_line_id")
    pointer = "/filling/supply_line_id" if by_tag is None else "/filling/supply_line"
    if by_tag is not None and by_id is not None:
        raise FieldsRefused.at(
            pointer, "said-twice", "Send 'supply_line_id' or 'supply_line', not both."
        )
    if by_tag is not None:
        by_id = names.find("supply-line", place.site_id, by_tag) or ""
    if by_id is not None:
        filling["supply_line_id"] = _target(records, place, "supply-line", by_id, pointer)[0]
    elif said_by_tag:
        filling["supply_line_id"] = None
    return filling


def _named_rooms(
    records: Mapping[str, Record],
    names: _Names,
    place: Placed,
    field: str,
    serves: Sequence[Mapping[str, Any]],
) -> Iterator[dict[str, Any]]:
    for number, served in enumerate(serves):
        pointer = f"/{field}/{number}"
        by_id, by_tag = served.get("room_id"), served.get("room")
        if (by_id is None) == (by_tag is None):
            raise FieldsRefused.at(pointer, "missing", "Send 'room_id' or 'room', one of them.")
        room_id = by_id if by_tag is None else names.find("room", place.site_id, by_tag)
        pointer += "/room_id" if by_tag is None else "/room"
        found = _target(records, place, "room", room_id, pointer)
        rest = {name: value for name, value in served.items() if name not in ("room_id", "room")}
        yield {"room_id": found[0], **rest}


def _gas_tag(records: Mapping[str, Record], names: _Names, place: Placed, gas: str) -> str:
    fluid_id = names.find("fluid", place.site_id, gas)
    if fluid_id is None:
        raise FieldsRefused.at(
            "/gas", "not-found", "Say 'oxygen' or the tag of a fluid that this site knows."
        )
    return str(records[fluid_id].fields["tag"])


def _detector_id(
    records: Mapping[str, Record], names: _Names, place: Placed, said: str, pointer: str
) -> str:
    detector_id = names.find("detector", place.site_id, said) or said
    return _target(records, place, "detector", detector_id, pointer)[0]


def _refuse_fixed(present: Record, fields: Mapping[str, Any]) -> None:
    moved = sorted(
        name for name in KINDS[present.kind].fixed if fields[name] != present.fields[name]
    )
    if moved:
        raise FieldsRefused(
            errors=[
                FieldError(f"/{name}", "never-changes", "This field never changes; make a new one.")
                for name in moved
            ]
        )


def _check_whole(records: Mapping[str, Record], pair: Pair, moment: datetime) -> None:
    """Check a record against the others and the moment, all changes made."""
    if pair.after is None:
        return
    if not pair.changed:
        return
    problems = tuple(record_problems(pair.after, records, moment))
    if problems:
        raise FieldsRefused(errors=problems)


def _rooms_to_compute(
    before: Neighbourhood,
    records: Mapping[str, Record],
    places: Sequence[Placed],
    pairs: Sequence[Pair],
) -> frozenset[str]:
    rooms: set[str] = set()
    for place, pair in zip(places, pairs, strict=True):
        if not pair.changed:
            continue
        rooms |= rooms_reached(pair.before, before.records) | rooms_reached(pair.after, records)
        if reaches_far(pair.before, pair.after):
            rooms |= before.far_rooms.get(place.record_id, frozenset())
        if pair.after is None:
            _refuse_referred(before, places, pairs, place)
    return frozenset(rooms)


def _refuse_referred(
    before: Neighbourhood, places: Sequence[Placed], pairs: Sequence[Pair], place: Placed
) -> None:
    moved = {
        pair.record.id
        for pair in pairs
        if pair.after is None or not _refers(pair.after, place.record_id)
    }
    left = [
        f"{kind} {tag}"
        for kind, record_id, tag in before.referrers.get(place.record_id, ())
        if record_id not in moved
    ]
    newly = [
        f"{pair.after.kind} {pair.after.fields['tag']}"
        for pair in pairs
        if pair.after is not None and pair.changed and _refers(pair.after, place.record_id)
    ]
    if left or newly:
        with pointing(place.pointer):
            raise StillReferred.by(left + newly)


def _refers(record: Record, record_id: str) -> bool:
    if record.site_id == record_id and record.kind != "site":
        return True
    return refers_to(record, record_id)
