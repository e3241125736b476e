"""The stored answers: assessments -> the bytes that polls, auditors and as-of questions get.

A status is rendered once, in the transaction of its change. Its ``currency`` is left empty there
and spliced in when it is answered, since it changes without the assessment changing.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from datetime import datetime
from typing import Any, Final

import orjson

from service.audit.assessment import (
    METHOD_VERSION,
    Assessment,
    Case,
    Judgement,
    Mark,
    Network,
    Ventilation,
)
from service.audit.findings import counts
from service.changes.assess import Assessed
from service.changes.cautions import CAUTIONS
from service.changes.room_values import plain
from service.clock import text_of
from service.store.history import StoredAssessment
from service.store.memory import StoredStatus
from service.store.records import canonical

CURRENT: Final = "current"
RECALCULATING: Final = "recalculating"
BEHIND: Final = "behind"
FAILED: Final = "failed"

_CURRENCY: Final = b'"currency":"'
JUDGES: Final = "records, not the air"
_WORST_FIELDS: Final = (
    "release",
    "airflow",
    "hazard",
    "gas",
    "oxygen_pct",
    "oxygen_kpa",
    "peak_pct",
    "mean_15min_pct",
    "mean_8h_pct",
    "lower_limit_pct",
    "at_s",
    "to_deficient_s",
    "to_danger_s",
    "to_critical_s",
    "recovered_s",
    "mark",
    "variant",
)
_ABOUT_GAS: Final = ("toxic", "flammable")


def rendered(value: Any) -> bytes:
    """Write an answer as JSON; a number that is not finite is a fault, never a silent null."""
    refuse_not_finite(value)
    return orjson.dumps(value)


def refuse_not_finite(value: Any) -> None:
    """Raise ValueError where a value holds a number that JSON cannot carry."""
    if isinstance(value, float):
        if not math.isfinite(value):
            raise ValueError("An answer holds a number that is not finite.")
    elif isinstance(value, Mapping):
        for inner in value.values():
            refuse_not_finite(inner)
    elif isinstance(value, (list, tuple)):
        for inner in value:
            refuse_not_finite(inner)


def status_bytes(assessed: Assessed, position: int) -> bytes:
    """Render a room's status, its currency left empty."""
    assessment = assessed.assessment
    document = {
        "room_id": assessment.room.id,
        "tag": assessment.room.tag,
        "name": assessed.values.name,
        "site_id": assessment.site.id,
        "position": position,
        "assessed_at": text_of(assessment.at),
        "currency": "",
        "basis": assessment.basis.tag,
        "judges": JUDGES,
        "state": assessed.values.state,
        "standing": assessed.standing,
        "worst_oxygen_pct": assessed.worst_oxygen_pct,
        "worst": _worst(assessment),
        "peaks": _peaks(assessment),
        "highest_oxygen": _highest_oxygen(assessment),
        "ventilation": None if assessment.ventilation is None else _fields(assessment.ventilation),
        "findings": counts(assessed.findings),
        "turns_at": None if assessment.turns_at is None else text_of(assessment.turns_at),
        "method_version": assessment.method_version,
        "failed": assessment.failed,
    }
    return rendered(document)


def _worst(assessment: Assessment) -> dict[str, Any] | None:
    if assessment.deciding is None:
        return None
    return _brief((*assessment.cases, *assessment.incoming)[assessment.deciding])


def _brief(case: Case) -> dict[str, Any]:
    brief: dict[str, Any] = {name: getattr(case, name) for name in _WORST_FIELDS}
    brief["fluid"] = case.fluids[0] if len(case.fluids) == 1 else None
    brief["fluids"] = list(case.fluids)
    brief["vessel_ids"] = [vessel.id for vessel in case.vessels]
    brief["line_ids"] = [line.id for line in case.lines]
    brief["from_room"] = None if case.from_room is None else plain(case.from_room)
    return brief


