"""Findings: what is wrong in a room, matched with what was wrong before; and the standing."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from typing import Any, Final

from service.audit.assessment import SEVERITIES, STANDINGS, Judgement
from service.audit.inputs import RoomValues

OPEN: Final = "open"
ACKNOWLEDGED: Final = "acknowledged"
ACCEPTED: Final = "accepted"
CLEARED: Final = "cleared"

# Numbers that agree this far, relative, are the same.
TOLERANCE: Final = 1e-9

# Where the evidence keeps what an acceptance covers: its severity and its measure.
TERMS: Final = "accepted"

Identity = tuple[str, str, str, str | None]


@dataclass(frozen=True, slots=True)
class Finding:
    """One version of a finding; its identity is room, rule, subject and gas."""

    id: str
    site_id: str
    room_id: str
    rule: str
    family: str
    subject_kind: str
    subject_id: str
    subject_tag: str | None
    gas: str | None
    number: int
    position: int
    state: str
    severity: str
    measure: float | None
    limit: float | None
    worse_is: str
    statement: str
    evidence: Mapping[str, Any]
    remedy: str | None
    method: str
    source: str
    opened_at: datetime
    changed_at: datetime
    cleared_at: datetime | None = None
    owner: str | None = None
    due_on: str | None = None
    expires_at: datetime | None = None
    reason: str | None = None
    key_id: str | None = None

    @property
    def identity(self) -> Identity:
        """Give what makes it the same finding as an earlier one in the same room."""
        return self.rule, self.subject_kind, self.subject_id, self.gas


def reconcile(
    prior: Sequence[Finding],
    judgements: Sequence[Judgement],
    *,
    room: RoomValues,
    at: datetime,
    position: int,
    reopen_days: int,
    new_id: Callable[[], str],
) -> tuple[Finding, ...]:
    """Match what is judged now with earlier findings; give the versions that are new.

    ``prior`` is the newest version of each earlier finding of the room, cleared ones too. A finding
    is cleared when nothing breaks its rule any more. Back within ``reopen_days`` it is the same
    finding, and an acceptance that has not lapsed and still covers it holds again.
    """
    known = _newest_by_identity(prior)
    news: list[Finding] = []
    seen: set[Identity] = set()
    for judged in judgements:
        before = known.get(_identity(judged))
        seen.add(_identity(judged))
        if before is None or _too_long_gone(before, at, reopen_days):
            news.append(_opened(judged, room, at, position, new_id()))
        else:
            after = _continued(before, judged, at, position)
            if after is not before:
                news.append(after)
    gone = [each for each in known.values() if each.identity not in seen and each.state != CLEARED]
    return tuple(news) + tuple(_cleared(before, at, position) for before in gone)


def _newest_by_identity(prior: Sequence[Finding]) -> dict[Identity, Finding]:
    """One finding an identity: what stands before what is cleared, and the latest of those."""
    in_order = sorted(prior, key=lambda finding: (finding.state != CLEARED, finding.changed_at))
    return {finding.identity: finding for finding in in_order}


def clear(prior: Sequence[Finding], *, at: datetime, position: int) -> tuple[Finding, ...]:
    """Clear what is left of findings whose room is no longer there to be calculated."""
    return tuple(_cleared(before, at, position) for before in prior if before.state != CLEARED)


def _identity(judged: Judgement) -> Identity:
    return judged.rule, judged.subject.kind, judged.subject.id, judged.gas


def _too_long_gone(before: Finding, at: datetime, reopen_days: int) -> bool:
    if before.state != CLEARED or before.cleared_at is None:
        return False
    return at > before.cleared_at + timedelta(days=reopen_days)


def _opened(
    judged: Judgement, room: RoomValues, at: datetime, position: int, finding_id: str
) -> Finding:
    return Finding(
        id=finding_id,
        site_id=room.site.id,
        room_id=room.record.id,
        rule=judged.rule,
        family=judged.family,
        subject_kind=judged.subject.kind,
        subject_id=judged.subject.id,
        subject_tag=judged.subject.tag,
        gas=judged.gas,
        number=1,
        position=position,
        state=OPEN,
        severity=judged.severity,
        measure=judged.measure,
        limit=judged.limit,
        worse_is=judged.worse_is,
        statement=judged.statement,
        evidence=judged.evidence,
        remedy=judged.remedy,
        method=judged.method,
        source=judged.source,
        opened_at=at,
        changed_at=at,
    )


def _continued(before: Finding, judged: Judgement, at: datetime, position: int) -> Finding:
    """Carry a finding on; the same object where nothing about it is new."""
    state = _state_after(before, judged, at)
    if state == before.state and _says_the_same(before, judged):
        return before
    after = replace(
        before,
        number=before.number + 1,
        position=position,
        state=state,
        severity=judged.severity,
        measure=judged.measure,
        limit=judged.limit,
        statement=judged.statement,
        evidence=_evidence(before, judged, state),
        remedy=judged.remedy,
        method=judged.method,
        source=judged.source,
        subject_tag=judged.subject.tag,
        changed_at=at,
        cleared_at=None,
    )
    if state != OPEN or before.state == OPEN:
        return after
    # What was agreed of it no longer holds: whoever takes it up again says so anew.
    return replace(after, owner=None, due_on=None, expires_at=None, reason=None)


def _state_after(before: Finding, judged: Judgement, at: datetime) -> str:
    if before.state == CLEARED:
        # An acceptance outlives the clearing until it lapses; an acknowledgement does not.
        return ACCEPTED if before.expires_at is not None and _covers(before, judged, at) else OPEN
    if before.state == ACCEPTED and not _covers(before, judged, at):
        return OPEN
    return before.state


def _covers(accepted: Finding, judged: Judgement, at: datetime) -> bool:
    """Tell whether an acceptance still holds: not lapsed, and no worse than what was accepted."""
    if accepted.expires_at is None or at >= accepted.expires_at:
        return False
    terms = _terms(accepted)
    if SEVERITIES.index(judged.severity) > SEVERITIES.index(terms["severity"]):
        return False
    measure = terms["measure"]
    if measure is None or judged.measure is None:
        return measure is judged.measure
    slack = TOLERANCE * abs(measure)
    if judged.worse_is == "lower":
        return bool(judged.measure >= measure - slack)
    return bool(judged.measure <= measure + slack)


def _terms(accepted: Finding) -> Mapping[str, Any]:
    """What was accepted; kept in the evidence, since what is measured may improve meanwhile."""
    own = {"severity": accepted.severity, "measure": accepted.measure}
    terms: Mapping[str, Any] = accepted.evidence.get(TERMS, own)
    return terms


def _evidence(before: Finding, judged: Judgement, state: str) -> Mapping[str, Any]:
    """The evidence of now, with the terms of an acceptance that goes on."""
    if state != ACCEPTED:
        return judged.evidence
    return {**judged.evidence, TERMS: dict(_terms(before))}


def _says_the_same(before: Finding, judged: Judgement) -> bool:
    return (
        before.severity == judged.severity
        and before.statement == judged.statement
        and before.subject_tag == judged.subject.tag
        and before.remedy == judged.remedy
        and _same(before.measure, judged.measure)
        and _same(before.limit, judged.limit)
        and _same(_without_terms(before.evidence), judged.evidence)
    )


def _without_terms(evidence: Mapping[str, Any]) -> Mapping[str, Any]:
    return {name: value for name, value in evidence.items() if name != TERMS}


def _same(one: Any, other: Any) -> bool:
    """Compare two values of evidence, numbers by the tolerance of results."""
    if isinstance(one, bool) or isinstance(other, bool):
        return one is other
    if isinstance(one, int | float) and isinstance(other, int | float):
        return math.isclose(one, other, rel_tol=TOLERANCE)
    if isinstance(one, Mapping) and isinstance(other, Mapping):
        return one.keys() == other.keys() and all(_same(one[name], other[name]) for name in one)
    if isinstance(one, list | tuple) and isinstance(other, list | tuple):
        return len(one) == len(other) and all(map(_same, one, other))
    return bool(one == other)


def _cleared(before: Finding, at: datetime, position: int) -> Finding:
    accepted = before.state == ACCEPTED
    evidence = {**before.evidence, TERMS: dict(_terms(before))} if accepted else before.evidence
    return replace(
        before,
        number=before.number + 1,
        position=position,
        evidence=evidence,
        state=CLEARED,
        changed_at=at,
        cleared_at=at,
    )


def standing(findings: Sequence[Finding], failed: bool = False) -> str:
    """Give a room's standing: that of its worst finding which is open, acknowledged or accepted.

    An accepted finding counts one step lower, and never below `attention` when it was major or
    critical. A room that cannot be computed is at least `action`.
    """
    worst = max((_step(finding) for finding in findings if finding.state != CLEARED), default=0)
    return STANDINGS[max(worst, STANDINGS.index("action") if failed else 0)]


def _step(finding: Finding) -> int:
    step = SEVERITIES.index(finding.severity)
    if finding.state != ACCEPTED:
        return step
    least = 1 if step >= SEVERITIES.index("major") else 0
    return max(step - 1, least)


def counts(findings: Sequence[Finding]) -> dict[str, Any]:
    """Count findings by severity, worst first; the accepted ones by themselves."""
    worst_first = tuple(reversed(SEVERITIES))
    counted: dict[str, Any] = {
        severity: sum(
            finding.severity == severity and finding.state in (OPEN, ACKNOWLEDGED)
            for finding in findings
        )
        for severity in worst_first
    }
    counted["accepted"] = {
        severity: sum(
            finding.severity == severity and finding.state == ACCEPTED for finding in findings
        )
        for severity in worst_first
        if severity != "observation"
    }
    return counted
