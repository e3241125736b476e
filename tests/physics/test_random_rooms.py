"""Outside: scipy, DOP853, on the volumes of air, oxygen and gas, not on the form that is solved."""

import numpy as np
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from service.physics.constants import OXYGEN_IN_AIR
from service.physics.ventilation import (
    course,
    dilution_rate,
    fraction_from_oxygen,
    oxygen_from_fraction,
)

ROOMS, SEGMENTS = 40, 5


def rooms(seed):
    """Rooms whose release, supply and exhaust all change from one segment to the next."""
    generator = np.random.default_rng(seed)

    def flow(most, present):
        sizes = generator.uniform(0.0, most, (ROOMS, SEGMENTS))
        return np.where(generator.uniform(size=(ROOMS, SEGMENTS)) < present, sizes, 0.0)

    return {
        "durations": generator.uniform(60.0, 1500.0, (ROOMS, SEGMENTS)),
        "release": flow(0.2, 0.7),
        "supply": flow(0.3, 0.6),
        "exhaust": flow(0.4, 0.6),
        "volume": generator.uniform(20.0, 300.0, ROOMS),
        "own": generator.choice([0.0, OXYGEN_IN_AIR, 1.0], ROOMS),
        "start": generator.uniform(0.1, OXYGEN_IN_AIR, ROOMS),
    }


def oxygen_at_the_ends(given, row):
    """Oxygen after each segment: what flows in and out of the room, counted by the cubic metre."""
    oxygen = [given["start"][row]]
    for segment in range(SEGMENTS):
        release, supply, exhaust = (
            given[name][row, segment] for name in ("release", "supply", "exhaust")
        )
        surplus = supply + release - exhaust
        # What the fans do not balance goes through the leaks: room air out, or outside air in.
        leaks_out, leaks_in = max(surplus, 0.0), max(-surplus, 0.0)

        def change(
            _,
            held,
            inward=OXYGEN_IN_AIR * (supply + leaks_in) + given["own"][row] * release,
            outward=exhaust + leaks_out,
            volume=given["volume"][row],
        ):
            return inward - outward * held / volume

        volume = given["volume"][row]
        # The integrator's own first step underflows harmlessly.
        with np.errstate(all="ignore"):
            solved = solve_ivp(
                change,
                (0.0, given["durations"][row, segment]),
                [oxygen[-1] * volume],
                "DOP853",
                rtol=1e-10,
                atol=1e-12,
            )
        oxygen.append(solved.y[0, -1] / volume)
    return oxygen


def test_rooms_of_changing_release_supply_and_exhaust_agree_with_their_volume_balance():
    given = rooms(11)
    run = course(
        given["durations"],
        release=given["release"],
        supply=given["supply"],
        exhaust=given["exhaust"],
        volume=given["volume"],
        start=fraction_from_oxygen(given["start"]),
        dilution=dilution_rate(given["release"], given["own"][:, np.newaxis]),
    )
    expected = [oxygen_at_the_ends(given, row) for row in range(ROOMS)]
    assert_allclose(oxygen_from_fraction(run.ends), expected, rtol=1e-6)
    # The draw holds rooms of every kind: surplus and make-up, poorer and richer than air.
    surplus = given["supply"] + given["release"] > given["exhaust"]
    assert np.mean(surplus) > 0.2
    assert np.mean(~surplus) > 0.2
    assert oxygen_from_fraction(run.ends).max() > 0.3
    assert oxygen_from_fraction(run.ends).min() < 0.1
