"""Rules on administrative measures: those that a room ought to have, and those to be checked.

None of them is a safeguard: what they do to the air is nothing.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.assessment import SEVERITIES
from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import CONTROL_KINDS, UNKNOWN, VESSEL_KINDS, Moments, all_of, is_one_of
from service.audit.inputs import RoomValues
from service.audit.rules.kinds import Overdue, Threshold
from service.audit.rules.rooms import any_of_room
from service.audit.rules.rule import Direction, Subject, Tables
from service.audit.rules.words import as_record
from service.audit.severity import MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Floats, Mask

# What a room ought to have where a release would be grave without any safeguard. Common practice,
# no source.
WANTED: Final = (
    "signage",
    "procedure",
    "training",
    "personal-monitor",
    "alarm-response",
    "rescue",
    "lone-working",
    "protective-equipment",
    "access",
)
WHERE_VESSELS_ARE_MOVED: Final = "delivery-route"

CARRIED: Final = ("open-dewar", "pressurised-dewar", "dry-ice-box", "cylinder")

_CARRIED: Final = [VESSEL_KINDS.index(kind) for kind in CARRIED]


def _grave(tables: Tables) -> Mask:
    grave: Mask = tables.cases.bare_severity >= MAJOR
    return grave


def _moves_vessels(tables: Tables) -> Mask:
    """Rooms with a vessel that is carried or wheeled; one of unknown mobility is."""
    table = tables.cases.table
    vessels = table.given.vessels
    carried = (vessels.mobile == 1) | (
        (vessels.mobile == UNKNOWN) & is_one_of(vessels.kind, _CARRIED)
    )
    return any_of_room(tables, vessels.room, carried & table.stock.present)


def _wanting(tables: Tables) -> Mask:
    """Kinds that each room ought to have and has not, (rooms, kinds)."""
    given = tables.cases.table.given
    wanted = np.zeros((given.count, len(CONTROL_KINDS)), dtype=np.bool_)
    wanted[:, [CONTROL_KINDS.index(kind) for kind in WANTED]] = True
    wanted[:, CONTROL_KINDS.index(WHERE_VESSELS_ARE_MOVED)] = _moves_vessels(tables)
    # One that is recorded for a vessel says nothing of the room.
    of_room = given.controls.vessel == UNKNOWN
    wanted[given.controls.room[of_room], given.controls.kind[of_room]] = False
    return wanted


def _wanting_of(room: RoomValues) -> list[str]:
    """The same for one room, without a look at the others."""
    moved = any(
        vessel.state != "withdrawn"
        and (vessel.mobile or (vessel.mobile is None and vessel.kind in CARRIED))
        for vessel in room.vessels
    )
    wanted = {*WANTED, WHERE_VESSELS_ARE_MOVED} if moved else {*WANTED}
    own = {vessel.record.id for vessel in room.vessels}
    wanted -= {control.kind for control in room.controls if control.vessel_id not in own}
    return [kind for kind in CONTROL_KINDS if kind in wanted]


def _how_many_wanting(tables: Tables) -> Floats:
    counted: Floats = _wanting(tables).sum(axis=1).astype(np.float64)
    return counted


def _none(tables: Tables) -> Floats:
    return np.zeros(tables.cases.table.given.count)


def _say_missing(
    tables: Tables, row: int, measure: float, limit: float
) -> tuple[str, str, Mapping[str, Any]]:
    room = tables.room(row)
    wanting = _wanting_of(room)
    severity = SEVERITIES[int(tables.cases.bare_severity[row])]
    named = ", ".join(kind.replace("-", " ") for kind in wanting)
    return (
        f"{room.record.tag} would be {severity} without safeguards, and {measure:.0f} of the "
        f"measures that such a room has are not recorded: {named}.",
        f"Record the {named} of {room.record.tag}, each with its reference and when it is checked.",
        {
            "missing": wanting,
            "severity_without_safeguards": severity,
            "controls": [as_record(control.record) for control in room.controls],
        },
    )


def _check_due(tables: Tables) -> Moments:
    return tables.cases.table.given.controls.check_due


def _is_to_be_checked(tables: Tables) -> Mask:
    """Controls with a date and an interval, and those that nobody ever checked."""
    controls = tables.cases.table.given.controls
    return ~all_of(controls.checked, np.isnat(controls.check_due))


RULES: Final = (
    Threshold(
        slug="controls/missing",
        subject=Subject.ROOMS,
        worse_is=Direction.HIGHER,
        applies=_grave,
        measure=_how_many_wanting,
        limit=_none,
        consequence=MINOR,
        words=_say_missing,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Overdue(
        slug="controls/overdue",
        subject=Subject.CONTROLS,
        applies=_is_to_be_checked,
        due=_check_due,
        overdue="The check of {tag} has been overdue since {due}.",
        never_done="No check of {tag} is recorded, with the interval it holds for.",
        remedy="Check that it still holds, and record the date.",
        consequence=OBSERVATION,
        method="records/due-dates",
        source=COMMON_PRACTICE,
    ),
)
