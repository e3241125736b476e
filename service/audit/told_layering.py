"""What an assessment answers of gas that does not mix: bounds, each beside its mixed figure."""

from __future__ import annotations

from collections.abc import Mapping
from math import isfinite
from typing import Any, Final

import numpy as np

from service.audit.layering import NO_CASE, Zone
from service.audit.release_rows import NO_VARIANT, VARIANTS
from service.audit.releases import RELEASES
from service.audit.rules.rule import Tables

_LITRES: Final = 1000.0
_CAUTION: Final = (
    "A bound by geometry, never a concentration: all the gas is taken to stay in the zone."
)


def told_layering(tables: Tables, row: int) -> Mapping[str, Any] | None:
    """Tell the bounds of a room; None where no accident lets gas go."""
    found = tables.layering
    zones = {
        "breathing_zone": _zone(tables, found.breathing, row),
        "kneeling_zone": _zone(tables, found.kneeling, row),
        "ceiling_zone": _zone(tables, found.ceiling, row),
    }
    if not any(zones.values()):
        return None
    cold, warm = float(found.cold_depth[row]), float(found.warm_depth[row])
    return {
        "bound": True,
        "caution": _CAUTION,
        **zones,
        "layer": None if np.isnan(warm) else {"cold_m": _told(cold), "warm_m": _told(warm)},
        "pit": _pit(tables, row),
    }


def _zone(tables: Tables, zone: Zone, row: int) -> dict[str, Any] | None:
    case = int(zone.case[row])
    if case == NO_CASE:
        return None
    variant = int(tables.cases.table.variant[case])
    return {
        "release": RELEASES[int(tables.cases.table.release[case])].slug,
        "variant": None if variant == NO_VARIANT else VARIANTS[variant],
        "oxygen_pct": _told(100.0 * float(zone.oxygen[row])),
        "mixed_oxygen_pct": _told(100.0 * float(zone.mixed[row])),
        "zone_m3": _told(float(zone.volume[row])),
    }


def _pit(tables: Tables, row: int) -> dict[str, Any] | None:
    found, rooms = tables.layering, tables.cases.table.given.rooms
    volume = float(found.pit_volume[row])
    if np.isnan(volume):
        return None
    entered = int(rooms.pit_entered[row])
    return {
        "volume_m3": _told(volume),
        "oxygen_pct": _told(100.0 * float(found.pit_oxygen[row])),
        "filled_by_l_cold": _told(_LITRES * float(found.pit_liquid_cold[row])),
        "filled_by_l_warm": _told(_LITRES * float(found.pit_liquid_warm[row])),
        "entered": None if entered < 0 else entered == 1,
    }


def _told(value: float) -> float | None:
    # To ten figures, as all that the solver hands on; one number needs no array for it.
    return float(f"{value:.10g}") if isfinite(value) else None