def _highest_oxygen(assessment: Assessment) -> dict[str, Any] | None:
    cases = (*assessment.cases, *assessment.incoming)
    rich = [case for case in cases if case.hazard == "oxygen-high" and case.counts]
    return _brief(max(rich, key=lambda case: case.oxygen_pct)) if rich else None


def _peaks(assessment: Assessment) -> list[dict[str, Any]]:
    """Tell the worst case that counts of each toxic gas, and of what can burn."""
    worst: dict[str, Case] = {}
    for case in (*assessment.cases, *assessment.incoming):
        if case.counts and case.hazard in _ABOUT_GAS:
            first = worst.setdefault(case.gas, case)
            worst[case.gas] = max(first, case, key=_severity_of_peak)
    return [_peak(worst[gas]) for gas in sorted(worst)]


def _severity_of_peak(case: Case) -> tuple[int, float]:
    return case.mark, max(mark.value_pct / mark.limit_pct for mark in case.marks)


def _peak(case: Case) -> dict[str, Any]:
    # The worst mark crossed; where none is, the one that is nearest.
    crossed = [mark for mark in case.marks if mark.crossed]
    decides = (
        crossed[-1]
        if crossed
        else max(case.marks, key=lambda mark: mark.value_pct / mark.limit_pct)
    )
    return {
        "gas": case.gas,
        "hazard": case.hazard,
        "fluids": list(case.fluids),
        "peak_pct": case.peak_pct,
        "mean_15min_pct": case.mean_15min_pct,
        "mean_8h_pct": case.mean_8h_pct,
        "lower_limit_pct": case.lower_limit_pct,
        "deciding": {
            "measure": decides.measure,
            "value_pct": decides.value_pct,
            "limit_pct": decides.limit_pct,
            "limit": decides.limit,
            "place": decides.place,
            "crossed": decides.crossed,
        },
        "release": case.release,
        "airflow": case.airflow,
    }


def with_currency(body: bytes, currency: str) -> bytes:
    """Splice the currency into a stored status.

    Tags and names before it cannot hold the key: a quotation mark in them is escaped.
    """
    at = body.index(_CURRENCY) + len(_CURRENCY)
    return body[:at] + currency.encode() + body[at:]


def currency_of(
    *,
    position: int,
    wanted: int,
    turns_at: datetime | None,
    method_version: str,
    failed: bool,
    now: datetime,
    running_method: str = METHOD_VERSION,
) -> str:
    """Say how far a stored answer is from what would be computed now."""
    if failed:
        return FAILED
    if position < wanted or method_version != running_method:
        return RECALCULATING
    if turns_at is not None and turns_at <= now:
        return BEHIND
    return CURRENT


def status_etag(position: int, currency: str) -> str:
    """Give the strong entity tag of a status."""
    return f'"{position}-{currency[0]}"'


def stored_status(stored: StoredAssessment) -> StoredStatus:
    """Give what memory keeps of an assessment."""
    return StoredStatus(
        room_id=stored.room_id,
        site_id=stored.site_id,
        position=stored.from_position,
        body=stored.status,
        turns_at=stored.turns_at,
        method_version=stored.method_version,
        failed=stored.failed,
    )


def inputs_document(assessment: Assessment) -> bytes:
    """Write down what an assessment rests on: records in their revisions, and what was assumed."""
    return canonical(
        {
            "read": [plain(reference) for reference in assessment.read],
            "assumed": [
                {
                    "record": plain(assumed.record),
                    "field": assumed.field,
                    "value": assumed.value,
                    "assumed": True,
                    "reason": assumed.reason,
                    "source": assumed.source,
                    "matters": assumed.matters,
                    "decides": assumed.decides,
                }
                for assumed in assessment.assumed
            ],
        }
    )


