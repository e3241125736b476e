"""The same rooms with each stacked factor set to 1, and with what is assumed at its mildest."""

from dataclasses import replace

import numpy as np

from service.audit.columns import ARRANGEMENTS, UNKNOWN, Columns

_SUPPLY = ARRANGEMENTS.index("supply")


def without_margins(given: Columns) -> Columns:
    """Net volume as gross, and no factor for filling, evaporation, mixing or arrangement.

    So that a calculation by hand can be found beside the case.
    """
    ones, none = np.ones(given.count), np.zeros(given.count)
    units = given.units
    return replace(
        given,
        rooms=replace(given.rooms, occupied_fraction=none),
        bases=replace(given.bases, fill_margin=none, evaporation_factor=ones, mixing_factor=ones),
        units=replace(
            units,
            mixing_factor=np.full(units.room.size, np.nan),
            arrangement=np.where(units.arrangement == UNKNOWN, _SUPPLY, units.arrangement),
        ),
    )
