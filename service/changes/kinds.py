"""What the change line must know of each kind of record; all else about kinds is generic.

A later record is a row here, beside its table, its three schemas and its line of routes.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, Final

from service.store.records import Record
from service.store.rows import field_names

Fields = Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Link:
    """A reference from one record to another, by id in ``field`` or by tag in ``said_as``."""

    field: str
    said_as: str
    kind: str
    #: Read by people: the tag is kept beside the id, and the tag's field takes an id too.
    keeps_tag: bool = False


def _no_rooms(_fields: Fields) -> frozenset[str]:
    return frozenset()


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of record."""

    name: str
    links: tuple[Link, ...] = ()
    defaults: Fields = field(default_factory=dict)
    #: Fields that say what a record is: other records and old assessments are read by them.
    fixed: frozenset[str] = frozenset()
    #: The rooms that a record's fields reach directly.
    rooms: Callable[[Fields], frozenset[str]] = _no_rooms
    #: The field with the vessel through which a record reaches the room where that stands.
    room_by_vessel: str | None = None
    #: Fields that may hold the id of another record, and are no link.
    may_name: frozenset[str] = frozenset()
    #: Ids of other records, or words in their place, that stand inside a field.
    names: Callable[[Fields], frozenset[str]] = _no_rooms
    #: Fields by which a record reaches every room of its site, of its sites, or of its vessels.
    reaches_far: frozenset[str] = frozenset()
    #: Where the site comes from when it is not said: fields with a room's or vessel's id, or rooms.
    site_from: tuple[str, ...] = ()
    #: May belong to no site: those come with the service and only it writes them.
    shared: bool = False


def _room_of(fields: Fields) -> frozenset[str]:
    room_id = fields.get("room_id")
    return frozenset() if room_id is None else frozenset({room_id})


def _rooms_run_through(fields: Fields) -> frozenset[str]:
    return frozenset(room["room_id"] for room in fields.get("rooms") or ())


def _detector_that_shuts(fields: Fields) -> frozenset[str]:
    trigger = (fields.get("shutoff") or {}).get("trigger")
    return frozenset() if trigger is None else frozenset({trigger})


def _line_that_fills(fields: Fields) -> frozenset[str]:
    line_id = (fields.get("filling") or {}).get("supply_line_id")
    return frozenset() if line_id is None else frozenset({line_id})


def _rooms_on_both_sides(fields: Fields) -> frozenset[str]:
    sides = (fields.get("room_id"), fields.get("other_room_id"))
    return frozenset(room_id for room_id in sides if room_id is not None)


def _rooms_served(fields: Fields) -> frozenset[str]:
    return frozenset(served["room_id"] for served in fields.get("serves") or ())


_ALL_FLUID_FIELDS: Final = frozenset(
    {
        "molar_mass_g_mol",
        "boiling_k",
        "condensed_density_kg_m3",
        "oxygen_fraction",
        "solid",
        "hazards",
        "settles",
        "lfl_pct",
        "name",
    }
)

