"""The schemas of a room's status and assessment; more members may be added to either."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import ConfigDict, Field

from service.api.fields import Instant, RecordIdText
from service.api.schemas.findings import FindingRead
from service.api.schemas.record import Answer

Standing = Literal["in-order", "attention", "action", "stop"]
Currency = Literal["current", "recalculating", "behind", "failed"]


class Growing(Answer):
    """An answer to which members may be added."""

    model_config = ConfigDict(extra="allow")


class WorstRead(Growing):
    """A case in few words; null stands for never, or for no such number."""

    release: str
    airflow: str
    hazard: str = Field(description="oxygen-low, oxygen-high, toxic or flammable.")
    gas: str = Field(description="The gas judged.")
    fluid: str | None
    fluids: list[str]
    vessel_ids: list[RecordIdText]
    oxygen_pct: float
    oxygen_kpa: float
    peak_pct: float | None = Field(description="Of the gas itself, by volume.")
    mean_15min_pct: float | None = Field(description="The highest mean of any 15 minutes.")
    mean_8h_pct: float | None = Field(description="The highest mean of any 8 hours.")
    lower_limit_pct: float | None = Field(
        description="The share of the lower flammable limit, by the rule of Le Chatelier."
    )
    at_s: float
    to_deficient_s: float | None
    to_danger_s: float | None
    to_critical_s: float | None
    recovered_s: float | None
    mark: int = Field(description="The worst mark crossed: 0 none, 1 first, 2 second, 3 third.")
    variant: str | None = Field(
        description="expected, pipe-failed or jacket-open; null: the release has but one form."
    )
    line_ids: list[RecordIdText] = Field(description="Of supply lines that break.")
    from_room: dict[str, Any] | None = Field(
        description="The room that the gas comes from; null: the room itself."
    )


class DecidingRead(Growing):
    """The mark that decides: the worst one crossed, or the nearest."""

    measure: str = Field(description="peak, mean-15min, mean-8h or lower-limit.")
    value_pct: float
    limit_pct: float
    limit: str = Field(description="The value of the basis that sets it.")
    place: int
    crossed: bool


class PeakRead(Growing):
    """How far a toxic or flammable gas would rise in the worst case that counts."""

    gas: str
    hazard: str
    fluids: list[str]
    peak_pct: float
    mean_15min_pct: float | None
    mean_8h_pct: float | None
    lower_limit_pct: float | None
    deciding: DecidingRead
    release: str
    airflow: str


class MarkRead(Growing):
    """A mark of a case, what it is set against, and whether the case is beyond it."""

    place: int = Field(description="1 first, 2 second, 3 third.")
    measure: str = Field(description="oxygen, peak, mean-15min, mean-8h or lower-limit.")
    limit: str = Field(description="The value of the basis that sets it.")
    limit_pct: float
    value_pct: float
    crossed: bool
    at_s: float | None = Field(
        description="When; for a mean, when the gas itself first passes the limit."
    )


class CaseRead(WorstRead):
    """One release of the room under one airflow, for one hazard."""

    counts: bool = Field(description="Towards the standing.")
    lines: list[dict[str, Any]] = Field(description="Supply lines that break, in their revision.")
    vessels: list[dict[str, Any]] = Field(description="What is let go, in its revision.")
    marks: list[MarkRead]
    gas_m3: float = Field(description="Let go at the room's pressure and temperature.")
    required_m3_h: float | None = Field(
        description="Outdoor air that a fan must move to hold it inside the first mark."
    )
    required_reason: str | None = Field(description="Why there is no such flow.")
    restore_m3_h: float | None = Field(
        description="Outdoor air that a fan must move to bring the room back in time."
    )
    alarm_s: float | None = Field(description="To the first alarm.")
    margin_s: float | None = Field(description="Between being out and the second mark.")
    without_margins: dict[str, float | None] = Field(
        description="The same with every stacked factor at 1, as by hand."
    )
    method: list[str]


class ReachedRead(Growing):
    """A room that gas can come to."""

    room: dict[str, Any]
    steps: int = Field(description="From the room that it comes from.")
    through: dict[str, Any] = Field(description="The opening or the unit.")


class CutRead(Growing):
    """A way on which air passes, and which is followed no further."""

    through: dict[str, Any]
    room: dict[str, Any]
    beyond_room_id: str


class AssumedOpeningRead(Growing):
    """An opening of which something was not recorded."""

    opening: dict[str, Any]
    fields: list[str]
    exchange_flow_m3_h: float


class NetworkRead(Growing):
    """The rooms that a room's gas can reach, at most eleven others."""

    rooms: list[ReachedRead]
    cut: list[CutRead]
    assumed: list[AssumedOpeningRead]


