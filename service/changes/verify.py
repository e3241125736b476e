"""Proof that nothing of the past was altered, and that what was answered still follows from it."""

from __future__ import annotations

import json
import math
import zlib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Final

from sqlalchemy import Connection

from service.audit.assessment import METHOD_VERSION
from service.audit.judge import assess_rooms
from service.changes.answers import inputs_document, results_document
from service.changes.rebuilt import VersionMissing, records_read
from service.changes.replace import assessment_digest, entry_of, finding_digest
from service.changes.room_values import values_of_rooms
from service.store.engine import Database
from service.store.heads import INSTALLATION, NO_HASH, Head, heads_of
from service.store.history import (
    SCHEMA,
    ChangeEntry,
    StoredAssessment,
    chained,
    changes_of,
    versions_of,
)
from service.store.live import list_records
from service.store.records import Record, body, canonical, digest
from service.store.scope import EVERYTHING, Scope
from service.store.states import assessments_from, findings_from, live_findings
from service.store.tables.registry import KINDS

#: Assessments are equal when their numbers agree this far, relative.
TOLERANCE: Final = 1e-9
_PAGE: Final = 200
#: What altered bytes raise where they are unpacked; told as a fault, so that the walk goes on.
_UNREADABLE: Final = (KeyError, ValueError, TypeError, zlib.error)


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing that is not as it was written."""

    site_id: str
    position: int | None
    what: str


@dataclass(slots=True)
class Report:
    """What was walked and what is wrong."""

    sites: int = 0
    changes: int = 0
    versions: int = 0
    assessments: int = 0
    recomputed: int = 0
    findings: int = 0
    faults: list[Fault] = field(default_factory=list)
    #: Assessments by another method: told, not counted as faults.
    other_methods: list[str] = field(default_factory=list)

    @property
    def sound(self) -> bool:
        """Tell whether everything is as it was written."""
        return not self.faults


def verify(database: Database, scope: Scope = EVERYTHING, *, site_id: str | None = None) -> Report:
    """Walk every chain, check what it covers, compute each assessment again; on one snapshot."""
    report = Report()
    with database.reading() as connection:
        for head in heads_of(scope, connection):
            if site_id is None or head.site_id == site_id:
                report.sites += 1
                _Walk(scope, connection, head, report).go()
    return report


class _Walk:
    """The walk along one site's chain."""

    def __init__(self, scope: Scope, connection: Connection, head: Head, report: Report) -> None:
        self._scope, self._connection = scope, connection
        self._head, self._report = head, report
        self._newest: dict[tuple[str, str], str | None] = {}
        # The fields of records whose newest version is of an older form, by which it was hashed.
        self._older: dict[tuple[str, str], frozenset[str]] = {}
        self._newest_findings: dict[str, str] = {}

    def go(self) -> None:
        """Walk from the first entry to the head, then hold the live tables against the versions."""
        previous, position = NO_HASH, 0
        for entry in self._entries():
            position += 1
            if entry.position != position:
                self._fault(position, f"missing: the next entry there is {entry.position}")
                position = entry.position
            try:
                previous = self._check_link(entry, previous)
                self._check_covered(entry)
            except _UNREADABLE as error:
                previous = entry.chain_hash
                self._fault(position, f"cannot be read: {type(error).__name__} {error}")
            self._report.changes += 1
        if (self._head.position, self._head.chain_hash) != (position, previous):
            self._fault(
                self._head.position, f"the head does not stand on the last entry, {position}"
            )
        self._check_live()

    def _entries(self) -> Iterator[ChangeEntry]:
        after = 0
        while page := changes_of(
            self._scope, self._connection, self._head.site_id, after=after, limit=_PAGE
        ):
            yield from page
            after = page[-1].position

    def _fault(self, position: int | None, what: str) -> None:
        self._report.faults.append(Fault(self._head.site_id, position, what))

    def _check_link(self, entry: ChangeEntry, previous: str) -> str:
        expected = chained(previous, entry.entry)
        if entry.chain_hash != expected:
            self._fault(entry.position, "the entry or one before it was altered: its hash differs")
        if _as_entry(entry) != entry.entry:
            self._fault(entry.position, "the row of the change differs from its hashed entry")
        # What follows is held against what is stored, so that one altered entry is one fault.
        return entry.chain_hash

    def _check_covered(self, entry: ChangeEntry) -> None:
        told = json.loads(entry.entry)
        self._check_versions(entry.position, told["records"])
        stored = assessments_from(self._scope, self._connection, self._head.site_id, entry.position)
        self._check_hashes(
            entry.position,
            "assessment of room",
            {line["room_id"]: line["sha256"] for line in told["assessments"]},
            {one.room_id: assessment_digest(one) for one in stored},
        )
        self._check_findings(entry.position, told["findings"])
        self._report.assessments += len(stored)
        self._recompute(entry.position, stored)

    def _check_versions(self, position: int, told: Sequence[Mapping[str, Any]]) -> None:
        rows = versions_of(self._scope, self._connection, self._head.site_id, position)
        self._report.versions += len(rows)
        self._check_hashes(
            position,
            "record version",
            {
                (line["id"], line["revision"]): line["sha256"]
                for line in told
                if line["kind"] != "key"
            },
            {
                (row.record_id, row.revision): None if row.body is None else digest(row.body)
                for row in rows
            },
        )
        for row in rows:
            key = row.kind, row.record_id
            self._newest[key] = None if row.body is None else digest(row.body)
            self._older.pop(key, None)
            if row.schema != SCHEMA and row.body is not None:
                self._older[key] = frozenset(json.loads(row.body))

    def _check_findings(self, position: int, told: Sequence[Mapping[str, Any]]) -> None:
        rows = findings_from(self._scope, self._connection, self._head.site_id, position)
        self._report.findings += len(rows)
        found = {(row["id"], row["number"]): finding_digest(row) for row in rows}
        self._check_hashes(
            position,
            "finding version",
            {(line["id"], line["number"]): line["sha256"] for line in told},
            found,
        )
        self._newest_findings.update(
            {finding_id: hashed for (finding_id, _), hashed in sorted(found.items())}
        )

    def _check_hashes(
        self, position: int, what: str, told: Mapping[Any, Any], found: Mapping[Any, Any]
    ) -> None:
        for key in sorted(told.keys() | found.keys()):
            if key not in found:
                self._fault(position, f"{what} {_named(key)} was removed")
            elif key not in told:
                self._fault(position, f"{what} {_named(key)} was put in: no entry tells of it")
            elif told[key] != found[key]:
                self._fault(position, f"{what} {_named(key)} was altered")

    def _recompute(self, position: int, stored: Sequence[StoredAssessment]) -> None:
        for one in stored:
            if one.method_version != METHOD_VERSION:
                self._report.other_methods.append(
                    f"room {one.room_id} at {position}: stored by method {one.method_version}"
                )
        ours = [one for one in stored if one.method_version == METHOD_VERSION]
        if not ours:
            return
        try:
            records = records_read(self._connection, ours)
        except VersionMissing as missing:
            self._fault(position, str(missing))
            return
        room_ids = {one.room_id for one in ours}
        values = values_of_rooms(records, room_ids)
        others = {record.id for record in records.values() if record.kind == "room"} - room_ids
        beside = values_of_rooms(records, others)
        for one, again in zip(
            sorted(ours, key=lambda one: one.room_id),
            assess_rooms(values, at=ours[0].assessed_at, beside=beside),
            strict=True,
        ):
            self._report.recomputed += 1
            for kept, made in (
                (one.results, results_document(again)),
                (one.inputs, inputs_document(again)),
            ):
                for difference in differences(json.loads(kept), json.loads(made)):
                    self._fault(
                        position, f"assessment of room {one.room_id}, recomputed: {difference}"
                    )

    def _check_live(self) -> None:
        live = {
            (record.kind, record.id): digest(canonical(self._body_as_hashed(record)))
            for record in self._live_records()
        }
        kept = {key: hashed for key, hashed in self._newest.items() if hashed is not None}
        self._check_hashes(self._head.position, "live record", kept, live)
        rows = live_findings(self._scope, self._connection, self._head.site_id)
        self._check_hashes(
            self._head.position,
            "live finding",
            self._newest_findings,
            {row["id"]: finding_digest(row) for row in rows},
        )

    def _body_as_hashed(self, record: Record) -> dict[str, Any]:
        """Give a live record in the form of its newest version: what came since is null."""
        whole = body(record)
        names = self._older.get((record.kind, record.id))
        if names is None:
            return whole
        return {name: value for name, value in whole.items() if name in names or value is not None}

    def _live_records(self) -> Iterator[Record]:
        site_id = None if self._head.site_id == INSTALLATION else self._head.site_id
        for kind in KINDS:
            after: tuple[Any, str] | None = None
            while page := list_records(
                self._scope,
                self._connection,
                kind,
                {"site_id": site_id},
                sort="id",
                descending=False,
                after=after,
                limit=_PAGE,
            ):
                yield from page
                after = (page[-1].id, page[-1].id)


