"""What an audit answers: one assessment a room, of plain values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from service.audit.inputs import Reference

# Goes up with every change that can alter a number, a severity or a statement.
METHOD_VERSION: Final = "3"

SEVERITIES: Final = ("observation", "minor", "major", "critical")
STANDINGS: Final = ("in-order", "attention", "action", "stop")


@dataclass(frozen=True, slots=True)
class Assumed:
    """A missing input, what was taken instead, and why."""

    record: Reference
    field: str  # JSON name of the record's field
    value: float | str | bool  # in the unit of the field's name
    reason: str
    source: str
    matters: bool  # raises an observation
    decides: bool = False  # the standing rests on it


@dataclass(frozen=True, slots=True)
class Mark:
    """A mark of a case, what it is set against, and whether the case is beyond it."""

    place: int  # 1 first, 2 second, 3 third
    measure: str  # oxygen, peak, mean-15min, mean-8h, lower-limit
    limit: str  # the value of the basis that sets it
    limit_pct: float
    value_pct: float
    crossed: bool
    at_s: float | None


@dataclass(frozen=True, slots=True)
class Case:
    """One release of one room under one airflow, for one hazard. None: never, or no such number."""

    release: str
    airflow: str
    hazard: str  # oxygen-low, oxygen-high, toxic, flammable
    gas: str  # the gas judged
    counts: bool  # towards the standing
    fluids: tuple[str, ...]
    vessels: tuple[Reference, ...]
    oxygen_pct: float  # lowest, or highest for oxygen-high
    oxygen_kpa: float
    peak_pct: float | None  # of the gas itself; None where oxygen is judged
    mean_15min_pct: float | None
    mean_8h_pct: float | None
    lower_limit_pct: float | None  # share of the lower flammable limit
    at_s: float
    to_deficient_s: float | None  # of oxygen that falls
    to_danger_s: float | None
    to_critical_s: float | None
    marks: tuple[Mark, ...]  # first, second and third, as far as there are any
    recovered_s: float | None
    gas_m3: float  # released at room conditions over the case
    required_m3_h: float | None
    required_reason: str | None  # why there is no such flow
    restore_m3_h: float | None
    alarm_s: float | None
    margin_s: float | None
    mark: int  # 0 none, 1 first, 2 second, 3 third
    without_margins: Mapping[str, float | None]
    method: tuple[str, ...]
    from_room: Reference | None = None  # None: of the room itself
    variant: str | None = None  # expected, pipe-failed, jacket-open; None: it has but one form
    lines: tuple[Reference, ...] = ()  # that are broken


@dataclass(frozen=True, slots=True)
class Reached:
    """A room of a network."""

    room: Reference
    steps: int  # from the source
    through: Reference  # the opening or the unit that its air comes by


@dataclass(frozen=True, slots=True)
class Network:
    """The rooms that a room's gas can reach, and where they end."""

    rooms: tuple[Reached, ...]
    cut: tuple[tuple[Reference, Reference, str], ...]  # by what, from which room, the room beyond
    assumed: tuple[tuple[Reference, tuple[str, ...], float], ...]  # opening, fields, m3/h each way


@dataclass(frozen=True, slots=True)
class Judgement:
    """A rule broken by a subject in a room, before it is matched with earlier findings."""

    rule: str  # slug
    family: str
    subject: Reference
    gas: str | None  # the gas judged: oxygen, carbon-dioxide, …
    severity: str
    measure: float | None
    limit: float | None
    worse_is: str  # lower, higher
    statement: str
    evidence: Mapping[str, Any]  # numbers, cases, records and revisions
    remedy: str
    method: str
    source: str


@dataclass(frozen=True, slots=True)
class Ventilation:
    """The air of a room, as a fan moves it and as it counts."""

    outdoor_air_m3_h: float
    credited_m3_h: float
    air_changes_per_h: float
    sustained_release_m3_h: float
    required_m3_h: float | None
    shortfall_m3_h: float | None
    restore_m3_h: float | None
    deciding_case: str | None


@dataclass(frozen=True, slots=True)
class Assessment:
    """Everything one room's records say at a moment."""

    room: Reference
    site: Reference
    basis: Reference
    at: datetime
    method_version: str
    failed: str | None  # the sentence that says why it cannot be computed
    read: tuple[Reference, ...]  # records and revisions that it rests on
    assumed: tuple[Assumed, ...]
    cases: tuple[Case, ...]
    incoming: tuple[Case, ...]  # of other rooms, as their gas comes here
    deciding: int | None  # index in cases, and then incoming, of the worst, by judging.md 5
    network: Network | None  # where the gas of the room itself can go; None: nowhere
    layering: Mapping[str, Any] | None  # a bound; None: no accident lets gas go
    ventilation: Ventilation | None
    figures: Mapping[
        str, float | str | None
    ]  # pressure_kpa_abs, net_volume_m3, marks, contents read both ways, …
    judgements: tuple[Judgement, ...]
    turns_at: datetime | None
