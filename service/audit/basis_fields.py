"""What a value of a basis may be, and how values must stand to each other."""

import itertools
import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, Final

from service.audit.assessment import SEVERITIES
from service.physics.constants import OXYGEN_IN_AIR

Problem = tuple[str, str]  # name, or a pointer below it; what is wrong, as a sentence

OXYGEN_IN_AIR_PCT: Final = 100.0 * OXYGEN_IN_AIR


@dataclass(frozen=True, slots=True)
class BasisField:
    """The kind, range and unit of one value."""

    kind: str  # number, whole, numbers, named-numbers, choice, severities
    unit: str
    low: float = 0.0
    high: float = math.inf
    above_low: bool = False  # the low end itself is refused
    names: tuple[str, ...] = ()  # of named numbers, of the rows of a table, or the choices
    length: int = 0  # of a list


def _number(unit: str, low: float, high: float, *, above_low: bool = False) -> BasisField:
    return BasisField("number", unit, low, high, above_low)


def _whole(unit: str, low: float, high: float) -> BasisField:
    return BasisField("whole", unit, low, high)


def _named(unit: str, low: float, high: float, *names: str) -> BasisField:
    return BasisField("named-numbers", unit, low, high, names=names)


def _list(unit: str, low: float, high: float, length: int) -> BasisField:
    return BasisField("numbers", unit, low, high, above_low=True, length=length)


def _choice(*names: str) -> BasisField:
    return BasisField("choice", "", names=names)


BASIS_FIELDS: Final[Mapping[str, BasisField]] = MappingProxyType(
    {
        "oxygen_deficient_pct": _number("%", 0.0, OXYGEN_IN_AIR_PCT, above_low=True),
        "oxygen_danger_pct": _number("%", 0.0, OXYGEN_IN_AIR_PCT, above_low=True),
        "oxygen_danger_kpa": _number("kPa", 0.0, 21.0, above_low=True),
        "oxygen_critical_pct": _number("%", 0.0, OXYGEN_IN_AIR_PCT, above_low=True),
        "oxygen_critical_kpa": _number("kPa", 0.0, 21.0, above_low=True),
        "oxygen_enriched_pct": _number("%", OXYGEN_IN_AIR_PCT, 100.0, above_low=True),
        "oxygen_rich_marks_pct": _list("%", OXYGEN_IN_AIR_PCT, 100.0, 2),
        "carbon_dioxide_pct": _named("%", 0.05, 100.0, "mean_8h", "mean_15min", "peak"),
        "nitrous_oxide_pct": _named("%", 1e-6, 100.0, "mean_8h", "mean_15min"),
        "nitrous_oxide_accident_pct": _number("%", 0.0, 100.0, above_low=True),
        "lfl_pct": _named("%", 0.1, 100.0, "methane", "hydrogen"),
        "lfl_shares": _list("1", 0.0, 1.0, 3),
        "mixing_factor": _number("1", 1.0, 10.0),
        "natural_air_changes_per_h": _named(
            "1/h", 0.0, 20.0, "above_ground", "below_ground", "enclosed"
        ),
        "instant_mixing": _choice("displacement", "mixing"),
        "contents": _choice("capacity", "recorded"),
        "fill_loss_fraction": _number("1", 0.0, 1.0),
        "evaporation_factor": _number("1", 1.0, 20.0),
        "evaporation_pct_day": _named(
            "%/d",
            0.0,
            100.0,
            "open-dewar",
            "pressurised-dewar",
            "freezer",
            "tank",
            "cryostat",
            "magnet",
        ),
        "sustained_h": _number("h", 1.0, 720.0),
        "restore_s": _number("s", 60.0, 86_400.0),
        "react_s": _number("s", 0.0, 600.0),
        "walk_m_s": _number("m/s", 0.1, 3.0),
        "over_pressure_pa": _number("Pa", 1.0, 5000.0),
        "door_force_n": _number("N", 1.0, 1000.0),
        "net_volume_share": _number("1", 0.05, 1.0),
        "level_step_pct": _number("%", 0.1, 50.0),
        "count_every_days": _number("d", 1.0, 3660.0),
        "reopen_days": _whole("d", 0.0, 3660.0),
        "neighbour_steps": _whole("1", 0.0, 4.0),
        "many_vessels": _whole("1", 1.0, 1000.0),
        "never_measured_share": _number("1", 0.0, 1.0),
        "default_fill_flow_l_min": _number("L/min", 0.1, 1000.0),
        "warm_fill_loss": _number("1", 0.0, 1.0),
        "helium_fill_loss": _number("1", 0.0, 1.0),
        "ice_share_per_h": _number("1/h", 0.0, 1.0),
        "loose_ice_share_per_h": _number("1/h", 0.0, 1.0),
        "inspected_pipe_share": _number("1", 0.0, 1.0),
        "severity_table": BasisField(
            "severities", "", names=("first", "second", "third"), length=3
        ),
        "fatality_form": _choice("Ka", "Kb", "Kc"),
    }
)

# Names whose values must not fall from left to right.
_RISING: Final = (
    ("oxygen_critical_pct", "oxygen_danger_pct", "oxygen_deficient_pct"),
    ("oxygen_critical_kpa", "oxygen_danger_kpa"),
    ("ice_share_per_h", "loose_ice_share_per_h"),
)


