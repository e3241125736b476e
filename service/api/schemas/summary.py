"""The schemas of the summary."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.api.fields import RecordIdText
from service.api.schemas.findings import FindingState, Severity
from service.api.schemas.record import Answer
from service.api.schemas.status import FindingCounts, Standing


class RoomsByState(Answer):
    """Rooms by their state; only those in service are judged in the counts below."""

    planned: int
    in_service: int = Field(alias="in-service")
    out_of_service: int = Field(alias="out-of-service")


class RoomsByStanding(Answer):
    """Rooms in service by standing."""

    in_order: int = Field(alias="in-order")
    attention: int
    action: int
    stop: int


class RoomsByCurrency(Answer):
    """Rooms in service by how current what is known of them is."""

    current: int
    recalculating: int
    behind: int
    failed: int


class Counted(Answer):
    """An estate in counts."""

    rooms: RoomsByState
    standing: RoomsByStanding
    currency: RoomsByCurrency
    findings: FindingCounts = Field(description="Of rooms in service; those accepted apart.")


class SiteSummary(Counted):
    """One site in counts."""

    site_id: RecordIdText
    tag: str
    name: str | None
    demo: bool
    position: int = Field(description="Where the site's history stands.")


class DecidingFinding(Answer):
    """The finding that sets the standing of a room, the oldest where there are several."""

    id: RecordIdText
    rule: str
    gas: str | None
    severity: Severity
    state: FindingState
    measure: float | None
    limit: float | None
    worse_is: Literal["lower", "higher"]
    statement: str


class WorstRoomRead(Answer):
    """A room that stands badly, and why."""

    room_id: RecordIdText
    tag: str
    name: str | None
    site_id: RecordIdText
    site: str
    position: int
    standing: Standing
    worst_oxygen_pct: float | None
    finding: DecidingFinding | None


class SummaryRead(Answer):
    """Sites in counts, and the rooms that stand worst."""

    judges: str
    method_version: str
    sites: list[SiteSummary]
    total: Counted
    worst_rooms: list[WorstRoomRead] = Field(
        description="By standing, then by how many findings of each severity are not accepted, "
        "then by lowest oxygen; rooms in order are left out."
    )
    cautions: str
