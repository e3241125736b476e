"""Rules that span the fields of a record, or a record and those it names."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from typing import Any, Final

from service.audit.bases import basis_problems, effective
from service.errors import FieldError
from service.store.records import Record

Records = Mapping[str, Record]

#: Above this the figure is taken for a slip, not for a vessel filled too full.
MOST_CONTENTS: Final = 1.2


def derived_fields(kind: str, fields: dict[str, Any], sent: Mapping[str, Any]) -> dict[str, Any]:
    """Fill in what follows from other fields: a room's volume from floor area and height."""
    if kind != "room":
        return fields
    if sent.get("volume_m3") is not None:
        return fields | {"volume_derived": False}
    measures_sent = not {"floor_area_m2", "height_m"}.isdisjoint(sent)
    asked_for = "volume_m3" in sent or fields["volume_m3"] is None
    if not asked_for and not (measures_sent and fields["volume_derived"]):
        return fields
    area, height = fields["floor_area_m2"], fields["height_m"]
    if area is None or height is None:
        return fields | {"volume_m3": None, "volume_derived": None}
    return fields | {"volume_m3": area * height, "volume_derived": True}


def record_problems(record: Record, records: Records) -> Iterator[FieldError]:
    """Name what cannot stand in a record as it would be after a change."""
    for rule in _RULES.get(record.kind, ()):
        yield from rule(record, records)


def _room_volume(record: Record, _records: Records) -> Iterator[FieldError]:
    if record.fields["volume_m3"] is None:
        yield FieldError(
            "/volume_m3",
            "missing",
            "A room needs its volume: send 'volume_m3' (gross), or 'floor_area_m2' and 'height_m'.",
        )


def _site_zone(record: Record, _records: Records) -> Iterator[FieldError]:
    if record.fields["basis_id"] is None:
        yield FieldError("/basis", "missing", "A site is judged by a basis, such as 'baseline'.")


def _unit_shares(record: Record, _records: Records) -> Iterator[FieldError]:
    serves = record.fields["serves"]
    if sum(served["share"] for served in serves) > 1.0 + 1e-9:
        yield FieldError("/serves", "too-large", "The shares of a unit come to at most 1 together.")
    if len({served["room_id"] for served in serves}) < len(serves):
        yield FieldError("/serves", "named-twice", "Name each room once.")


def _unit_measurement(record: Record, _records: Records) -> Iterator[FieldError]:
    if record.fields["measured_on"] is not None and record.fields["measured_flow_m3_h"] is None:
        yield FieldError(
            "/measured_flow_m3_h", "missing", "A day of measurement needs the flow measured."
        )


def _vessel_amounts(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    litres, kilograms = fields["capacity_l"], fields["capacity_kg"]
    if (litres is None) == (kilograms is None):
        yield FieldError(
            "/capacity_l", "missing", "Send 'capacity_l' or 'capacity_kg', one of them."
        )
        return
    used, other = ("l", "kg") if kilograms is None else ("kg", "l")
    if fields[f"contents_{other}"] is not None:
        yield FieldError(
            f"/contents_{other}",
            "other-amount",
            f"Its capacity is kept as 'capacity_{used}'; send 'contents_{used}'.",
        )
    capacity, contents = fields[f"capacity_{used}"], fields[f"contents_{used}"]
    if contents is not None and contents > MOST_CONTENTS * capacity:
        yield FieldError(
            f"/contents_{used}",
            "too-large",
            f"At most 120 % of the capacity, here {MOST_CONTENTS * capacity:g}.",
        )
    yield from _vessel_kind_of_amount(record, records)


def _vessel_kind_of_amount(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    fluid = records.get(fields["fluid_id"] or "")
    by_mass = fields["capacity_kg"] is not None
    if fields["kind"] in ("dry-ice-box", "cylinder") and not by_mass:
        yield FieldError("/capacity_kg", "missing", f"A {fields['kind']} is kept in kilograms.")
    if fields["kind"] not in ("dry-ice-box", "cylinder") and by_mass:
        yield FieldError(
            "/capacity_l", "missing", f"A {fields['kind']} is kept in litres of liquid."
        )
    if fluid is None:
        yield FieldError("/fluid", "missing", "A vessel needs its fluid.")
        return
    if fields["kind"] == "dry-ice-box" and not fluid.fields["solid"]:
        yield FieldError("/kind", "not-with-fluid", "A dry-ice box holds a solid.")
    if fluid.fields["solid"] and fields["kind"] not in ("dry-ice-box", "cylinder"):
        yield FieldError("/kind", "not-with-fluid", "A solid is kept in a dry-ice box.")


def _vessel_evaporation(record: Record, _records: Records) -> Iterator[FieldError]:
    fields = record.fields
    if fields["measured_loss_kg_day"] is not None and fields["capacity_kg"] is None:
        yield FieldError(
            "/measured_loss_kg_day",
            "other-amount",
            "Its capacity is kept in litres; send 'measured_evaporation_l_day'.",
        )
    for name in ("rated_evaporation_l_day", "measured_evaporation_l_day", "use_l_day"):
        if fields[name] is not None and fields["capacity_l"] is None:
            yield FieldError(
                f"/{name}", "other-amount", "Its capacity is kept in kilograms, not litres."
            )


def _detector_room(record: Record, _records: Records) -> Iterator[FieldError]:
    if record.fields["room_id"] is None:
        yield FieldError("/room_id", "missing", "A detector stands in a room.")


def _basis_values(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    origin = records.get(fields["derived_from_id"] or "")
    if origin is None or origin.site_id is not None:
        yield FieldError(
            "/derived_from",
            "missing",
            "A basis is copied from one that comes with the service: baseline, us or uk-eu.",
        )
        return
    own = fields["values"] or {}
    for name, message in basis_problems(effective(origin.fields["values"], own)):
        yield FieldError(f"/values/{name}", "not-allowed", message)
    for name in sorted(own.keys() - (fields["sources"] or {}).keys()):
        yield FieldError(
            f"/sources/{name}", "missing", "Say where this value comes from or why it differs."
        )


_RULES: Final[Mapping[str, tuple[Callable[[Record, Records], Iterator[FieldError]], ...]]] = {
    "site": (_site_zone,),
    "room": (_room_volume,),
    "ventilation-unit": (_unit_shares, _unit_measurement),
    "vessel": (_vessel_amounts, _vessel_evaporation),
    "detector": (_detector_room,),
    "basis": (_basis_values,),
}
