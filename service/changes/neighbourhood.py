"""Everything a change may read, loaded once as values: the change itself then needs no database."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any, Final

import orjson

from service.audit.findings import Finding
from service.changes.kinds import KINDS, blank_fields, rooms_reached
from service.changes.requested import CHANGE, CREATE, REMOVE, Placed
from service.store.findings import findings_of_rooms
from service.store.history import assessments_now
from service.store.joined import rooms_joined_to
from service.store.live import (
    controls_of_vessels,
    equipment_of,
    get_records,
    lines_around,
    record_by_external_id,
    record_by_tag,
    referrers_of,
    rooms_of_site,
    rooms_with_fluid,
    sites_with_basis,
    units_boosted_by,
    vessels_filled_by,
)
from service.store.records import Record, folded_tag
from service.store.rows import filling_line, triggering_detector
from service.store.scope import EVERYTHING
from service.store.session import WriteSession
from service.store.states import room_states
from service.store.tables.supply_lines import TRIGGERS
from service.store.tables.ventilation_units import MANUAL

OXYGEN: Final = "oxygen"

TagKey = tuple[str, str | None, str]
ReadRecord = tuple[str, int]  # id and revision
_STEPS: Final = "neighbour_steps"


@dataclass(frozen=True, slots=True)
class Prior:
    """What was last said of a room."""

    position: int
    standing: str
    worst_oxygen_pct: float | None


@dataclass(frozen=True, slots=True)
class Neighbourhood:
    """The records around a change, and what was said of the rooms it reaches."""

    moment: datetime
    records: Mapping[str, Record]
    by_tag: Mapping[TagKey, str]
    tags_taken: Mapping[TagKey, str]
    external_ids_taken: Mapping[TagKey, str]
    referrers: Mapping[str, tuple[tuple[str, str, str], ...]]
    #: Rooms of sites, bases and fluids that a change reaches as a whole, by that record's id.
    far_rooms: Mapping[str, frozenset[str]] = field(default_factory=dict)
    #: Sites whose rooms are too many to be computed with the change.
    left_to_sweep: frozenset[str] = frozenset()
    #: Rooms that gas may come from, or go on to: what is assessed cannot do without them.
    around: frozenset[str] = frozenset()
    #: Of these the ones that a change may reach, each with the records it was last assessed from.
    joined: Mapping[str, frozenset[ReadRecord]] = field(default_factory=dict)
    prior: Mapping[str, Prior] = field(default_factory=dict)
    findings: Mapping[str, tuple[Finding, ...]] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class _Mention:
    """A record that a change names: by id, by tag, or by either."""

    kind: str
    site_id: str | None
    record_id: str | None = None
    tag: str | None = None


def neighbourhood(session: WriteSession, places: Sequence[Placed]) -> Neighbourhood:
    """Load what the changes name, reach and stand beside."""
    loader = _Loader(session)
    for place in places:
        loader.take_mentions(place)
    loader.take_present(places)
    reached, far, sweep = loader.rooms_of(places)
    loader.take_rooms(reached)
    steps = loader.most_steps()
    joined = loader.joined_to(reached, 2 * steps)
    around = joined | loader.joined_to(reached | joined, 2 * steps)
    if len(reached | joined) > session.rooms_per_change:
        sweep |= frozenset(place.site_id for place in places if place.site_id is not None)
        reached = joined = around = frozenset()
    loader.take_rooms(around)
    return Neighbourhood(
        moment=session.moment,
        records=loader.records,
        by_tag=loader.by_tag,
        tags_taken=loader.tags_taken,
        external_ids_taken=loader.external_ids_taken,
        referrers=loader.referrers,
        far_rooms=far,
        left_to_sweep=sweep,
        around=around,
        joined=loader.last_read(joined),
        prior=loader.prior_of(reached | joined),
        # Of rooms that go as well, even where the rest is left to the sweep: it would miss them.
        findings=loader.findings_of(reached | joined | _removed_rooms(places)),
    )


def _removed_rooms(places: Sequence[Placed]) -> frozenset[str]:
    return frozenset(
        place.record_id
        for place in places
        if place.change.kind == "room" and place.change.operation == REMOVE
    )


def rooms_alone(session: WriteSession, room_ids: Iterable[str]) -> Neighbourhood:
    """Load rooms with what stands in them, for a calculation without a change."""
    loader = _Loader(session)
    wanted = frozenset(room_ids)
    loader.take_rooms(wanted)
    around = loader.joined_to(wanted, 2 * loader.most_steps())
    loader.take_rooms(around)
    return Neighbourhood(
        moment=session.moment,
        records=loader.records,
        by_tag={},
        tags_taken={},
        external_ids_taken={},
        referrers={},
        around=around,
        prior=loader.prior_of(wanted),
        findings=loader.findings_of(wanted),
    )


class _Loader:
    """Collects records while a neighbourhood is read; gone once it stands."""

    def __init__(self, session: WriteSession) -> None:
        self._session = session
        self.records: dict[str, Record] = {}
        self.by_tag: dict[TagKey, str] = {}
        self.tags_taken: dict[TagKey, str] = {}
        self.external_ids_taken: dict[TagKey, str] = {}
        self.referrers: dict[str, tuple[tuple[str, str, str], ...]] = {}

    def take_mentions(self, place: Placed) -> None:
        """Load the records that a change names, and those that hold what it wants to be called."""
        change = place.change
        if change.operation == REMOVE:
            self.referrers[place.record_id] = tuple(
                referrers_of(EVERYTHING, self._session.connection, change.kind, place.record_id)
            )
            return
        fields = change.fields
        if change.operation == CREATE:
            fields = blank_fields(change.kind) | dict(fields)
        by_id: dict[str, set[str]] = {}
        for mention in _mentions(change.kind, place.site_id, fields):
            if mention.record_id is not None and mention.record_id not in self.records:
                by_id.setdefault(mention.kind, set()).add(mention.record_id)
            if mention.tag is not None:
                self._take_tag(mention.kind, mention.site_id, mention.tag)
        for kind, ids in by_id.items():
            self._take(kind, ids)
        self._take_names(place)

    def _take_tag(self, kind: str, site_id: str | None, tag: str) -> None:
        key = (kind, site_id, folded_tag(tag))
        if key in self.by_tag:
            return
        scope = self._session.scope
        found = record_by_tag(scope, self._session.connection, kind, site_id, tag)
        if found is not None:
            self.by_tag[key] = found.id
            self.records[found.id] = found

    def _take_names(self, place: Placed) -> None:
        # Who holds a tag is asked without the key's limits: the answer names nobody.
        change, connection = place.change, self._session.connection
        owner = None if change.kind == "site" else place.site_id
        tag, external_id = change.fields.get("tag"), change.fields.get("external_id")
        if tag is not None:
            holder = record_by_tag(EVERYTHING, connection, change.kind, owner, tag)
            if holder is not None:
                self.tags_taken[change.kind, owner, folded_tag(tag)] = holder.id
        if external_id is not None:
            holder = record_by_external_id(EVERYTHING, connection, change.kind, owner, external_id)
            if holder is not None:
                self.external_ids_taken[change.kind, owner, external_id] = holder.id

    def take_present(self, places: Sequence[Placed]) -> None:
        """Load the records that are changed anew: the heads are locked now, and they hold still."""
        by_kind: dict[str, set[str]] = {}
        for place in places:
            if place.before is not None:
                by_kind.setdefault(place.change.kind, set()).add(place.record_id)
        for kind, ids in by_kind.items():
            self._take(kind, ids)
        self._take_beside(by_kind)
        self._take("site", {place.site_id for place in places if place.site_id is not None})
        self._take(
            "basis",
            {
                basis_id
                for record in self.records.values()
                if record.kind == "basis" and (basis_id := record.fields["derived_from_id"])
            },
        )

    def _take_beside(self, changed: Mapping[str, set[str]]) -> None:
        """Load what rules hold a changed record against, and what goes with it.

        It stands in the rooms as well; these are not loaded where they are too many.
        """
        connection = self._session.connection
        for detector in self._of("detector", changed):
            self._take("room", {detector.fields["room_id"]})
        for unit in self._of("ventilation-unit", changed):
            detector_id = triggering_detector(unit)
            self._take("detector", () if detector_id is None else {detector_id})
        lines = lines_around(
            EVERYTHING,
            connection,
            vessel_ids=changed.get("vessel", ()),
            detector_ids=changed.get("detector", ()),
        )
        for line in lines:
            self.records.setdefault(line.id, line)
        for line in self._of("supply-line", changed):
            detector_id = triggering_detector(line)
            self._take("detector", () if detector_id is None else {detector_id})
        touched = {line.id for line in lines} | changed.get("supply-line", set())
        for vessel in vessels_filled_by(EVERYTHING, connection, touched):
            self.records.setdefault(vessel.id, vessel)
        for vessel in self._of("vessel", changed):
            line_id = filling_line(vessel)
            self._take("supply-line", () if line_id is None else {line_id})
        for control in self._of("control", changed):
            vessel_id = control.fields["vessel_id"]
            self._take("vessel", () if vessel_id is None else {vessel_id})
        boosted = units_boosted_by(EVERYTHING, connection, changed.get("detector", ()))
        controls = controls_of_vessels(EVERYTHING, connection, changed.get("vessel", ()))
        for record in (*boosted, *controls):
            self.records.setdefault(record.id, record)

    def _of(self, kind: str, changed: Mapping[str, set[str]]) -> list[Record]:
        ids = changed.get(kind, set())
        return [record for record in self.records.values() if record.id in ids]

    def rooms_of(
        self, places: Sequence[Placed]
    ) -> tuple[frozenset[str], dict[str, frozenset[str]], frozenset[str]]:
        """Name the rooms a change may reach, those reached as a whole, and what is too much."""
        direct = {record.id for record in self.records.values() if record.kind == "room"}
        # The room of a vessel that is changed, and of one that a control names.
        direct |= {
            record.fields["room_id"]
            for record in self.records.values()
            if record.kind == "vessel" and record.fields["room_id"] is not None
        }
        for place in places:
            direct |= rooms_reached(self.records.get(place.record_id), self.records)
        far = {
            place.record_id: self._far_rooms(place)
            for place in places
            if place.change.operation == CHANGE
            and not KINDS[place.change.kind].reaches_far.isdisjoint(_said(place))
        }
        reached = frozenset(direct).union(*far.values())
        if len(reached) <= self._session.rooms_per_change:
            return reached, far, frozenset()
        sites = frozenset(place.site_id for place in places if place.site_id is not None)
        return frozenset(), far, sites

    def _far_rooms(self, place: Placed) -> frozenset[str]:
        scope, connection, kind = EVERYTHING, self._session.connection, place.change.kind
        if kind == "fluid":
            return frozenset(rooms_with_fluid(scope, connection, place.record_id))
        sites = (
            [place.record_id]
            if kind == "site"
            else sites_with_basis(scope, connection, place.record_id)
        )
        return frozenset(
            room_id for site in sites for room_id in rooms_of_site(scope, connection, site)
        )

    def take_rooms(self, room_ids: frozenset[str]) -> None:
        """Load rooms, what stands in them, and what they are judged by."""
        if room_ids:
            self._take("room", room_ids)
            for record in equipment_of(EVERYTHING, self._session.connection, sorted(room_ids)):
                self.records[record.id] = record
        # A room that is only now made needs what its site is judged by as well.
        rooms = [r for r in self.records.values() if r.kind == "room" and r.id in room_ids]
        self._take("site", {room.site_id for room in rooms if room.site_id is not None})
        self._take("basis", self._ids_in("site", "basis_id"))
        self._take("basis", self._ids_in("basis", "derived_from_id"))
        # A line is fed from wherever its vessel stands.
        self._take("vessel", self._ids_in("supply-line", "source_vessel_id"))
        self._take("fluid", self._ids_in("supply-line", "fluid_id"))
        self._take("fluid", self._ids_in("vessel", "fluid_id"))
        self._take("fluid", self._ids_in("room", "purge_fluid_id"))

    def most_steps(self) -> int:
        """How many steps a network goes at most, by the bases of the sites that were loaded."""
        bases = [record for record in self.records.values() if record.kind == "basis"]
        return max((_steps(self.records, basis) for basis in bases), default=0)

    def joined_to(self, room_ids: frozenset[str], steps: int) -> frozenset[str]:
        """Name the rooms that stand within some steps of rooms, these left out."""
        found: set[str] = set(room_ids)
        newest = set(room_ids)
        for _ in range(steps):
            if not newest:
                break
            newest = rooms_joined_to(EVERYTHING, self._session.connection, newest) - found
            found |= newest
        return frozenset(found - room_ids)

    def last_read(self, room_ids: frozenset[str]) -> dict[str, frozenset[ReadRecord]]:
        """Read which records rooms were last assessed from; nothing of one never assessed."""
        read: dict[str, frozenset[ReadRecord]] = dict.fromkeys(room_ids, frozenset())
        for one in assessments_now(EVERYTHING, self._session.connection, sorted(room_ids)):
            lines = orjson.loads(one.inputs)["read"]
            read[one.room_id] = frozenset((line["id"], line["revision"]) for line in lines)
        return read

    def _ids_in(self, kind: str, name: str) -> set[str]:
        return {
            record.fields[name]
            for record in self.records.values()
            if record.kind == kind and record.fields[name] is not None
        }

    def _take(self, kind: str, ids: Iterable[str]) -> None:
        missing = sorted(set(ids) - self.records.keys())
        if not missing:
            return
        scope = self._session.scope
        for record in get_records(scope, self._session.connection, kind, missing):
            self.records[record.id] = record

    def prior_of(self, room_ids: frozenset[str]) -> dict[str, Prior]:
        """Read what was last said of rooms."""
        if not room_ids:
            return {}
        states = room_states(EVERYTHING, self._session.connection, sorted(room_ids))
        return {
            state.room_id: Prior(state.position, state.standing, state.worst_oxygen_pct)
            for state in states
        }

    def findings_of(self, room_ids: frozenset[str]) -> dict[str, tuple[Finding, ...]]:
        """Read the newest version of each finding of rooms, cleared ones too."""
        found: dict[str, list[Finding]] = {}
        if not room_ids:
            return {}
        connection = self._session.connection
        for row in findings_of_rooms(EVERYTHING, connection, sorted(room_ids)):
            found.setdefault(row["room_id"], []).append(Finding(**row))
        return {room_id: tuple(findings) for room_id, findings in found.items()}


def _steps(records: Mapping[str, Record], basis: Record) -> int:
    origin = records.get(basis.fields["derived_from_id"] or "")
    own = (basis.fields["values"] or {}).get(_STEPS)
    copied = None if origin is None else (origin.fields["values"] or {}).get(_STEPS)
    return int(next(steps for steps in (own, copied, 0) if steps is not None))


def _said(place: Placed) -> frozenset[str]:
    """Name the fields that a change may alter, references by their id's field."""
    said = set(place.change.fields)
    for link in KINDS[place.change.kind].links:
        if link.said_as in said:
            said.add(link.field)
    return frozenset(said)


