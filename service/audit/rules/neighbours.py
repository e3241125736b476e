"""Rules on gas that comes from other rooms: each release, in the rooms that it reaches."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.assessment import SEVERITIES
from service.audit.rules import enrichment, flammable, oxygen, toxic
from service.audit.rules.case_rules import CaseRule, told_of_cases
from service.audit.rules.kinds import never
from service.audit.rules.rule import Came, Direction, Judged, Said, Subject, Tables, family
from service.audit.rules.words import as_record, at_least, number
from service.physics.constants import SECONDS_PER_HOUR

METHOD: Final = "neighbours/network"
_ENRICHMENT: Final = "enrichment"


@dataclass(frozen=True, slots=True)
class NeighbourRule:
    """A release in one room that takes another beyond a mark; one a release and gas."""

    case: CaseRule  # the same release in the room itself

    @property
    def slug(self) -> str:
        """By release; oxygen that rises has a name beside oxygen that falls."""
        release = self.case.release
        enriched = family(self.case) == _ENRICHMENT
        return f"neighbours/enriched-{release}" if enriched else f"neighbours/{release}"

    @property
    def subject(self) -> Subject:
        """A finding a room, from the worst case of all that reach it."""
        return Subject.INCOMING

    @property
    def gas(self) -> str | None:
        """The gas judged."""
        return self.case.gas

    @property
    def worse_is(self) -> Direction:
        """As in the room that lets the gas go."""
        return self.case.worse_is

    @property
    def method(self) -> str:
        """Rooms that exchange air."""
        return METHOD

    @property
    def source(self) -> str:
        """Of the limit, which is that of the room reached."""
        return self.case.source

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where gas of the release comes in beyond a mark."""
        if tables.came is None or not tables.came.rows.table.size:
            nothing = np.empty(0)
            return Judged(
                broken=np.empty(0, dtype=np.bool_),
                measure=nothing,
                limit=nothing,
                consequence=np.empty(0, dtype=np.int64),
                turns_at=never(0),
            )
        return self.case.judge(tables.beside(tables.came), at)

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say which room the gas comes from and by which way, and what helps in either."""
        if tables.came is None:
            raise ValueError("No gas comes from another room.")
        statement, evidence = told_of_cases(tables.beside(tables.came), rows)
        came, row = tables.came.rows, rows[0]
        network, place = int(came.network[row]), int(came.place[row])
        source = tables.room(int(came.table.network[row])).record
        through = tables.networks.by[network][place]
        steps = int(tables.networks.steps[network, place])
        way = "" if through is None else f", through {through.tag}"
        far = "next to it" if steps == 1 else f"{steps} steps away"
        severity = SEVERITIES[int(judged.consequence[row])]
        restore = float(came.results.restore[row]) * SECONDS_PER_HOUR
        return Said(
            statement=f"From room {source.tag}, {far}{way}: {statement}",
            remedy=(
                f"Keep the gas from coming: a door that closes by itself, no shared return air, or "
                f"what helps in room {source.tag}. To bring this room back in time takes "
                f"{at_least(restore)} m3/h of outdoor air here."
            ),
            evidence={
                **evidence,
                "from_room": as_record(source),
                "through": None if through is None else as_record(through),
                "steps": steps,
                "severity_here": severity,
                "restore_m3_h": number(restore),
                "others": _others(tables, tables.came, rows),
            },
        )


def _others(tables: Tables, came: Came, rows: Sequence[int]) -> list[dict[str, object]]:
    """The other rooms that the same gas comes from, the worst case of each."""
    worst: dict[int, int] = {}
    for row in rows:
        worst.setdefault(int(came.rows.table.network[row]), row)
    return [
        {
            "from_room": as_record(tables.room(source).record),
            "oxygen_pct": number(100.0 * float(came.rows.results.oxygen[row])),
            "value_pct": number(float(came.cases.decisive_value[row])),
        }
        for source, row in list(worst.items())[1:]
    ]


def _rules() -> tuple[NeighbourRule, ...]:
    families = (oxygen.RULES, enrichment.RULES, toxic.RULES, flammable.RULES)
    return tuple(
        NeighbourRule(rule) for rules in families for rule in rules if isinstance(rule, CaseRule)
    )


RULES: Final = _rules()
