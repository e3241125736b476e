"""Rules on ventilation units: their flow measured and proved, running, and outdoor air at all."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED, LOST
from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import ROOM_KINDS, UNIT_STATES, Moments, all_of, is_one_of
from service.audit.rules.kinds import Missing, Overdue, Threshold, never
from service.audit.rules.rooms import any_of_room, beyond_a_mark, holding_gas
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables, unit_record
from service.audit.rules.words import as_record, at_least, at_most, number
from service.audit.severity import MINOR, OBSERVATION
from service.physics.arrays import Floats, Mask, quotient, rounded
from service.physics.constants import SECONDS_PER_HOUR

_RUNNING = UNIT_STATES.index("running")
_CARRYING = [ROOM_KINDS.index(kind) for kind in ("lift", "vehicle")]
_AS_MEASURED: Final = AIRFLOWS.index(AS_MEASURED)

# A fan that moves less than this share of its design flow has lost it. Common practice, no source.
LEAST_SHARE_OF_DESIGN: Final = 0.80


def _of_gas(tables: Tables) -> Mask:
    """Units of rooms that have anything to air."""
    held: Mask = holding_gas(tables)[tables.cases.table.given.units.room]
    return held


def _switched_on(tables: Tables) -> Mask:
    running: Mask = tables.cases.table.given.units.state == _RUNNING
    return running & _of_gas(tables)


def _measurement_due(tables: Tables) -> Moments:
    return tables.cases.table.given.units.measurement_due


def _unproved(tables: Tables) -> Mask:
    """Units whose air counts, in rooms that go beyond a mark without it, with no proof of flow."""
    table = tables.cases.table
    units, air = table.given.units, table.air
    alone = beyond_a_mark(tables, table.airflow == AIRFLOWS.index(LOST))
    relied_on = alone & ~air.natural[_AS_MEASURED]
    return all_of(
        units.flow_proved != 1, air.units.runs, air.units.flow > 0.0, relied_on[units.room]
    )


def _say_unproved(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = unit_record(tables, row)
    flow = float(tables.cases.table.air.units.flow[row]) * SECONDS_PER_HOUR
    room = tables.room(int(tables.cases.table.given.units.room[row])).record
    return (
        f"{room.tag} relies on {at_most(flow)} m3/h of outdoor air from {record.tag}, and nothing "
        "proves that it flows: a closed damper behind a running fan would not be noticed.",
        f"Prove the flow of {record.tag} by pressure or flow in the duct, with an alarm, and "
        "record that.",
        {"outdoor_air_m3_h": number(flow)},
    )


def _stands_still(tables: Tables) -> Mask:
    return ~tables.cases.table.air.units.runs & _of_gas(tables)


def _say_stopped(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    units = tables.cases.table.given.units
    record = unit_record(tables, row)
    state = UNIT_STATES[int(units.state[row])]
    planned = state == "running"
    why = "stands still in a planned outage" if planned else f"is recorded as {state}"
    lost = float(tables.cases.table.air.units.flow[row]) * SECONDS_PER_HOUR
    room = tables.room(int(units.room[row])).record
    return (
        f"{record.tag} {why}: {room.tag} is without {at_least(lost)} m3/h of outdoor air that it "
        "would move.",
        f"Keep work with gas out of {room.tag} until the outage ends."
        if planned
        else f"Run {record.tag}, or keep work with gas out of {room.tag} until it does.",
        {"state": state, "planned_outage": planned, "outdoor_air_m3_h": number(lost)},
    )


def _both_flows_known(tables: Tables) -> Mask:
    units = tables.cases.table.given.units
    return all_of(~np.isnan(units.measured_flow), units.design_flow > 0.0, _of_gas(tables))


def _share_of_design(tables: Tables) -> Floats:
    """Measured flow of each unit as a share of its design flow; not-a-number where unknown."""
    units = tables.cases.table.given.units
    return rounded(quotient(units.measured_flow, units.design_flow, where_zero=np.nan))


def _least_share(tables: Tables) -> Floats:
    return np.full(tables.cases.table.given.units.room.size, LEAST_SHARE_OF_DESIGN)


def _say_below_design(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    units = tables.cases.table.given.units
    record = unit_record(tables, row)
    measured = float(units.measured_flow[row]) * SECONDS_PER_HOUR
    design = float(units.design_flow[row]) * SECONDS_PER_HOUR
    missing = at_least(limit * design - measured)
    return (
        f"{record.tag} was measured at {at_most(measured)} m3/h, {at_most(100.0 * measure)} % of "
        f"its design flow of {design:.4g} m3/h.",
        f"Find the {missing} m3/h or more that are missing (filters, belts, dampers), or record "
        "the lower flow as the design.",
        {"measured_flow_m3_h": number(measured), "design_flow_m3_h": number(design)},
    )


def _recirculates(tables: Tables) -> Mask:
    return all_of(tables.cases.table.given.units.outdoor_air_fraction == 0.0, _switched_on(tables))


def _say_recirculates(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    record = unit_record(tables, row)
    flow = float(tables.cases.table.air.units.whole_flow[row]) * SECONDS_PER_HOUR
    return (
        f"{record.tag} moves {at_most(flow)} m3/h and brings no outdoor air; it spreads gas and "
        "takes none away.",
        f"Give {record.tag} outdoor air, or do not count on it; record the share if it has some.",
        {"flow_m3_h": number(flow), "outdoor_air_fraction": 0.0},
    )


@dataclass(frozen=True, slots=True)
class NoUnit:
    """Rooms beyond a mark with the air as it is, that no unit serves; nothing airs a lift."""

    slug: str = "ventilation/none"
    subject: Subject = Subject.ROOMS
    gas: str | None = None
    worse_is: Direction = Direction.LOWER
    method: str = "ventilation/restore"
    source: str = COMMON_PRACTICE

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Measured by the air that nature moves, against what a fan would have to."""
        table = tables.cases.table
        units = table.given.units
        served = any_of_room(tables, units.room, np.ones(units.room.size, dtype=np.bool_))
        beyond = beyond_a_mark(tables, table.counts & (table.airflow == _AS_MEASURED))
        carried = is_one_of(table.given.rooms.kind, _CARRYING)
        return Judged(
            broken=all_of(beyond, ~served, ~carried),
            measure=_moved_per_hour(tables),
            limit=_restore_per_hour(tables),
            consequence=np.full(table.given.count, OBSERVATION),
            turns_at=never(table.given.count),
        )

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say what nature is taken to do, and what a fan would."""
        row, table = rows[0], tables.cases.table
        room = tables.room(row).record
        natural, restore = float(judged.measure[row]), float(judged.limit[row])
        changes = natural / float(table.conditions.volume[row])
        back = float(table.given.bases.restore[row]) / 60.0
        if natural < restore / float(table.air.mixing_factor[_AS_MEASURED, row]):
            remedy = (
                f"Bring outdoor air by a fan: {at_least(restore)} m3/h would have the room back "
                f"inside its first mark within {back:.0f} min."
            )
        else:
            remedy = (
                "Bring outdoor air by a fan whose flow is measured: that nature has the room back "
                f"within {back:.0f} min is an assumption."
            )
        return Said(
            f"{room.tag} goes beyond a mark and no ventilation unit serves it; by nature "
            f"{natural:.3g} m3/h are taken to pass through it, {changes:.2g} air changes an hour.",
            remedy,
            {
                "record": as_record(room),
                "natural_air_m3_h": number(natural),
                "restore_m3_h": number(restore),
            },
        )


def _to_restore(tables: Tables) -> Floats:
    """Outdoor air that brings each room back in time from its worst case that counts [m3/s]."""
    table = tables.cases.table
    wanted = np.zeros(table.given.count)
    np.maximum.at(wanted, table.room[table.counts], tables.cases.results.restore[table.counts])
    return wanted


def _aired_after_accidents(tables: Tables) -> Mask:
    """Rooms that fans air, where an accident that counts goes beyond a mark.

    One that is beyond a mark without any accident is asked for more air already.
    """
    table = tables.cases.table
    accident = beyond_a_mark(tables, table.counts & ~table.sustained)
    lasting = table.sustained & (table.airflow == _AS_MEASURED)
    by_itself = beyond_a_mark(tables, table.counts & lasting)
    return all_of(accident, ~by_itself, table.air.by_fans[_AS_MEASURED] > 0.0)


def _moved_per_hour(tables: Tables) -> Floats:
    return rounded(tables.cases.table.air.moved[_AS_MEASURED] * SECONDS_PER_HOUR)


def _restore_per_hour(tables: Tables) -> Floats:
    return rounded(_to_restore(tables) * SECONDS_PER_HOUR)


def _say_cannot_restore(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    room = tables.room(row)
    back = float(table.given.bases.restore[row]) / 60.0
    return (
        f"{at_most(measure)} m3/h of outdoor air pass through {room.record.tag}; to have it back "
        f"inside its first mark within {back:.0f} min of its worst release takes "
        f"{at_least(limit)} m3/h.",
        f"Bring {at_least(limit - measure)} m3/h more outdoor air, or keep people out of "
        f"{room.record.tag} for longer after a release.",
        {"units": [as_record(unit.record) for unit in room.units]},
    )


RULES: Final = (
    Overdue(
        slug="ventilation/flow-overdue",
        subject=Subject.UNITS,
        applies=_switched_on,
        due=_measurement_due,
        overdue="The measurement of the flow of {tag} has been overdue since {due}.",
        never_done="No measurement of the flow of {tag} is recorded, with the interval it holds "
        "for.",
        remedy="Measure its flow and record it with the date; until then less of it counts, and it "
        "is no safeguard.",
        consequence=MINOR,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="ventilation/flow-not-proved",
        subject=Subject.UNITS,
        missing=_unproved,
        consequence=MINOR,
        words=_say_unproved,
        method="records/present",
        source="published investigations of a closed damper behind a running fan, in general "
        "terms; " + COMMON_PRACTICE,
    ),
    Missing(
        slug="ventilation/stopped",
        subject=Subject.UNITS,
        missing=_stands_still,
        consequence=OBSERVATION,
        words=_say_stopped,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Threshold(
        slug="ventilation/below-design",
        subject=Subject.UNITS,
        worse_is=Direction.LOWER,
        applies=_both_flows_known,
        measure=_share_of_design,
        limit=_least_share,
        consequence=OBSERVATION,
        words=_say_below_design,
        method="records/plausible",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="ventilation/no-outdoor-air",
        subject=Subject.UNITS,
        missing=_recirculates,
        consequence=OBSERVATION,
        words=_say_recirculates,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    NoUnit(),
    Threshold(
        slug="ventilation/cannot-restore",
        subject=Subject.ROOMS,
        worse_is=Direction.LOWER,
        applies=_aired_after_accidents,
        measure=_moved_per_hour,
        limit=_restore_per_hour,
        consequence=OBSERVATION,
        words=_say_cannot_restore,
        method="ventilation/restore",
        source="the time within which a room should be back is a value of the basis; "
        + COMMON_PRACTICE,
    ),
)
