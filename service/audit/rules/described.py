"""What each rule looks for, in a sentence: what an auditor reads before any finding."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from service.audit.assessment import SEVERITIES
from service.audit.rules.case_rules import CaseRule
from service.audit.rules.neighbours import NeighbourRule
from service.audit.rules.registry import RULES
from service.audit.rules.rule import Rule, family

BY_TABLE: Final = "by the severity table of the basis"
GRADED: Final = "by how far it goes"

_RELEASES: Final[Mapping[str, str]] = {
    "boil-off": "What evaporates, is used and purges",
    "filling": "What is lost while vessels are filled",
    "overfill": "Automatic filling that does not stop",
    "largest-vessel": "The largest vessel or manifold group, let go at once,",
    "all-vessels": "Everything in the room, let go at once,",
    "spill": "The largest vessel that can tip, or a box of dry ice, emptied on the floor,",
    "vacuum-loss": "A vessel that loses its insulating vacuum",
    "line-break": "A supply line or withdrawal hose that breaks, or is left open,",
    "quench": "A magnet that quenches, with its pipe as recorded or failed,",
}
_HAZARDS: Final[Mapping[str, str]] = {
    "oxygen": "brings oxygen down beyond a mark",
    "enrichment": "brings oxygen up beyond a mark",
    "toxic": "brings a toxic gas beyond a limit, by its means or its peak",
    "flammable": "brings flammable gas beyond a share of its lower limit",
}
_RECORDS: Final[Mapping[str, str]] = {
    "ventilation/flow-overdue": "A running unit's flow was never measured, or not in date.",
    "ventilation/flow-not-proved": "Nothing proves that a unit which a room relies on moves air.",
    "ventilation/stopped": "A unit stands still: stopped, failed, or in a planned outage.",
    "ventilation/below-design": "A unit moves clearly less than it was designed for.",
    "ventilation/no-outdoor-air": "A unit brings no outdoor air: it only recirculates.",
    "ventilation/none": "A room goes beyond a mark, and no unit serves it.",
    "ventilation/cannot-restore": "The outdoor air cannot bring the room back in the time allowed.",
    "detectors/calibration-overdue": "A detector was never calibrated, or not in date.",
    "detectors/silenced": "A detector's alarm has been silenced for longer than allowed.",
    "detectors/fault": "A detector reports a fault, or is in a planned outage.",
    "detectors/misplaced": "A detector hangs where the gas of the room is not met first.",
    "detectors/alarm-set-late": "An oxygen detector warns only beyond the danger mark.",
    "detectors/zeroed-elsewhere": "A cell was zeroed at another pressure, and reads wrong here.",
    "detectors/not-warning-outside": "A detector is neither heard nor shown outside the room.",
    "detectors/not-monitored": "Nobody is told of a detector's alarm where nobody usually is.",
    "detectors/missing": "A room goes beyond a mark of oxygen without an oxygen detector.",
    "detectors/carbon-dioxide-missing": "A room holds carbon dioxide and has no detector of it.",
    "detectors/nitrous-oxide-missing": "A room holds nitrous oxide and has no detector of it.",
    "detectors/flammable-missing": "A room holds flammable gas and has no detector of it.",
    "detectors/hydrogen-missing": "A room holds liquid hydrogen and has no detector of it.",
    "vessels/neck-sealed": "The neck of a vessel of cold liquid is sealed.",
    "vessels/relief-missing": "A vessel that needs a relief device has none, or none is recorded.",
    "vessels/relief-inspection-overdue": "The inspection of a relief device is overdue.",
    "vessels/overfilled": "A vessel holds more than its capacity.",
    "vessels/ullage": "The capacity leaves too little space for gas above the liquid.",
    "vessels/evaporation-above-rated": "A vessel loses clearly more than its maker rates.",
    "vessels/fill-without-high-level": "Automatic filling has no independent high level.",
    "vessels/shut-off-untested": "The independent shut-off was never tested, or not in date.",
    "layering/pit": "Gas can fill a pit that has neither extract at its floor nor a detector.",
    "layering/floor": "Gas that all stayed low would pass a mark that the mixed figure does not.",
    "layering/ceiling": "Gas that all rose would pass a mark that the mixed figure does not.",
    "vessels/quench-not-recorded": "What happens when a magnet quenches is not recorded.",
    "vessels/quench-pipe-missing": "No quench pipe of a magnet is recorded.",
    "vessels/quench-pipe-blocked": "The outlet of a quench pipe is recorded as not clear.",
    "vessels/quench-outlet-unknown": "Whether a quench pipe's outlet is clear is not recorded.",
    "vessels/quench-pipe-inspection-overdue": "A quench pipe was not inspected in date.",
    "vessels/quench-duration-missing": "How long a quench lasts is not recorded.",
    "supply-lines/shut-off-missing": "No shut-off of a supply line is recorded.",
    "supply-lines/shut-off-sees-no-break": "A line's shut-off is closed by what sees no break.",
    "supply-lines/shut-off-trigger": "The detector that shuts a line does not hold in the room.",
    "supply-lines/shut-off-fails-open": "A line's shut-off may stay open when its power fails.",
    "supply-lines/shut-off-untested": "A line's shut-off was never tested, or not in date.",
    "supply-lines/unrestricted": "Nothing limits what comes out of a broken line.",
    "controls/missing": "A room that is grave without safeguards lacks administrative measures.",
    "controls/overdue": "An administrative measure was never checked, or not in date.",
    "records/cannot-compute": "The numbers recorded of a room cannot be.",
    "records/hazard-not-computed": "A site's own gas has a hazard for which no limit is at hand.",
    "records/count-stale": "What a vessel holds was counted too long ago.",
    "records/assumed": "Something that matters was not recorded, and a cautious value was taken.",
    "records/assumed-deciding": "The standing rests on something that was not recorded.",
    "records/room-implausible": "Numbers of a room can be, but hardly are.",
    "records/vessel-implausible": "Numbers of a vessel can be, but hardly are.",
    "records/unit-implausible": "Numbers of a ventilation unit can be, but hardly are.",
}


@dataclass(frozen=True, slots=True)
class Described:
    """A rule in words; one that is judged for several gases names them all."""

    slug: str
    family: str
    looks_for: str
    subject: str
    worse_is: str
    gases: tuple[str, ...]
    severity: str
    method: str
    sources: tuple[str, ...]


def described_rules() -> tuple[Described, ...]:
    """Describe every rule, each slug once."""
    by_slug: dict[str, list[Rule]] = {}
    for rule in RULES:
        by_slug.setdefault(rule.slug, []).append(rule)
    return tuple(_described(rules) for rules in by_slug.values())


def _described(rules: list[Rule]) -> Described:
    first = rules[0]
    return Described(
        slug=first.slug,
        family=family(first),
        looks_for=_looks_for(first),
        subject=str(first.subject),
        worse_is=str(first.worse_is),
        gases=tuple(rule.gas for rule in rules if rule.gas is not None),
        severity=_severity(first),
        method=first.method,
        sources=tuple(dict.fromkeys(rule.source for rule in rules)),
    )


def _looks_for(rule: Rule) -> str:
    if isinstance(rule, NeighbourRule):
        told = f"{_RELEASES[rule.case.release]} {_HAZARDS[family(rule.case)]}"
        return f"In another room: {told[0].lower()}{told[1:]} in this one."
    if isinstance(rule, CaseRule):
        return f"{_RELEASES[rule.release]} {_HAZARDS[family(rule)]}."
    return _RECORDS[rule.slug]


def _severity(rule: Rule) -> str:
    if isinstance(rule, CaseRule | NeighbourRule):
        return BY_TABLE
    consequence = getattr(rule, "consequence", None)
    return SEVERITIES[consequence] if isinstance(consequence, int) else GRADED