def _as_entry(change: ChangeEntry) -> bytes:
    told = json.loads(change.entry)
    return entry_of(
        site_id=change.site_id,
        position=change.position,
        recorded_at=change.recorded_at,
        stated_at=change.stated_at,
        key_id=change.key_id,
        request_id=change.request_id,
        operation=change.operation,
        reason=change.reason,
        wants=change.wants,
        records=told["records"],
        assessments=told["assessments"],
        findings=told["findings"],
    )


def _named(key: Any) -> str:
    return " ".join(str(part) for part in key) if isinstance(key, tuple) else str(key)


def differences(kept: Any, made: Any, at: str = "") -> Iterator[str]:
    """Name where two documents differ by more than the tolerance of a number."""
    if isinstance(kept, Mapping) and isinstance(made, Mapping):
        for name in sorted(kept.keys() | made.keys()):
            yield from differences(kept.get(name), made.get(name), f"{at}/{name}")
    elif isinstance(kept, list) and isinstance(made, list) and len(kept) == len(made):
        for number, (one, other) in enumerate(zip(kept, made, strict=True)):
            yield from differences(one, other, f"{at}/{number}")
    elif _is_number(kept) and _is_number(made):
        if not math.isclose(kept, made, rel_tol=TOLERANCE, abs_tol=0.0):
            yield f"{at} was {kept}, is {made}"
    elif kept != made or isinstance(kept, bool) is not isinstance(made, bool):
        yield f"{at} was {kept!r}, is {made!r}"


def _is_number(value: Any) -> bool:
    return isinstance(value, (int, float)) and not isinstance(value, bool)
