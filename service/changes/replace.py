"""What a change leaves: records, versions, assessments, findings, events, an entry a site."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from service.audit.findings import Finding
from service.changes.answers import (
    inputs_document,
    rendered,
    results_document,
    status_bytes,
    stored_status,
)
from service.changes.apply import Pair
from service.changes.assess import Assessed
from service.changes.neighbourhood import Prior
from service.clock import text_of
from service.store.events import StoredEvent, append_events
from service.store.findings import append_findings
from service.store.heads import Head
from service.store.history import (
    ChangeEntry,
    StoredAssessment,
    Version,
    append_assessments,
    append_change,
    append_versions,
    chained,
)
from service.store.ids import new_record_id
from service.store.live import delete_record, insert_record, revise_record
from service.store.memory import Published
from service.store.records import Record, body, canonical, digest
from service.store.session import INSTALLATION, WriteSession
from service.store.tables.registry import KINDS

#: Parents first: what is referred to is written before what refers to it.
_ORDER: Final = {kind: number for number, kind in enumerate(KINDS)}
#: Names of people stay out of the chain, which nothing may ever be taken from.
_WITHHELD: Final = frozenset({"contact"})
_IN_SERVICE: Final = "in-service"


@dataclass(frozen=True, slots=True)
class Effect:
    """What a change did to one room."""

    room_id: str
    tag: str
    standing_before: str | None
    standing_after: str
    worst_oxygen_before: float | None
    worst_oxygen_after: float | None
    opened: tuple[Mapping[str, Any], ...]
    cleared: tuple[Mapping[str, Any], ...]
    changed: tuple[Mapping[str, Any], ...]


@dataclass(frozen=True, slots=True)
class Outcome:
    """What is to be stored in one transaction."""

    operation: str
    pairs: Sequence[Pair]
    assessed: Sequence[Assessed]
    prior: Mapping[str, Prior]
    left_to_sweep: frozenset[str] = frozenset()
    cleared: Sequence[Finding] = ()  # of rooms that went


def next_positions(heads: Mapping[str, Head]) -> dict[str, int]:
    """Give the position that a change of each site will have."""
    return {site_id: head.position + 1 for site_id, head in heads.items()}


def replace(
    session: WriteSession, heads: Mapping[str, Head], outcome: Outcome
) -> tuple[Effect, ...]:
    """Store an outcome; what did not change leaves no row."""
    changed = [pair for pair in outcome.pairs if pair.changed]
    _write_records(session, changed)
    for site_id in sorted(heads):
        _append_site(session, heads[site_id], outcome, changed)
    return tuple(_effect(assessed, outcome.prior) for assessed in outcome.assessed)


def _write_records(session: WriteSession, changed: Sequence[Pair]) -> None:
    ordered = sorted(changed, key=_rank)
    for pair in ordered:
        if pair.after is None:
            continue
        if pair.before is None:
            insert_record(session, pair.after)
        elif not revise_record(session, pair.after, pair.before.revision):
            # The heads are locked, so nobody else can have moved it: the ledger is damaged.
            raise RuntimeError(f"The live {pair.after.kind} is not at the revision that was read.")
    for pair in reversed(ordered):
        if pair.after is None and pair.before is not None:
            delete_record(session, pair.before)


def _rank(pair: Pair) -> int:
    # A site names its basis, and all else names the site: one that is only changed comes after
    # its basis, one that is new before everything, and one that goes goes last.
    comes_or_goes = pair.before is None or pair.after is None
    return -1 if pair.record.kind == "site" and comes_or_goes else _ORDER[pair.record.kind]


def _append_site(
    session: WriteSession, head: Head, outcome: Outcome, changed: Sequence[Pair]
) -> None:
    site_id, position = head.site_id, head.position + 1
    pairs = [pair for pair in changed if (pair.record.site_id or INSTALLATION) == site_id]
    assessed = [one for one in outcome.assessed if one.assessment.site.id == site_id]
    wants = bool(changed) and site_id in outcome.left_to_sweep
    if not pairs and not assessed and not wants:
        return
    stored = [_stored_assessment(one, position, outcome.operation) for one in assessed]
    cleared = [finding for finding in outcome.cleared if finding.site_id == site_id]
    told = [*cleared, *(finding for one in assessed for finding in one.news)]
    news = [_finding_row(finding, session) for finding in told]
    entry = _entry(session, site_id, position, outcome.operation, wants, pairs, stored, news)
    append_change(
        session,
        ChangeEntry(
            site_id=site_id,
            position=position,
            recorded_at=session.moment,
            stated_at=session.stated_at,
            key_id=session.key_id,
            request_id=session.request_id,
            operation=outcome.operation,
            reason=session.reason,
            wants=wants,
            entry=entry,
            chain_hash=chained(head.chain_hash, entry),
        ),
    )
    append_versions(session, [_version(pair, position) for pair in pairs])
    append_assessments(session, stored)
    append_findings(session, news)
    append_events(session, _events(session, site_id, position, pairs, assessed, outcome.prior))
    session.publish(
        Published(
            statuses=tuple(stored_status(assessment) for assessment in stored),
            forgotten=tuple(
                pair.record.id
                for pair in pairs
                if pair.after is None and pair.record.kind == "room"
            ),
        )
    )


def _stored_assessment(one: Assessed, position: int, cause: str) -> StoredAssessment:
    assessment = one.assessment
    return StoredAssessment(
        room_id=assessment.room.id,
        site_id=assessment.site.id,
        from_position=position,
        assessed_at=assessment.at,
        basis_id=assessment.basis.id,
        basis_revision=assessment.basis.revision,
        method_version=assessment.method_version,
        inputs=inputs_document(assessment),
        results=results_document(assessment),
        status=status_bytes(one, position),
        turns_at=assessment.turns_at,
        cause=cause,
        failed=assessment.failed is not None,
    )


def _finding_row(finding: Finding, session: WriteSession) -> dict[str, Any]:
    row = {name: getattr(finding, name) for name in Finding.__slots__}
    row["key_id"] = session.key_id
    return row


def _version(pair: Pair, position: int) -> Version:
    record = pair.record
    revision = record.revision if pair.after is not None else record.revision + 1
    return pair.after, record.kind, record.id, record.site_id, revision, position


def entry_of(
    *,
    site_id: str,
    position: int,
    recorded_at: datetime,
    stated_at: datetime | None,
    key_id: str | None,
    request_id: str | None,
    operation: str,
    reason: str | None,
    wants: bool,
    records: Sequence[Mapping[str, Any]],
    assessments: Sequence[Mapping[str, Any]],
    findings: Sequence[Mapping[str, Any]],
) -> bytes:
    """Write the canonical bytes of a change entry, which the chain is made of."""
    return canonical(
        {
            "site_id": site_id,
            "position": position,
            "recorded_at": text_of(recorded_at),
            "stated_at": None if stated_at is None else text_of(stated_at),
            "key_id": key_id,
            "request_id": request_id,
            "operation": operation,
            "reason": reason,
            "wants": wants,
            "records": list(records),
            "assessments": list(assessments),
            "findings": list(findings),
        }
    )


def _entry(
    session: WriteSession,
    site_id: str,
    position: int,
    operation: str,
    wants: bool,
    pairs: Sequence[Pair],
    stored: Sequence[StoredAssessment],
    news: Sequence[Mapping[str, Any]],
) -> bytes:
    return entry_of(
        site_id=site_id,
        position=position,
        recorded_at=session.moment,
        stated_at=session.stated_at,
        key_id=session.key_id,
        request_id=session.request_id,
        operation=operation,
        reason=session.reason,
        wants=wants,
        records=[_record_line(pair) for pair in pairs],
        assessments=[{"room_id": one.room_id, "sha256": assessment_digest(one)} for one in stored],
        findings=[
            {"id": row["id"], "number": row["number"], "sha256": finding_digest(row)}
            for row in news
        ],
    )


def _record_line(pair: Pair) -> dict[str, Any]:
    record = pair.record
    return {
        "kind": record.kind,
        "id": record.id,
        "revision": record.revision if pair.after is not None else record.revision + 1,
        "sha256": None if pair.after is None else digest(canonical(body(pair.after))),
        "fields": fields_changed(pair.before, pair.after),
    }


def fields_changed(before: Record | None, after: Record | None) -> dict[str, list[Any]]:
    """Name the fields that differ, each with its value before and after."""
    old = {} if before is None else before.fields
    new = {} if after is None else after.fields
    moved: dict[str, list[Any]] = {}
    for name in sorted({*old, *new}):
        if old.get(name) != new.get(name):
            withheld = name in _WITHHELD
            moved[name] = ["withheld"] * 2 if withheld else [old.get(name), new.get(name)]
    return moved


def assessment_digest(stored: StoredAssessment) -> str:
    """Hash what was stored of an assessment, so that the chain covers it."""
    return digest(b"\n".join((stored.inputs, stored.results, stored.status)))


def finding_digest(row: Mapping[str, Any]) -> str:
    """Hash a version of a finding, so that the chain covers it."""
    return digest(
        canonical(
            {
                name: text_of(value) if isinstance(value, datetime) else value
                for name, value in row.items()
            }
        )
    )


def _events(
    session: WriteSession,
    site_id: str,
    position: int,
    pairs: Sequence[Pair],
    assessed: Sequence[Assessed],
    prior: Mapping[str, Prior],
) -> list[StoredEvent]:
    told = [*_record_events(pairs), *_room_events(assessed, prior)]
    return [_event(session, site_id, position, number, *one) for number, one in enumerate(told)]


_Told = tuple[str, str, dict[str, Any]]


def _record_events(pairs: Sequence[Pair]) -> Iterable[_Told]:
    for pair in pairs:
        record = pair.record
        data = {
            "kind": record.kind,
            "id": record.id,
            "tag": record.fields["tag"],
            "revision": record.revision,
            "removed": pair.after is None,
        }
        yield "rimeward.record.changed", f"{record.kind}/{record.id}", data
        if record.kind == "basis":
            yield "rimeward.basis.changed", f"basis/{record.id}", data


def _room_events(assessed: Sequence[Assessed], prior: Mapping[str, Prior]) -> Iterable[_Told]:
    for one in assessed:
        if one.values.state != _IN_SERVICE:
            continue
        room = one.assessment.room
        before = prior.get(room.id)
        base = {"room_id": room.id, "tag": room.tag}
        subject = f"room/{room.id}"
        yield (
            "rimeward.room.assessed",
            subject,
            base | {"standing": one.standing, "worst_oxygen_pct": one.worst_oxygen_pct},
        )
        if before is None or before.standing != one.standing:
            was = None if before is None else before.standing
            yield (
                "rimeward.room.standing-changed",
                subject,
                base | {"before": was, "after": one.standing},
            )
        for finding in one.news:
            yield (
                f"rimeward.finding.{event_of(finding, one.returned)}",
                f"finding/{finding.id}",
                base | _finding_brief(finding) | {"state": finding.state},
            )


def event_of(finding: Finding, returned: frozenset[str]) -> str:
    """Name what happened to a finding with its newest version."""
    if finding.number == 1:
        return "opened"
    if finding.state == "cleared":
        return "cleared"
    return "reopened" if finding.id in returned else "changed"


def _event(
    session: WriteSession,
    site_id: str,
    position: int,
    number: int,
    kind: str,
    subject: str,
    data: Mapping[str, Any],
) -> StoredEvent:
    event_id = new_record_id(session.moment)
    # CloudEvents 1.0, structured mode; extension names may hold lower-case letters and digits only.
    document = {
        "specversion": "1.0",
        "id": event_id,
        "source": f"/v1/sites/{site_id}",
        "type": kind,
        "subject": subject,
        "time": text_of(session.moment),
        "datacontenttype": "application/json",
        "position": position,
        "data": dict(data),
    }
    return StoredEvent(event_id, site_id, position, number, subject, kind, rendered(document))


def _finding_brief(finding: Finding) -> dict[str, Any]:
    return {
        "id": finding.id,
        "rule": finding.rule,
        "severity": finding.severity,
        "statement": finding.statement,
    }


def _effect(one: Assessed, prior: Mapping[str, Prior]) -> Effect:
    room = one.assessment.room
    before = prior.get(room.id)
    sorted_news: dict[str, list[dict[str, Any]]] = {"opened": [], "cleared": [], "changed": []}
    for finding in one.news:
        happened = event_of(finding, one.returned)
        place = "opened" if happened == "reopened" else happened
        sorted_news[place].append(_finding_brief(finding))
    return Effect(
        room_id=room.id,
        tag=room.tag,
        standing_before=None if before is None else before.standing,
        standing_after=one.standing,
        worst_oxygen_before=None if before is None else before.worst_oxygen_pct,
        worst_oxygen_after=one.worst_oxygen_pct,
        opened=tuple(sorted_news["opened"]),
        cleared=tuple(sorted_news["cleared"]),
        changed=tuple(sorted_news["changed"]),
    )