KINDS: Final[Mapping[str, Kind]] = {
    kind.name: kind
    for kind in (
        Kind(
            "site",
            links=(Link("basis_id", "basis", "basis", keeps_tag=True),),
            defaults={"basis": "baseline", "time_zone": "UTC", "demo": False},
            reaches_far=frozenset(
                {"elevation_m", "station_pressure_kpa_abs", "basis_id", "time_zone"}
            ),
        ),
        Kind(
            "room",
            links=(Link("purge_fluid_id", "purge_fluid", "fluid", keeps_tag=True),),
            defaults={"kind": "room", "state": "in-service"},
        ),
        Kind(
            "opening",
            links=(
                Link("room_id", "room", "room"),
                Link("other_room_id", "other_room", "room"),
            ),
            rooms=_rooms_on_both_sides,
            site_from=("room_id", "other_room_id"),
        ),
        Kind(
            "detector",
            links=(Link("room_id", "room", "room"),),
            defaults={"state": "in-service", "alarms_pct": []},
            rooms=_room_of,
            site_from=("room_id",),
        ),
        Kind(
            "ventilation-unit",
            defaults={"state": "running", "serves": []},
            rooms=_rooms_served,
            may_name=frozenset({"boost_trigger"}),
            site_from=("serves",),
        ),
        Kind(
            "vessel",
            links=(
                Link("room_id", "room", "room"),
                Link("fluid_id", "fluid", "fluid", keeps_tag=True),
            ),
            defaults={"state": "in-service"},
            rooms=_room_of,
            names=_line_that_fills,
            site_from=("room_id",),
        ),
        Kind(
            "supply-line",
            links=(
                Link("source_vessel_id", "source_vessel", "vessel"),
                Link("fluid_id", "fluid", "fluid", keeps_tag=True),
            ),
            defaults={"rooms": []},
            rooms=_rooms_run_through,
            names=_detector_that_shuts,
            site_from=("rooms", "source_vessel_id"),
        ),
        Kind(
            "control",
            links=(
                Link("room_id", "room", "room"),
                Link("vessel_id", "vessel", "vessel"),
            ),
            rooms=_room_of,
            room_by_vessel="vessel_id",
            site_from=("room_id", "vessel_id"),
        ),
        Kind(
            "basis",
            links=(Link("derived_from_id", "derived_from", "basis", keeps_tag=True),),
            defaults={"values": {}, "sources": {}},
            fixed=frozenset({"tag", "derived_from_id"}),
            reaches_far=frozenset({"values"}),
            shared=True,
        ),
        Kind(
            "fluid",
            defaults={"sources": {}},
            fixed=frozenset({"tag"}),
            reaches_far=_ALL_FLUID_FIELDS,
            shared=True,
        ),
    )
}


def rooms_reached(record: Record | None, records: Mapping[str, Record]) -> frozenset[str]:
    """Name the rooms a record reaches: itself, the one it or its vessel stands in, those it serves.

    ``records`` holds the vessel, and the lines that it feeds with the vessels that these fill.
    """
    if record is None:
        return frozenset()
    if record.kind == "room":
        return frozenset({record.id})
    kind = KINDS[record.kind]
    rooms = kind.rooms(record.fields)
    if kind.room_by_vessel is not None:
        vessel = records.get(record.fields[kind.room_by_vessel] or "")
        rooms |= frozenset() if vessel is None else _room_of(vessel.fields)
    if record.kind == "supply-line":
        return rooms | _rooms_filled(record, records)
    if record.kind == "vessel":
        for line in records.values():
            if line.kind == "supply-line" and line.fields["source_vessel_id"] == record.id:
                rooms |= _rooms_run_through(line.fields) | _rooms_filled(line, records)
    return rooms


def _rooms_filled(line: Record, records: Mapping[str, Record]) -> frozenset[str]:
    """Name the rooms of the vessels that a line fills."""
    filled = [
        _room_of(vessel.fields)
        for vessel in records.values()
        if vessel.kind == "vessel" and line.id in _line_that_fills(vessel.fields)
    ]
    return frozenset().union(*filled)


def refers_to(record: Record, record_id: str) -> bool:
    """Tell whether a record names another in its fields, so that this one cannot go."""
    kind, fields = KINDS[record.kind], record.fields
    named = {fields[link.field] for link in kind.links} | {fields[name] for name in kind.may_name}
    return record_id in named | kind.rooms(fields) | kind.names(fields)


def reaches_far(before: Record | None, after: Record | None) -> bool:
    """Tell whether a change reaches rooms that only a search can name."""
    if before is None or after is None:
        # A new or removed site, basis or fluid is used by no room: what is used cannot go.
        return False
    names = KINDS[after.kind].reaches_far
    return any(before.fields[name] != after.fields[name] for name in names)


def blank_fields(kind: str) -> dict[str, Any]:
    """Give every field of a kind, null where it has no default."""
    return dict.fromkeys(field_names(kind)) | {"labels": {}} | dict(KINDS[kind].defaults)
