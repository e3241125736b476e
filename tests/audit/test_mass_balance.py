"""No gas is lost: what was there and is let go is in the room or has left it, in every case."""

from itertools import pairwise

import numpy as np
from numpy.testing import assert_allclose

from service.audit.cases import case_table
from service.audit.solve import solve, starts
from tests.audit.builders import (
    CARBON_DIOXIDE,
    HELIUM,
    METHANE,
    NOW,
    OXYGEN,
    a_basis,
    a_line,
    a_magnet,
    a_room,
    a_unit,
    a_vessel,
    some_ice,
)

# Points of Gauss and Legendre: exact for what moves by an exponential of a few turnovers.
NODES, WEIGHTS = np.polynomial.legendre.leggauss(60)
PIECES = 400


def rooms():
    """Rooms of every arrangement with every release, mixed at once and displaced."""
    vessels = (
        a_vessel(40, insulation="vacuum-powder", mobile=True, working_pressure=3e5),
        a_vessel(20, OXYGEN, filled_by="attended"),
        a_vessel(10, METHANE, filled_by="automatic"),
        a_vessel(5, HELIUM, measured_evaporation=1e-8),
        a_magnet(30),
        some_ice(20),
    )
    lines = (a_line(restrictor=0.02), a_line(tag="L-2", fluid=CARBON_DIOXIDE, phase="gas"))
    return [
        a_room(
            80.0,
            tag=f"{arrangement}-{mixing}",
            vessels=vessels,
            lines=lines,
            units=(a_unit(flow, arrangement=arrangement),),
            basis=a_basis(instant_mixing=mixing),
        )
        for arrangement in ("supply", "exhaust", "balanced")
        for flow in (200.0, 3000.0)
        for mixing in ("displacement", "mixing")
    ]


def test_the_balance_of_gas_closes_to_a_billionth_in_every_case_of_a_room():
    """By quadrature of the fraction that leaves, with the outflow of the balance of volume."""
    table = case_table(rooms(), NOW)
    run = solve(table).course
    segments = table.durations.shape[1]
    supply = np.broadcast_to(table.supply, (table.size, segments))
    exhaust = np.broadcast_to(table.exhaust, (table.size, segments))
    # Methods D0: what comes in and is not drawn out leaks out; what is drawn beyond it leaks in.
    outflow = np.maximum(supply + table.rates, exhaust)
    left = np.zeros(table.size)
    for segment in range(segments):
        length, rate = table.durations[:, segment], outflow[:, segment] / table.volume
        start, steady = (
            run.ends[:, segment],
            np.where(
                outflow[:, segment] > 0.0,
                table.rates_level[:, segment]
                / np.where(outflow[:, segment] > 0, outflow[:, segment], 1),
                0.0,
            ),
        )
        # A long segment in pieces that grow, so that its fast beginning is seen.
        ends = np.concatenate([[0.0], np.geomspace(1e-9, 1.0, PIECES)])
        for begin, end in pairwise(ends):
            times = length[:, np.newaxis] * (0.5 * (end - begin) * NODES + 0.5 * (end + begin))
            turned = np.minimum(rate[:, np.newaxis] * times, 700.0)
            level = steady[:, np.newaxis] + (start - steady)[:, np.newaxis] * np.exp(-turned)
            mean = (level * WEIGHTS).sum(axis=1) * 0.5 * (end - begin)
            left += outflow[:, segment] * length * mean
    let_go = (table.rates_level * table.durations).sum(axis=1)
    held = table.volume * (run.ends[:, -1] - run.ends[:, 0])
    assert table.size > 500
    scale = np.maximum(let_go, table.volume * run.ends[:, 0])
    assert_allclose((held + left - let_go) / np.where(scale > 0, scale, 1.0), 0.0, atol=1e-9)


def test_what_is_let_go_at_once_is_in_the_room_or_was_pushed_out_of_it():
    """Displacement keeps the gas alone until the room is full of it; mixing lets its share go."""
    table = case_table(rooms(), NOW)
    run = solve(table).course
    at_once = np.flatnonzero(table.at_once)
    before = starts(table, np.arange(table.size))[at_once]
    gas, level = table.instant[at_once], table.instant_level[at_once]
    volume, after = table.volume[at_once], run.ends[at_once, 0]
    pushed = before * volume + level - after * volume
    assert pushed.min() >= -1e-9 * level.max()
    # No more can have been pushed out than the volume of gas that came in, at the worst level.
    assert np.all(pushed <= gas * np.maximum(after, before) + 1e-9)
