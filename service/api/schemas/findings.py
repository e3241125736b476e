"""The schemas of findings."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field

from service.api.fields import Instant, RecordIdText
from service.api.schemas.record import Answer, Page

Severity = Literal["critical", "major", "minor", "observation"]
FindingState = Literal["open", "acknowledged", "accepted", "cleared"]


class Subject(Answer):
    """The record that a finding is about."""

    kind: str
    id: RecordIdText
    tag: str | None


class FindingRead(Answer):
    """Something that a room's records show to be wrong, with its numbers and what to do."""

    id: RecordIdText
    site_id: RecordIdText
    room_id: RecordIdText
    rule: str
    family: str
    subject: Subject
    gas: str | None
    number: int = Field(description="Goes up by one with each change; also the ETag.")
    position: int
    state: FindingState
    severity: Severity
    measure: float | None
    limit: float | None
    worse_is: Literal["lower", "higher"]
    statement: str
    evidence: dict[str, Any]
    remedy: str | None
    method: str
    source: str
    opened_at: Instant
    changed_at: Instant
    cleared_at: Instant | None
    owner: str | None
    due_on: str | None
    expires_at: Instant | None
    reason: str | None
    key_id: str | None


class FindingPage(Page):
    """A page of findings."""

    items: list[FindingRead]
    cautions: str
