"""Rules on vessels: not too full, with a way out for their gas, and filling that stops."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import (
    FILLED_BY,
    NECK_PLUGS,
    VESSEL_KINDS,
    VESSEL_STATES,
    Moments,
    all_of,
    is_one_of,
)
from service.audit.conditions import known
from service.audit.inventory import CYLINDER, ICE
from service.audit.rules.kinds import Missing, Overdue, Threshold
from service.audit.rules.rule import Direction, Subject, Tables, vessel_record
from service.audit.rules.words import at_least, at_most, number
from service.audit.severity import CRITICAL, MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Floats, Integers, Mask, quotient, rounded
from service.physics.constants import SECONDS_PER_DAY

_AUTOMATIC = FILLED_BY.index("automatic")
_EMPTY = VESSEL_STATES.index("empty")
_SEALED = NECK_PLUGS.index("sealed")
_LITRES: Final = 1000.0  # in a cubic metre
_PERCENT: Final = 100.0

# Kinds whose neck is the way out for the gas, unless a relief device is recorded beside it.
_BY_THE_NECK: Final = [VESSEL_KINDS.index(kind) for kind in ("open-dewar", "freezer", "cryostat")]
# Kinds that hold pressure when their vent closes.
_UNDER_PRESSURE: Final = [
    VESSEL_KINDS.index(kind) for kind in ("pressurised-dewar", "tank", "cryostat", "magnet")
]

# Liquid in more than this share of the inner volume leaves it no room to expand. Common practice,
# no source: such vessels are filled to 90 or 95 %.
FULLEST_SHARE: Final = 0.95
# Evaporation above its rating by these factors speaks of a vacuum that ages, or is gone. Common
# practice, no source.
ABOVE_RATED: Final = 1.25
FAR_ABOVE_RATED: Final = 2.0


def _holds_liquid(tables: Tables) -> Mask:
    """Vessels for liquid that are there, and not counted as empty."""
    table = tables.cases.table
    vessels, stock = table.given.vessels, table.stock
    empty = (vessels.state == _EMPTY) & stock.count_holds
    return all_of(stock.present, ~empty, ~is_one_of(vessels.kind, (ICE, CYLINDER)))


def _is_counted(tables: Tables) -> Mask:
    """Vessels with anything in them whose contents are recorded."""
    table = tables.cases.table
    empty = (table.given.vessels.state == _EMPTY) & table.stock.count_holds
    return all_of(table.stock.present, ~empty, ~np.isnan(_share_of_capacity(tables)))


def _share_of_capacity(tables: Tables) -> Floats:
    """Recorded contents of each vessel as a share of its capacity; not-a-number where unknown."""
    vessels = tables.cases.table.given.vessels
    by_mass = quotient(vessels.contents_mass, vessels.capacity_mass, where_zero=np.nan)
    by_volume = quotient(vessels.contents_volume, vessels.capacity_volume, where_zero=np.nan)
    return rounded(known(by_mass, by_volume))


def _whole(tables: Tables) -> Floats:
    return np.ones(tables.cases.table.given.vessels.room.size)


def _say_overfilled(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    record = vessel_record(tables, row)
    vessels = tables.cases.table.given.vessels
    by_mass = not np.isnan(vessels.contents_mass[row])
    unit = "kg" if by_mass else "L"
    held = float(vessels.contents_mass[row] if by_mass else vessels.contents_volume[row] * _LITRES)
    full = float(vessels.capacity_mass[row] if by_mass else vessels.capacity_volume[row] * _LITRES)
    return (
        f"{record.tag} is recorded as holding {at_least(held)} {unit}, {100.0 * measure:.4g} % of "
        f"its capacity of {full:.4g} {unit}.",
        f"Draw off {at_least(held - full)} {unit} and find out why it was overfilled; or correct "
        "the record.",
        {"contents": number(held), "capacity": number(full), "unit": unit},
    )


def _has_both_volumes(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return all_of(
        _holds_liquid(tables), vessels.gross_volume > 0.0, ~np.isnan(vessels.capacity_volume)
    )


def _share_of_gross(tables: Tables) -> Floats:
    vessels = tables.cases.table.given.vessels
    return rounded(quotient(vessels.capacity_volume, vessels.gross_volume, where_zero=np.nan))


def _fullest(tables: Tables) -> Floats:
    return np.full(tables.cases.table.given.vessels.room.size, FULLEST_SHARE)


def _say_ullage(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    record = vessel_record(tables, row)
    vessels = tables.cases.table.given.vessels
    net = float(vessels.capacity_volume[row]) * _LITRES
    gross = float(vessels.gross_volume[row]) * _LITRES
    return (
        f"The capacity of {record.tag}, {net:.4g} L, is {at_least(100.0 * measure)} % of its inner "
        f"volume of {gross:.4g} L; liquid that warms has no room to expand.",
        f"Fill {record.tag} to at most {at_most(limit * gross)} L, and record that as its "
        "capacity.",
        {"capacity_l": number(net), "gross_l": number(gross)},
    )


def _is_rated_and_measured(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return all_of(
        _holds_liquid(tables),
        vessels.rated_evaporation > 0.0,
        ~np.isnan(vessels.measured_evaporation),
    )


def _times_rated(tables: Tables) -> Floats:
    """Measured evaporation of each vessel by its rated one; not-a-number where unknown."""
    vessels = tables.cases.table.given.vessels
    return rounded(
        quotient(vessels.measured_evaporation, vessels.rated_evaporation, where_zero=np.nan)
    )


def _above_rated(tables: Tables) -> Floats:
    return np.full(tables.cases.table.given.vessels.room.size, ABOVE_RATED)


def _how_far_above(tables: Tables) -> Integers:
    return np.where(_times_rated(tables) > FAR_ABOVE_RATED, MINOR, OBSERVATION)


def _say_above_rated(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    record = vessel_record(tables, row)
    vessels = tables.cases.table.given.vessels
    measured = float(vessels.measured_evaporation[row]) * _LITRES * SECONDS_PER_DAY
    rated = float(vessels.rated_evaporation[row]) * _LITRES * SECONDS_PER_DAY
    return (
        f"{record.tag} evaporates {at_least(measured)} L/day, {at_least(measure)} times its rated "
        f"{rated:.4g} L/day: its vacuum ages, or its neck is open.",
        f"Have the vacuum of {record.tag} checked, and plan to take it out of use above "
        f"{at_most(FAR_ABOVE_RATED * rated)} L/day.",
        {"measured_l_day": number(measured), "rated_l_day": number(rated)},
    )


def _cannot_vent(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return all_of(
        _holds_liquid(tables),
        vessels.neck_plug == _SEALED,
        vessels.relief_fitted != 1,
        is_one_of(vessels.kind, _BY_THE_NECK),
    )


def _say_sealed(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = vessel_record(tables, row)
    return (
        f"The neck of {record.tag} is sealed and is the only way out for its gas: it can burst.",
        f"Keep people away, open the neck of {record.tag} as its maker says, and fit a plug that "
        "vents.",
        {"neck_plug": "sealed", "kind": _kind(tables, row)},
    )


def _kind(tables: Tables, row: int) -> str:
    return VESSEL_KINDS[int(tables.cases.table.given.vessels.kind[row])]


def _without_relief(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return all_of(
        _holds_liquid(tables),
        vessels.relief_fitted != 1,
        is_one_of(vessels.kind, _UNDER_PRESSURE),
    )


def _removed_or_unknown(tables: Tables) -> Integers:
    removed = tables.cases.table.given.vessels.relief_fitted == 0
    return np.where(removed, CRITICAL, OBSERVATION)


def _say_relief(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = vessel_record(tables, row)
    removed = bool(tables.cases.table.given.vessels.relief_fitted[row] == 0)
    evidence = {"relief_fitted": False if removed else None, "kind": _kind(tables, row)}
    if removed:
        return (
            f"{record.tag} has no relief device, as recorded: it can burst once its vent closes.",
            f"Take {record.tag} out of use, empty it, and have a relief device fitted before it is "
            "filled again.",
            evidence,
        )
    return (
        f"Nobody recorded whether {record.tag} has a relief device.",
        f"Look for the relief device of {record.tag}, and record it.",
        evidence,
    )


def _relief_due(tables: Tables) -> Moments:
    return tables.cases.table.given.vessels.relief_due


def _inspects_relief(tables: Tables) -> Mask:
    """Vessels whose relief device has a date and an interval of inspection."""
    vessels = tables.cases.table.given.vessels
    return all_of(
        tables.cases.table.stock.present, vessels.relief_fitted != 0, ~np.isnat(vessels.relief_due)
    )


def _filled_by_itself(tables: Tables) -> Mask:
    """Vessels for liquid that are there and filled automatically, empty or not."""
    table = tables.cases.table
    vessels = table.given.vessels
    return all_of(
        table.stock.present,
        vessels.filled_by == _AUTOMATIC,
        ~is_one_of(vessels.kind, (ICE, CYLINDER)),
    )


def _without_high_level(tables: Tables) -> Mask:
    return all_of(_filled_by_itself(tables), tables.cases.table.given.vessels.high_level != 1)


def _say_high_level(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    record = vessel_record(tables, row)
    recorded = float(table.given.vessels.fill_flow[row])
    usual = float(table.given.bases.fill_flow[table.given.vessels.room[row]])
    flow = (usual if np.isnan(recorded) else recorded) * _LITRES * 60.0
    return (
        f"{record.tag} is filled automatically and no independent high level is recorded: when its "
        f"level control fails, {at_least(flow)} L/min go on running over.",
        "Fit a high level of its own that closes the supply, test it, and record both; or fill it "
        "by hand with somebody there.",
        {"flow_l_min": number(flow), "flow_recorded": not np.isnan(recorded)},
    )


def _has_high_level(tables: Tables) -> Mask:
    return all_of(_filled_by_itself(tables), tables.cases.table.given.vessels.high_level == 1)


def _shut_off_test_due(tables: Tables) -> Moments:
    return tables.cases.table.given.vessels.shut_off_test_due


RULES: Final = (
    Missing(
        slug="vessels/neck-sealed",
        subject=Subject.VESSELS,
        missing=_cannot_vent,
        consequence=CRITICAL,
        words=_say_sealed,
        method="records/present",
        source="published investigations of sealed and iced necks, in general terms; "
        + COMMON_PRACTICE,
    ),
    Missing(
        slug="vessels/relief-missing",
        subject=Subject.VESSELS,
        missing=_without_relief,
        consequence=_removed_or_unknown,
        words=_say_relief,
        method="records/present",
        source="published investigations of a relief device removed, in general terms; "
        + COMMON_PRACTICE,
    ),
    Overdue(
        slug="vessels/relief-inspection-overdue",
        subject=Subject.VESSELS,
        applies=_inspects_relief,
        due=_relief_due,
        overdue="The inspection of the relief device of {tag} has been overdue since {due}.",
        never_done="No inspection of the relief device of {tag} is recorded.",
        remedy="Have the relief device inspected, and record the date.",
        consequence=OBSERVATION,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
    Threshold(
        slug="vessels/overfilled",
        subject=Subject.VESSELS,
        worse_is=Direction.HIGHER,
        applies=_is_counted,
        measure=_share_of_capacity,
        limit=_whole,
        consequence=MAJOR,
        words=_say_overfilled,
        method="records/plausible",
        source=COMMON_PRACTICE,
    ),
    Threshold(
        slug="vessels/ullage",
        subject=Subject.VESSELS,
        worse_is=Direction.HIGHER,
        applies=_has_both_volumes,
        measure=_share_of_gross,
        limit=_fullest,
        consequence=OBSERVATION,
        words=_say_ullage,
        method="records/plausible",
        source=COMMON_PRACTICE,
    ),
    Threshold(
        slug="vessels/evaporation-above-rated",
        subject=Subject.VESSELS,
        worse_is=Direction.HIGHER,
        applies=_is_rated_and_measured,
        measure=_times_rated,
        limit=_above_rated,
        consequence=_how_far_above,
        words=_say_above_rated,
        method="records/plausible",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="vessels/fill-without-high-level",
        subject=Subject.VESSELS,
        missing=_without_high_level,
        consequence=MAJOR,
        words=_say_high_level,
        method="filling/overfill",
        source="published investigations of automatic filling that did not stop, in general terms; "
        + COMMON_PRACTICE,
    ),
    Overdue(
        slug="vessels/shut-off-untested",
        subject=Subject.VESSELS,
        applies=_has_high_level,
        due=_shut_off_test_due,
        overdue="The test of the independent shut-off of {tag} has been overdue since {due}.",
        never_done="No test of the independent shut-off of {tag} is recorded, with the interval it "
        "holds for.",
        remedy="Test that the high level closes the supply, and record the date; until then it "
        "does not count.",
        consequence=MINOR,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
)
