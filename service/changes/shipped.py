"""The bases and fluids that come with the service, written into a new or an older database."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace as altered
from typing import Any

from service.audit.bases import SHIPPED_SOURCES, SHIPPED_VALUES
from service.changes.apply import Pair
from service.changes.kinds import blank_fields
from service.changes.replace import Outcome, replace
from service.physics.fluids import FLUIDS, FluidData
from service.physics.sources import SOURCES
from service.store.heads import heads_of
from service.store.ids import new_record_id
from service.store.live import record_by_tag
from service.store.records import Record
from service.store.scope import EVERYTHING
from service.store.session import INSTALLATION, WriteSession


def ship(session: WriteSession) -> int:
    """Write what is missing or has changed; count it. Every site then waits for the sweep."""
    pairs = [pair for kind, fields in _shipped() if (pair := _pair(session, kind, fields))]
    if not pairs:
        return 0
    sites: frozenset[str] = frozenset()
    if any(pair.before is not None for pair in pairs):
        heads = heads_of(EVERYTHING, session.connection)
        sites = frozenset(head.site_id for head in heads) - {INSTALLATION}
    locked = session.lock_heads({INSTALLATION, *sites})
    stamped = [
        Pair(pair.before, None if pair.after is None else _stamped(pair.after, session))
        for pair in pairs
    ]
    replace(session, locked, Outcome("ship", stamped, (), {}, left_to_sweep=sites))
    return len(stamped)


def _stamped(record: Record, session: WriteSession) -> Record:
    created_at = session.moment if record.revision == 1 else record.created_at
    return altered(record, created_at=created_at, updated_at=session.moment)


def _pair(session: WriteSession, kind: str, fields: Mapping[str, Any]) -> Pair | None:
    present = record_by_tag(EVERYTHING, session.connection, kind, None, fields["tag"])
    whole = blank_fields(kind) | dict(fields)
    if present is None:
        record_id = new_record_id(session.moment)
        made = Record(kind, record_id, None, 1, session.moment, session.moment, whole)
        return Pair(None, made)
    if dict(present.fields) == whole:
        return None
    return Pair(present, altered(present, revision=present.revision + 1, fields=whole))


def _shipped() -> Iterator[tuple[str, dict[str, Any]]]:
    for tag, values in SHIPPED_VALUES.items():
        yield (
            "basis",
            {
                "tag": tag,
                "name": f"The {tag} basis",
                "values": dict(values),
                "sources": dict(SHIPPED_SOURCES[tag]),
            },
        )
    for fluid in FLUIDS.values():
        yield "fluid", _fluid_fields(fluid)


def _fluid_fields(fluid: FluidData) -> dict[str, Any]:
    return {
        "tag": fluid.slug,
        "name": fluid.name,
        # Ten figures: the tables print at most six, and 28.0135 / 1000 * 1000 need not be 28.0135.
        "molar_mass_g_mol": round(fluid.molar_mass_kg_mol * 1e3, 10),
        "boiling_k": fluid.boiling_k,
        "condensed_density_kg_m3": fluid.liquid_density_kg_m3,
        "oxygen_fraction": fluid.oxygen_fraction,
        "solid": fluid.solid,
        "hazards": sorted(fluid.hazards),
        "settles": fluid.settles,
        "sources": {"properties": SOURCES["property-library"].title},
    }