def results_document(assessment: Assessment) -> bytes:
    """Write down what an assessment found, before it is matched with earlier findings."""
    return canonical(
        {
            "figures": dict(assessment.figures),
            "cases": [case_document(case) for case in assessment.cases],
            "incoming": [case_document(case) for case in assessment.incoming],
            "network": _network_document(assessment.network),
            "layering": assessment.layering,
            "judgements": [_judgement_document(judged) for judged in assessment.judgements],
            "deciding": assessment.deciding,
            "failed": assessment.failed,
            "methods": sorted(
                {slug for case in (*assessment.cases, *assessment.incoming) for slug in case.method}
            ),
        }
    )


def _fields(value: Case | Judgement | Ventilation) -> dict[str, Any]:
    # `asdict` would copy all that is inside, which nobody alters.
    return {name: getattr(value, name) for name in value.__slots__}


def case_document(case: Case) -> dict[str, Any]:
    """Write a case down, with its vessels and marks."""
    document = _fields(case)
    document["vessels"] = [plain(vessel) for vessel in case.vessels]
    document["vessel_ids"] = [vessel.id for vessel in case.vessels]
    document["lines"] = [plain(line) for line in case.lines]
    document["line_ids"] = [line.id for line in case.lines]
    document["marks"] = [_mark_document(mark) for mark in case.marks]
    document["fluid"] = case.fluids[0] if len(case.fluids) == 1 else None
    document["without_margins"] = dict(case.without_margins)
    document["from_room"] = None if case.from_room is None else plain(case.from_room)
    return document


def _network_document(network: Network | None) -> dict[str, Any] | None:
    """Write down where the gas of a room can go, and what was assumed of the way."""
    if network is None:
        return None
    return {
        "rooms": [
            {
                "room": plain(reached.room),
                "steps": reached.steps,
                "through": plain(reached.through),
            }
            for reached in network.rooms
        ],
        "cut": [
            {"through": plain(through), "room": plain(room), "beyond_room_id": beyond}
            for through, room, beyond in network.cut
        ],
        "assumed": [
            {"opening": plain(opening), "fields": list(fields), "exchange_flow_m3_h": flow}
            for opening, fields, flow in network.assumed
        ],
    }


def _mark_document(mark: Mark) -> dict[str, Any]:
    return {name: getattr(mark, name) for name in mark.__slots__}


def _judgement_document(judged: Judgement) -> dict[str, Any]:
    document = _fields(judged)
    document["subject"] = plain(judged.subject)
    return document


def assessment_answer(
    stored: StoredAssessment, findings: Iterable[Mapping[str, Any]], currency: str
) -> bytes:
    """Render everything that is known of a room: its status, and what it rests on.

    Made from stored bytes alone, so that the same position is answered alike for ever.
    """
    status = orjson.loads(with_currency(stored.status, currency))
    inputs, results = orjson.loads(stored.inputs), orjson.loads(stored.results)
    status["finding_counts"] = status.pop("findings")
    return rendered(
        {
            **status,
            "basis_id": stored.basis_id,
            "basis_revision": stored.basis_revision,
            "method_version": stored.method_version,
            "cause": stored.cause,
            "inputs": inputs["read"],
            "assumed": inputs["assumed"],
            "figures": results["figures"],
            "cases": results["cases"],
            "incoming": results.get("incoming", []),
            "network": results.get("network"),
            "layering": results.get("layering"),
            "methods": results["methods"],
            "findings": [finding_answer(finding) for finding in findings],
            "cautions": CAUTIONS,
        }
    )


def finding_answer(row: Mapping[str, Any]) -> dict[str, Any]:
    """Render one finding."""
    answer = {
        name: text_of(value) if isinstance(value, datetime) else value
        for name, value in row.items()
        if name not in ("subject_kind", "subject_id", "subject_tag")
    }
    answer["subject"] = {
        "kind": row["subject_kind"],
        "id": row["subject_id"],
        "tag": row["subject_tag"],
    }
    return answer


def findings_answer(rows: Sequence[Mapping[str, Any]]) -> list[dict[str, Any]]:
    """Render a list of findings."""
    return [finding_answer(row) for row in rows]
