"""What an assessment answers of the gas that comes from other rooms, and of where its own goes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Final

import numpy as np

from service.audit.assessment import Case, Network, Reached
from service.audit.incoming import Incoming
from service.audit.networks import NO_ROOM
from service.audit.rules.rule import Tables
from service.audit.told_cases import told_cases
from service.physics.arrays import rounded
from service.physics.constants import SECONDS_PER_HOUR

_ELSEWHERE: Final = "It comes from another room, where less must be let go."
METHOD: Final = "neighbours/network"


def told_incoming(tables: Tables, without: Incoming | None) -> Sequence[Case]:
    """Tell the cases of other rooms; those without margins are row by row."""
    if tables.came is None or without is None:
        return ()
    told = told_cases(tables.beside(tables.came), without.table, without.results)
    sources = [tables.room(row).record for row in tables.came.rows.table.network.tolist()]
    return [
        replace(case, from_room=source, required_reason=_ELSEWHERE, method=(*case.method, METHOD))
        for case, source in zip(told, sources, strict=True)
    ]


def told_network(tables: Tables, row: int) -> Network | None:
    """Tell which rooms the gas of a room can reach; None where it is joined to none."""
    found = tables.networks
    places = np.flatnonzero(found.source == row)
    if not places.size:
        return None
    network = int(places[0])
    reached = zip(
        found.rooms[network].tolist(),
        found.steps[network].tolist(),
        found.by[network],
        strict=False,
    )
    return Network(
        rooms=tuple(
            Reached(tables.room(room).record, step, by)
            for room, step, by in reached
            if room != NO_ROOM and by is not None
        ),
        cut=tuple((cut.record, cut.room, cut.beyond) for cut in found.cut[network]),
        assumed=tuple(
            (record, fields, float(rounded(np.float64(flow * SECONDS_PER_HOUR))))
            for record, fields, flow in found.assumed[network]
        ),
    )