class ZoneRead(Growing):
    """A zone in which all the gas of a release is taken to stay."""

    release: str
    variant: str | None
    oxygen_pct: float | None = Field(description="A bound, never a concentration.")
    mixed_oxygen_pct: float | None = Field(description="The same gas mixed through the room.")
    zone_m3: float | None


class LayerRead(Growing):
    """The depth of a layer that nothing mixes into."""

    cold_m: float | None
    warm_m: float | None


class PitRead(Growing):
    """A pit in the floor of the room."""

    volume_m3: float
    oxygen_pct: float | None
    filled_by_l_cold: float | None
    filled_by_l_warm: float | None
    entered: bool | None


class LayeringRead(Growing):
    """Bounds for gas that stays where it goes."""

    bound: bool
    caution: str
    breathing_zone: ZoneRead | None
    kneeling_zone: ZoneRead | None
    ceiling_zone: ZoneRead | None
    layer: LayerRead | None
    pit: PitRead | None


class VentilationRead(Growing):
    """The air of a room, as a fan moves it and as it counts."""

    outdoor_air_m3_h: float
    credited_m3_h: float
    air_changes_per_h: float
    sustained_release_m3_h: float
    required_m3_h: float | None
    shortfall_m3_h: float | None
    restore_m3_h: float | None
    deciding_case: str | None


class AcceptedCounts(Answer):
    """How many accepted findings there are of each severity."""

    critical: int
    major: int
    minor: int


class FindingCounts(Growing):
    """How many findings there are of each severity; those accepted apart."""

    critical: int
    major: int
    minor: int
    observation: int
    accepted: AcceptedCounts


class StatusBasis(Growing):
    """What a status and an assessment have in common."""

    room_id: RecordIdText
    tag: str
    name: str | None
    site_id: RecordIdText
    position: int = Field(description="The site's position from which this holds.")
    assessed_at: Instant
    currency: Currency = Field(
        description="current; recalculating: the basis, the method or an import is newer; behind: "
        "the clock has passed the moment at which it changes by itself; failed: it cannot be "
        "computed."
    )
    basis: str
    judges: str
    state: str
    standing: Standing
    worst_oxygen_pct: float | None = Field(description="The lowest of the cases that count.")
    worst: WorstRead | None = Field(description="The case that decides; null for an empty room.")
    peaks: list[PeakRead] = Field(description="Toxic and flammable gases, each at its worst.")
    highest_oxygen: WorstRead | None
    ventilation: VentilationRead | None
    turns_at: Instant | None = Field(description="When this can change by itself.")
    method_version: str
    failed: str | None = Field(description="Why it cannot be computed.")


class StatusRead(StatusBasis):
    """What a room's records say, in few words: the poll."""

    findings: FindingCounts


class AssessmentRead(StatusBasis):
    """Everything that a room's records say, and what it rests on."""

    finding_counts: FindingCounts
    basis_id: RecordIdText
    basis_revision: int
    cause: str = Field(description="What made it be assessed.")
    inputs: list[dict[str, Any]] = Field(description="The records read, in their revisions.")
    assumed: list[dict[str, Any]] = Field(description="What was missing, and what was taken.")
    figures: dict[str, Any]
    cases: list[CaseRead] = Field(description="What is let go in the room itself.")
    incoming: list[CaseRead] = Field(
        description="What is let go in other rooms, as its gas comes to this one; what comes less "
        "than a hundredth of the way to the first mark is left out."
    )
    network: NetworkRead | None = Field(
        description="Where the gas of the room can go; null: to no other room."
    )
    layering: LayeringRead | None = Field(
        description="Bounds for gas that does not mix; null: no accident lets any go."
    )
    methods: list[str]
    findings: list[FindingRead]
    cautions: str