def basis_problems(values: Mapping[str, Any]) -> list[Problem]:
    """Return what is wrong with values of a basis: of each by itself, and of one against another.

    Give the effective set to have every order checked; an order is asked only of values that are
    there and sound by themselves.
    """
    alone = [problem for name, value in values.items() for problem in _of_one(name, value)]
    wrong = {place.split("/")[0] for place, _ in alone}
    sound = {name: value for name, value in values.items() if name not in wrong}
    return alone + list(_of_order(sound))


def _of_one(name: str, value: Any) -> Iterator[Problem]:
    field = BASIS_FIELDS.get(name)
    if field is None:
        yield name, "There is no such value in a basis."
    elif field.kind in ("number", "whole"):
        yield from _of_number(name, value, field)
    elif field.kind == "choice":
        if not isinstance(value, str) or value not in field.names:
            yield name, f"Must be one of {', '.join(field.names)}."
    elif field.kind == "numbers":
        yield from _of_list(name, value, field)
    elif field.kind == "named-numbers":
        yield from _of_named(name, value, field)
    else:
        yield from _of_table(name, value, field)


def _of_number(place: str, value: Any, field: BasisField) -> Iterator[Problem]:
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        yield place, "Must be a finite number."
        return
    enough = value > field.low if field.above_low else value >= field.low
    if not (enough and value <= field.high):
        least = "above" if field.above_low else "at least"
        unit = "" if field.unit in ("", "1") else f" {field.unit}"
        yield place, f"Must be {least} {field.low:g} and at most {field.high:g}{unit}."
    elif field.kind == "whole" and value != int(value):
        yield place, "Must be a whole number."


def _of_list(name: str, value: Any, field: BasisField) -> Iterator[Problem]:
    if not _is_list(value) or len(value) != field.length:
        yield name, f"Must be a list of {field.length} numbers."
        return
    for index, item in enumerate(value):
        yield from _of_number(f"{name}/{index}", item, field)


def _of_named(name: str, value: Any, field: BasisField) -> Iterator[Problem]:
    if not isinstance(value, Mapping) or set(value) != set(field.names):
        yield name, f"Must give exactly {', '.join(field.names)}."
        return
    for part, item in value.items():
        yield from _of_number(f"{name}/{part}", item, field)


def _of_table(name: str, value: Any, field: BasisField) -> Iterator[Problem]:
    if not isinstance(value, Mapping) or set(value) != set(field.names):
        yield name, f"Must give exactly the rows {', '.join(field.names)}."
        return
    for row, cells in value.items():
        if not _is_list(cells) or len(cells) != field.length:
            yield (
                f"{name}/{row}",
                "Must be a list of 3: with no, some and all safeguards.",
            )
            continue
        for column, cell in enumerate(cells):
            if not isinstance(cell, str) or cell not in SEVERITIES:
                yield f"{name}/{row}/{column}", f"Must be one of {', '.join(SEVERITIES)}."


def _is_list(value: Any) -> bool:
    return isinstance(value, Sequence) and not isinstance(value, str | bytes)


def _of_order(values: Mapping[str, Any]) -> Iterator[Problem]:
    for names in _RISING:
        there = [name for name in names if name in values]
        for lower, higher in itertools.pairwise(there):
            if not values[lower] <= values[higher]:
                yield lower, f"Must not be above {higher}."
    if "oxygen_deficient_pct" in values and values["oxygen_deficient_pct"] >= OXYGEN_IN_AIR_PCT:
        yield "oxygen_deficient_pct", f"Must be below clean air, {OXYGEN_IN_AIR_PCT:g} %."
    yield from _of_rich_marks(values)
    yield from _of_exposure_limits(values)
    yield from _of_rising_list(values, "lfl_shares")
    if "severity_table" in values:
        yield from _of_severities(values["severity_table"])


def _of_rich_marks(values: Mapping[str, Any]) -> Iterator[Problem]:
    yield from _of_rising_list(values, "oxygen_rich_marks_pct")
    if "oxygen_rich_marks_pct" not in values or "oxygen_enriched_pct" not in values:
        return
    if not values["oxygen_enriched_pct"] <= values["oxygen_rich_marks_pct"][0]:
        yield "oxygen_enriched_pct", "Must not be above oxygen_rich_marks_pct."


def _of_exposure_limits(values: Mapping[str, Any]) -> Iterator[Problem]:
    for name in ("carbon_dioxide_pct", "nitrous_oxide_pct"):
        if name not in values:
            continue
        parts = [part for part in BASIS_FIELDS[name].names if part in values[name]]
        for lower, higher in itertools.pairwise(parts):
            if not values[name][lower] <= values[name][higher]:
                yield f"{name}/{lower}", f"Must not be above {higher}."


def _of_rising_list(values: Mapping[str, Any], name: str) -> Iterator[Problem]:
    items = values.get(name, ())
    for index, (lower, higher) in enumerate(itertools.pairwise(items)):
        if not lower <= higher:
            yield f"{name}/{index}", "Must not be above the next."


def _of_severities(table: Mapping[str, Sequence[str]]) -> Iterator[Problem]:
    """A safeguard more never makes it worse, a mark more never better."""
    rows = BASIS_FIELDS["severity_table"].names
    levels = {row: [SEVERITIES.index(cell) for cell in table[row]] for row in rows}
    for row in rows:
        for column in (0, 1):
            if levels[row][column] < levels[row][column + 1]:
                yield (
                    f"severity_table/{row}/{column + 1}",
                    "Must not be worse than with fewer safeguards.",
                )
    for row, next_row in itertools.pairwise(rows):
        for column in range(3):
            if levels[row][column] > levels[next_row][column]:
                yield f"severity_table/{row}/{column}", f"Must not be worse than {next_row}."