def _mentions(kind: str, site_id: str | None, fields: Mapping[str, Any]) -> Iterator[_Mention]:
    for link in KINDS[kind].links:
        by_id, by_tag = fields.get(link.field), fields.get(link.said_as)
        if by_id is not None:
            yield _Mention(link.kind, site_id, record_id=by_id)
        if by_tag is not None:
            yield _Mention(link.kind, site_id, tag=by_tag)
            if link.keeps_tag:
                yield _Mention(link.kind, site_id, record_id=by_tag)
    for served in (*(fields.get("serves") or ()), *(fields.get("rooms") or ())):
        if served.get("room_id") is not None:
            yield _Mention("room", site_id, record_id=served["room_id"])
        if served.get("room") is not None:
            yield _Mention("room", site_id, tag=served["room"])
    filling = fields.get("filling") or {}
    if filling.get("supply_line_id") is not None:
        yield _Mention("supply-line", site_id, record_id=filling["supply_line_id"])
    if filling.get("supply_line") is not None:
        yield _Mention("supply-line", site_id, tag=filling["supply_line"])
    gas = fields.get("gas")
    if kind == "detector" and gas is not None and gas != OXYGEN:
        yield _Mention("fluid", site_id, tag=gas)
    trigger = fields.get("boost_trigger") or (fields.get("shutoff") or {}).get("trigger")
    if trigger is not None and trigger not in (MANUAL, *TRIGGERS):
        yield _Mention("detector", site_id, record_id=trigger)
        yield _Mention("detector", site_id, tag=trigger)
