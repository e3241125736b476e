"""Rules that span the fields of a record, or a record and those it names."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from datetime import date, datetime, timedelta
from itertools import pairwise
from typing import Any, Final

from service.audit.bases import basis_problems, effective
from service.changes.room_values import pressure_liquid_density
from service.clock import moment_of
from service.errors import FieldError
from service.store.records import Record
from service.store.tables.ventilation_units import MANUAL

Records = Mapping[str, Record]

#: Above this the figure is taken for a slip, not for a vessel filled too full.
MOST_CONTENTS: Final = 1.2
#: What a free area may be above width times height, by rounding of the three.
_ROUNDED: Final = 1.01
#: Kinds that keep as a liquid what is a solid at the pressure of a room.
_UNDER_PRESSURE: Final = ("pressurised-dewar", "tank")
#: A detector is measured to its middle, a room to its ceiling as somebody held the tape.
_HEIGHT_TOLERANCE: Final = 0.05  # [m]
MOST_OUTAGES: Final = 100
#: Clocks and time zones differ by less than that; what lies further ahead has not been done.
_AHEAD: Final = timedelta(days=1)
#: Days and moments at which something was done.
_DONE: Final[Mapping[str, tuple[tuple[str, ...], ...]]] = {
    "ventilation-unit": (("measured_on",), ("mixing_tested_on",)),
    "vessel": (
        ("counted_at",),
        ("filling", "tested_on"),
        ("relief", "inspected_on"),
        ("quench", "pipe", "inspected_on"),
    ),
    "supply-line": (("shutoff", "tested_on"),),
    "detector": (("calibrated_on",), ("silenced_since",)),
    "control": (("checked_on",),),
}


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


def record_problems(record: Record, records: Records, moment: datetime) -> Iterator[FieldError]:
    """Name what cannot stand in a record as it would be after a change at a moment."""
    for rule in _RULES.get(record.kind, ()):
        yield from rule(record, records)
    for path in _DONE.get(record.kind, ()):
        yield from _not_yet_done(record, path, moment)


def _not_yet_done(record: Record, path: Sequence[str], moment: datetime) -> Iterator[FieldError]:
    value: Any = record.fields
    for name in path:
        value = (value or {}).get(name)
    if value is None:
        return
    latest = moment + _AHEAD
    is_day = path[-1].endswith("_on")
    if date.fromisoformat(value) > latest.date() if is_day else moment_of(value) > latest:
        yield FieldError(
            "/" + "/".join(path), "in-the-future", "At most a day ahead: it is to be done first."
        )


def _outages(record: Record, _records: Records) -> Iterator[FieldError]:
    outages = record.fields["outages"] or ()
    if len(outages) > MOST_OUTAGES:
        yield FieldError("/outages", "too-many", f"At most {MOST_OUTAGES} outages.")
    times = [(moment_of(each["from"]), moment_of(each["to"])) for each in outages]
    for number, (begins, ends) in enumerate(times):
        if ends <= begins:
            yield FieldError(f"/outages/{number}/to", "not-after", "It ends after it begins.")
    ordered = sorted((begins, ends, number) for number, (begins, ends) in enumerate(times))
    for (_, ends, _), (begins, _, number) in pairwise(ordered):
        if begins < ends:
            yield FieldError(
                f"/outages/{number}", "overlaps", "Outages do not overlap; make one of the two."
            )


def _room_volume(record: Record, _records: Records) -> Iterator[FieldError]:
    if record.fields["volume_m3"] is None:
        yield FieldError(
            "/volume_m3",
            "missing",
            "A room needs its volume: send 'volume_m3' (gross), or 'floor_area_m2' and 'height_m'.",
        )


def _room_pit(record: Record, _records: Records) -> Iterator[FieldError]:
    pit, floor = record.fields["pit"], record.fields["floor_area_m2"]
    if pit is None:
        return
    for name in ("area_m2", "depth_m"):
        if pit.get(name) is None:
            yield FieldError(f"/pit/{name}", "missing", "A pit needs its area and its depth.")
    if floor is not None and (pit.get("area_m2") or 0.0) > floor:
        yield FieldError(
            "/pit/area_m2", "too-large", f"At most the floor area of the room, here {floor:g}."
        )


def _room_height(record: Record, records: Records) -> Iterator[FieldError]:
    for other in records.values():
        stands_here = other.kind == "detector" and other.fields["room_id"] == record.id
        if stands_here and _above_ceiling(other, record):
            yield FieldError(
                "/height_m",
                "too-small",
                f"Detector {other.fields['tag']} is recorded above that; move it first.",
            )


def _above_ceiling(detector: Record, room: Record) -> bool:
    height, ceiling = detector.fields["height_m"], room.fields["height_m"]
    return height is not None and ceiling is not None and height > ceiling + _HEIGHT_TOLERANCE


def _opening_rooms(record: Record, _records: Records) -> Iterator[FieldError]:
    fields = record.fields
    if fields["room_id"] is None:
        yield FieldError(
            "/room_id", "missing", "An opening has a room, and another or the outdoors."
        )
    elif fields["room_id"] == fields["other_room_id"]:
        yield FieldError("/other_room_id", "the-same", "An opening is between two rooms.")


def _opening_size(record: Record, _records: Records) -> Iterator[FieldError]:
    fields = record.fields
    width, height, area = fields["width_m"], fields["height_m"], fields["area_m2"]
    if area is None:
        for name, other in (("width_m", height), ("height_m", width)):
            if fields[name] is None and other is not None:
                yield FieldError(
                    f"/{name}", "missing", "Send 'width_m' and 'height_m', or 'area_m2'."
                )
    elif width is not None and height is not None and area > _ROUNDED * width * height:
        yield FieldError(
            "/area_m2", "too-large", f"At most width times height, here {width * height:g}."
        )


def _control_subject(record: Record, _records: Records) -> Iterator[FieldError]:
    fields = record.fields
    if (fields["room_id"] is None) == (fields["vessel_id"] is None):
        yield FieldError(
            "/room_id", "one-subject", "A control has a room or a vessel, one of them."
        )


def _control_area(record: Record, _records: Records) -> Iterator[FieldError]:
    is_bund = record.fields["kind"] == "bund"
    if is_bund and record.fields["area_m2"] is None:
        yield FieldError("/area_m2", "missing", "A bund needs the area of the floor inside of it.")
    if not is_bund and record.fields["area_m2"] is not None:
        yield FieldError("/area_m2", "not-with-kind", "Only a bund has an area.")


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


def _unit_boost(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    flow, trigger = fields["boost_flow_m3_h"], fields["boost_trigger"]
    if flow is None and trigger is not None:
        yield FieldError("/boost_flow_m3_h", "missing", "A trigger needs the flow once boosted.")
    if trigger is None and flow is not None:
        yield FieldError(
            "/boost_trigger", "missing", "Say what boosts it: 'manual', or a detector."
        )
    detector = None if trigger in (None, MANUAL) else records.get(trigger)
    if detector is not None and not _serves(record, detector):
        yield FieldError(
            "/boost_trigger", "not-served", "The detector stands in none of the rooms served."
        )


def _serves(unit: Record, detector: Record) -> bool:
    return detector.fields["room_id"] in {each["room_id"] for each in unit.fields["serves"]}


def _detector_shuts(record: Record, records: Records) -> Iterator[FieldError]:
    for line in records.values():
        shuts = line.kind == "supply-line" and (line.fields["shutoff"] or {}).get("trigger")
        rooms = {each["room_id"] for each in line.fields["rooms"]} if shuts else set()
        if shuts == record.id and record.fields["room_id"] not in rooms:
            yield FieldError(
                "/room_id",
                "not-run-through",
                f"It shuts supply line {line.fields['tag']}, which does not run through that room.",
            )


def _detector_boosts(record: Record, records: Records) -> Iterator[FieldError]:
    for unit in records.values():
        boosted = unit.kind == "ventilation-unit" and unit.fields["boost_trigger"] == record.id
        if boosted and not _serves(unit, record):
            yield FieldError(
                "/room_id",
                "not-served",
                f"It boosts ventilation unit {unit.fields['tag']}, which does not serve that room.",
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
    if fields["kind"] == "cylinder" and used == "l":
        yield from _cylinder_by_volume(fields)
    elif contents is not None and contents > MOST_CONTENTS * capacity:
        yield FieldError(
            f"/contents_{used}",
            "too-large",
            f"At most 120 % of the capacity, here {MOST_CONTENTS * capacity:g}.",
        )
    yield from _vessel_kind_of_amount(record, records)


def _cylinder_by_volume(fields: Mapping[str, Any]) -> Iterator[FieldError]:
    pressure = fields["working_pressure_kpa"]
    if pressure is None:
        yield FieldError(
            "/working_pressure_kpa",
            "missing",
            "A cylinder kept by its water volume needs the pressure it is charged to.",
        )
    elif pressure <= 0.0:
        yield FieldError(
            "/working_pressure_kpa", "too-small", "A cylinder is charged above the atmosphere."
        )
    if fields["contents_l"] is not None:
        yield FieldError(
            "/contents_l",
            "not-with-kind",
            "A cylinder kept by volume is taken as charged; when it is used up, its state is "
            "'empty'.",
        )


def _vessel_kind_of_amount(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    fluid = records.get(fields["fluid_id"] or "")
    by_mass = fields["capacity_kg"] is not None
    if fields["kind"] == "dry-ice-box" and not by_mass:
        yield FieldError("/capacity_kg", "missing", "A dry-ice-box is kept in kilograms.")
    if fields["kind"] not in _WITHOUT_LIQUID and by_mass:
        yield FieldError(
            "/capacity_l", "missing", f"A {fields['kind']} is kept in litres of liquid."
        )
    if fluid is None:
        yield FieldError("/fluid", "missing", "A vessel needs its fluid.")
        return
    if fields["kind"] == "dry-ice-box" and not fluid.fields["solid"]:
        yield FieldError("/kind", "not-with-fluid", "A dry-ice box holds a solid.")
    if fluid.fields["solid"] and fields["kind"] not in _WITHOUT_LIQUID:
        under_pressure = pressure_liquid_density(fluid) is not None
        if not (under_pressure and fields["kind"] in _UNDER_PRESSURE):
            yield FieldError(
                "/kind",
                "not-with-fluid",
                "A solid is kept in a dry-ice box; liquid carbon dioxide in a cylinder, a "
                "pressurised-dewar or a tank.",
            )


def _vessel_evaporation(record: Record, _records: Records) -> Iterator[FieldError]:
    fields = record.fields
    if fields["measured_loss_kg_day"] is not None and fields["capacity_kg"] is None:
        by_volume = fields["kind"] in _WITHOUT_LIQUID
        yield FieldError(
            "/measured_loss_kg_day",
            "other-amount",
            "Only what is kept in kilograms has a loss in kilograms."
            if by_volume
            else "Its capacity is kept in litres; send 'measured_evaporation_l_day'.",
        )
    for name in ("rated_evaporation_l_day", "measured_evaporation_l_day", "use_l_day"):
        if fields[name] is not None and fields["kind"] in _WITHOUT_LIQUID:
            yield FieldError(
                f"/{name}", "other-amount", f"A {fields['kind']} holds no liquid that is counted."
            )


def _vessel_gross(record: Record, _records: Records) -> Iterator[FieldError]:
    gross, net = record.fields["gross_l"], record.fields["capacity_l"]
    if gross is not None and net is not None and gross < net:
        yield FieldError("/gross_l", "too-small", f"At least the net capacity, here {net:g}.")


def _vessel_parts(record: Record, _records: Records) -> Iterator[FieldError]:
    fields = record.fields
    kind = fields["kind"]
    if fields["quench"] is not None and kind != "magnet":
        yield FieldError("/quench", "not-with-kind", "Only a magnet quenches.")
    if fields["filling"] is not None and kind in _WITHOUT_LIQUID:
        yield FieldError("/filling", "not-with-kind", f"A {kind} is not filled in the room.")
    if fields["neck_plug"] is not None and kind in _WITHOUT_LIQUID:
        yield FieldError("/neck_plug", "not-with-kind", f"A {kind} has none.")


def _vessel_lines(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    line_id = (fields["filling"] or {}).get("supply_line_id")
    line = records.get(line_id or "")
    if line is not None and line.fields["fluid_id"] != fields["fluid_id"]:
        yield FieldError(
            "/filling/supply_line_id", "other-fluid", f"The line brings {line.fields['fluid']}."
        )
    if line is not None and line.fields["phase"] != "liquid":
        yield FieldError("/filling/supply_line_id", "not-liquid", "The line brings gas.")
    for other in records.values():
        fed = other.kind == "supply-line" and other.fields["source_vessel_id"] == record.id
        if fed and other.fields["fluid_id"] != fields["fluid_id"]:
            yield FieldError(
                "/fluid",
                "other-fluid",
                f"It feeds supply line {other.fields['tag']}, of {other.fields['fluid']}.",
            )


def _line_rooms(record: Record, _records: Records) -> Iterator[FieldError]:
    rooms = [each["room_id"] for each in record.fields["rooms"]]
    if not rooms:
        yield FieldError("/rooms", "missing", "Name the rooms that the line runs through.")
    if len(set(rooms)) < len(rooms):
        yield FieldError("/rooms", "named-twice", "Name each room once.")


def _line_fluids(record: Record, records: Records) -> Iterator[FieldError]:
    fields = record.fields
    if fields["fluid_id"] is None:
        yield FieldError("/fluid", "missing", "A line needs its fluid.")
        return
    source = records.get(fields["source_vessel_id"] or "")
    if source is not None and source.fields["fluid_id"] != fields["fluid_id"]:
        yield FieldError(
            "/source_vessel_id", "other-fluid", f"The vessel holds {source.fields['fluid']}."
        )
    if source is not None and source.fields["kind"] == "dry-ice-box":
        yield FieldError("/source_vessel_id", "not-with-kind", "No line is fed by a box of ice.")
    for vessel in records.values():
        filled = vessel.kind == "vessel" and record.id == (vessel.fields["filling"] or {}).get(
            "supply_line_id"
        )
        if filled and vessel.fields["fluid_id"] != fields["fluid_id"]:
            yield FieldError(
                "/fluid",
                "other-fluid",
                f"It fills vessel {vessel.fields['tag']}, of {vessel.fields['fluid']}.",
            )


def _line_trigger(record: Record, records: Records) -> Iterator[FieldError]:
    shutoff = record.fields["shutoff"] or {}
    detector = records.get(shutoff.get("trigger") or "")
    rooms = {each["room_id"] for each in record.fields["rooms"]}
    if detector is not None and detector.fields["room_id"] not in rooms:
        yield FieldError(
            "/shutoff/trigger", "not-run-through", "The detector stands in none of its rooms."
        )


def _detector_room(record: Record, _records: Records) -> Iterator[FieldError]:
    if record.fields["room_id"] is None:
        yield FieldError("/room_id", "missing", "A detector stands in a room.")


def _detector_height(record: Record, records: Records) -> Iterator[FieldError]:
    room = records.get(record.fields["room_id"] or "")
    if room is not None and _above_ceiling(record, room):
        yield FieldError(
            "/height_m",
            "too-large",
            f"At most the height of its room, here {room.fields['height_m']:g}.",
        )


def _fluid_limit(record: Record, _records: Records) -> Iterator[FieldError]:
    burns, limit = "flammable" in record.fields["hazards"], record.fields["lfl_pct"]
    if burns and limit is None:
        yield FieldError("/lfl_pct", "missing", "A flammable fluid needs its lower limit.")
    if not burns and limit is not None:
        yield FieldError("/lfl_pct", "not-with-hazards", "Only a flammable fluid has such a limit.")


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


#: Kinds of vessel that hold no liquid at its boiling point.
_WITHOUT_LIQUID: Final = frozenset({"dry-ice-box", "cylinder"})
_RULES: Final[Mapping[str, tuple[Callable[[Record, Records], Iterator[FieldError]], ...]]] = {
    "site": (_site_zone,),
    "room": (_room_volume, _room_pit, _room_height),
    "opening": (_opening_rooms, _opening_size),
    "ventilation-unit": (_unit_shares, _unit_measurement, _unit_boost, _outages),
    "vessel": (
        _vessel_amounts,
        _vessel_evaporation,
        _vessel_gross,
        _vessel_parts,
        _vessel_lines,
    ),
    "supply-line": (_line_rooms, _line_fluids, _line_trigger),
    "detector": (_detector_room, _detector_height, _detector_boosts, _detector_shuts, _outages),
    "control": (_control_subject, _control_area),
    "basis": (_basis_values,),
    "fluid": (_fluid_limit,),
}
