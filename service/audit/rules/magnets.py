"""Rules on the records of magnets: whether their helium finds its way outdoors."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

import numpy as np

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import Moments, all_of
from service.audit.inventory import MAGNET, QUENCH_DURATION
from service.audit.rules.kinds import Missing, Overdue
from service.audit.rules.rule import Subject, Tables, vessel_record
from service.audit.severity import MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Mask

_SOURCE: Final = (
    "published investigations of a blocked quench pipe, in general terms; " + COMMON_PRACTICE
)
_Words = tuple[str, str, Mapping[str, Any]]


def _magnets(tables: Tables) -> Mask:
    table = tables.cases.table
    magnets: Mask = (table.given.vessels.kind == MAGNET) & table.stock.present
    return magnets


def _without_record(tables: Tables) -> Mask:
    return _magnets(tables) & ~tables.cases.table.given.vessels.has_quench


def _say_no_record(tables: Tables, row: int) -> _Words:
    return (
        f"What happens when {vessel_record(tables, row).tag} quenches is not recorded: it is "
        "judged as a vessel that lets all go at once.",
        "Record how long a quench lasts, its pipe, and the share of the helium that comes into "
        "the room.",
        {"quench": None},
    )


def _without_pipe(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return _magnets(tables) & vessels.has_quench & ~vessels.has_pipe


def _say_no_pipe(tables: Tables, row: int) -> _Words:
    return (
        f"No quench pipe of {vessel_record(tables, row).tag} is recorded: all of its helium is "
        "taken to come into the room.",
        "Record the quench pipe with its inspection; fit one if there is none.",
        {"pipe": None},
    )


def _piped(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return _magnets(tables) & vessels.has_quench & vessels.has_pipe


def _blocked(tables: Tables) -> Mask:
    return all_of(_piped(tables), tables.cases.table.given.vessels.outlet_clear == 0)


def _say_blocked(tables: Tables, row: int) -> _Words:
    return (
        f"The outlet of the quench pipe of {vessel_record(tables, row).tag} is recorded as not "
        "clear: a quench would come into the room.",
        "Clear the outlet before the magnet is energised again, have the pipe inspected, and "
        "record both.",
        {"outlet_clear": False},
    )


def _outlet_unknown(tables: Tables) -> Mask:
    return all_of(_piped(tables), tables.cases.table.given.vessels.outlet_clear < 0)


def _say_unknown(tables: Tables, row: int) -> _Words:
    return (
        f"Whether the outlet of the quench pipe of {vessel_record(tables, row).tag} is clear is "
        "not recorded: it is not relied on.",
        "Look at the outlet, and record what was found.",
        {"outlet_clear": None},
    )


def _pipe_due(tables: Tables) -> Moments:
    return tables.cases.table.given.vessels.pipe_due


def _without_duration(tables: Tables) -> Mask:
    vessels = tables.cases.table.given.vessels
    return all_of(_magnets(tables), vessels.has_quench, np.isnan(vessels.quench_duration))


def _say_duration(tables: Tables, row: int) -> _Words:
    return (
        f"How long a quench of {vessel_record(tables, row).tag} lasts is not recorded: a quick one "
        f"of {QUENCH_DURATION:.0f} s is assumed for its peak.",
        "Record the duration that its maker gives.",
        {"duration_s": None, "assumed_s": QUENCH_DURATION},
    )


RULES: Final = (
    Missing(
        slug="vessels/quench-not-recorded",
        subject=Subject.VESSELS,
        missing=_without_record,
        consequence=OBSERVATION,
        words=_say_no_record,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
    Missing(
        slug="vessels/quench-pipe-missing",
        subject=Subject.VESSELS,
        missing=_without_pipe,
        consequence=MINOR,
        words=_say_no_pipe,
        method="records/present",
        source=_SOURCE,
    ),
    Missing(
        # Judging names the incident and no severity; a pipe known to be blocked is no observation.
        slug="vessels/quench-pipe-blocked",
        subject=Subject.VESSELS,
        missing=_blocked,
        consequence=MAJOR,
        words=_say_blocked,
        method="records/present",
        source=_SOURCE,
    ),
    Missing(
        slug="vessels/quench-outlet-unknown",
        subject=Subject.VESSELS,
        missing=_outlet_unknown,
        consequence=OBSERVATION,
        words=_say_unknown,
        method="records/present",
        source=_SOURCE,
    ),
    Overdue(
        slug="vessels/quench-pipe-inspection-overdue",
        subject=Subject.VESSELS,
        applies=_piped,
        due=_pipe_due,
        overdue="The inspection of the quench pipe of {tag} has been overdue since {due}.",
        never_done="No inspection of the quench pipe of {tag} is recorded, with the interval it "
        "holds for.",
        remedy="Have the quench pipe inspected along its whole length, and record the date.",
        consequence=MINOR,
        method="records/due-dates",
        source=_SOURCE,
    ),
    Missing(
        slug="vessels/quench-duration-missing",
        subject=Subject.VESSELS,
        missing=_without_duration,
        consequence=OBSERVATION,
        words=_say_duration,
        method="records/present",
        source=COMMON_PRACTICE,
    ),
)
