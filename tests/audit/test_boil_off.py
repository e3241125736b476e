"""Normal evaporation into a room: which rate, for how long, against what air."""

import itertools
from dataclasses import replace
from math import exp

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from tests.audit.builders import (
    LITRE,
    NITROGEN,
    NOW,
    PER_DAY,
    PER_HOUR,
    a_basis,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    case_of,
    some_ice,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA
# Gas of a litre of liquid nitrogen at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]
NITROGEN_GAS = 0.806_08 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.028_013_5)
DAYS = 96 / 24  # followed, by the baseline


def released(vessel, **fields):
    """Litres of liquid that a vessel gives off into a room over four days."""
    return case_of(a_room(1e6, vessels=(vessel,), **fields), "boil-off").gas_m3 / NITROGEN_GAS


def a_large(**fields):
    """A vessel of 100 L of which nothing is known but what is given."""
    unknown = {"measured_evaporation": None, "filled_by": "attended"}
    return a_vessel(100, **{**unknown, **fields})


def test_what_was_measured_counts_without_a_factor():
    vessel = a_large(measured_evaporation=2 * PER_DAY, rated_evaporation=1 * PER_DAY)
    assert released(vessel) == pytest.approx(2 * DAYS, rel=1e-9)


def test_what_is_rated_counts_twice():
    """The factor of the basis; common practice, no source."""
    assert released(a_large(rated_evaporation=1 * PER_DAY)) == pytest.approx(2 * DAYS, rel=1e-9)


@pytest.mark.parametrize(
    ("kind", "percent"),
    [
        ("open-dewar", 3),
        ("pressurised-dewar", 2),
        ("freezer", 2.5),
        ("tank", 0.5),
        ("cryostat", 1.5),
        ("magnet", 1.5),
    ],
)
def test_a_vessel_of_unknown_evaporation_loses_by_its_kind(kind, percent):
    """Percent of capacity a day, twice; ranges of open catalogues (from memory)."""
    assert released(a_large(kind=kind)) == pytest.approx(2 * percent * DAYS, rel=1e-9)


def test_evaporation_without_margins_has_no_factor():
    case = case_of(a_room(1e6, vessels=(a_large(rated_evaporation=1 * PER_DAY),)), "boil-off")
    assert case.without_margins["gas_m3"] == pytest.approx(DAYS * NITROGEN_GAS, rel=1e-9)


def test_a_cylinder_gives_off_nothing_by_itself():
    cylinder = replace(a_vessel(kind="cylinder"), measured_evaporation=None)
    releases = {case.release for case in assessed(a_room(vessels=(cylinder,)))[0].cases}
    assert releases == {"largest-vessel", "all-vessels"}


def test_use_and_purge_gas_add_to_it():
    """3 L used a day and 0.01 m3/h of purge gas, over 96 h."""
    vessel = a_large(measured_evaporation=1 * PER_DAY, use=3 * PER_DAY)
    room = a_room(1e6, vessels=(vessel,), purge_flow=0.01 * PER_HOUR, purge_fluid=NITROGEN)
    expected = 4 * DAYS * NITROGEN_GAS + 0.01 * 96
    assert case_of(room, "boil-off").gas_m3 == pytest.approx(expected, rel=1e-9)


def test_purge_gas_alone_is_a_case_of_no_vessel():
    case = case_of(a_room(purge_flow=1 * PER_HOUR), "boil-off")
    assert case.vessels == ()
    assert case.fluids == ("unknown purge gas",)
    assert case.gas_m3 == pytest.approx(96.0, rel=1e-9)


def test_a_vent_outdoors_takes_away_what_evaporates_but_not_what_is_used():
    vented = a_large(measured_evaporation=1 * PER_DAY, use=3 * PER_DAY, vent_to="outdoors")
    assert released(vented) == pytest.approx(3 * DAYS, rel=1e-9)


def test_where_nobody_says_the_gas_goes_into_the_room():
    assert released(a_large(measured_evaporation=PER_DAY, vent_to=None)) == pytest.approx(DAYS)


@pytest.mark.parametrize("filled_by", ["automatic", "attended", None])
def test_a_vessel_that_is_refilled_goes_on(filled_by):
    vessel = a_vessel(10, measured_evaporation=5 * PER_DAY, filled_by=filled_by)
    assert released(vessel) == pytest.approx(5 * DAYS, rel=1e-9)


def test_an_exchanged_vessel_ends_when_it_is_empty():
    vessel = a_vessel(10, measured_evaporation=5 * PER_DAY, filled_by="exchanged")
    assert released(vessel) == pytest.approx(10, rel=1e-9)


def test_dry_ice_loses_a_fiftieth_of_its_full_mass_an_hour_until_it_is_gone():
    """10 kg x 0.02 /h for 50 h: all of it; 0.5466 m3 a kilogram as an ideal gas (methods A-4)."""
    case = case_of(a_room(1000, vessels=(some_ice(10, filled_by="attended"),)), "boil-off")
    assert case.gas_m3 == pytest.approx(10 * 0.5466, rel=1e-3)
    assert case.at_s == pytest.approx(50 * 3600, rel=1e-9)


def test_a_measured_loss_of_ice_wins():
    """2 kg a day over four days."""
    room = a_room(1000, vessels=(some_ice(10, measured_loss=2 / 86_400),))
    assert case_of(room, "boil-off").gas_m3 == pytest.approx(8 * 0.5466, rel=1e-3)


def test_the_basis_says_how_long_it_is_followed():
    vessel = a_large(measured_evaporation=1 * PER_DAY)
    assert released(vessel, basis=a_basis("us")) == pytest.approx(72 / 24, rel=1e-9)


def test_a_closed_room_fills_exponentially():
    """No air: C = C0 exp(-Vg/V) (methods D5)."""
    vessel = a_vessel(20, measured_evaporation=5 * PER_DAY, filled_by="attended")
    case = case_of(a_room(50, kind="walk-in", vessels=(vessel,)), "boil-off")
    assert case.oxygen_pct == pytest.approx(20.95 * exp(-20 * NITROGEN_GAS / 50), rel=1e-8)
    assert case.recovered_s is None


def test_a_ventilated_room_tends_to_what_its_air_allows():
    """Exhaust: Cs = C0 (1 - R/Q) (methods D2); 60 m3/h moved, 20 counted, 24 L a day."""
    vessel = a_large(measured_evaporation=24 * PER_DAY)
    case = case_of(a_room(50, vessels=(vessel,), units=(a_unit(60),)), "boil-off")
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - NITROGEN_GAS / 20), rel=1e-8)


@pytest.mark.parametrize(
    ("arrangement", "flow"), [("exhaust", 14.448), ("supply", 13.448), ("balanced", 13.448)]
)
def test_the_flow_that_holds_the_first_mark_is_the_printed_multiple_of_the_release(
    arrangement, flow
):
    """At 19.5 %: 13.448 R for supply, 14.448 R for exhaust (methods D); mixing factor 3."""
    vessel = a_large(measured_evaporation=24 * PER_DAY, vent_to="room")
    room = a_room(50, vessels=(vessel,), units=(a_unit(5, arrangement=arrangement),), kind="pit")
    case = case_of(room, "boil-off")
    assert case.required_m3_h == pytest.approx(3 * flow * NITROGEN_GAS, rel=1e-4)
    most = max(case.required_m3_h, case_of(room, "filling").required_m3_h)
    assert assessed(room)[0].ventilation.shortfall_m3_h == pytest.approx(most - 5, rel=1e-9)


@pytest.mark.parametrize("filled_by", ["exchanged", "attended"])
def test_the_flow_required_is_the_smallest_that_holds_the_whole_course(filled_by):
    vessel = a_vessel(60, measured_evaporation=40 * PER_DAY, filled_by=filled_by)
    bare = a_room(40, kind="pit", vessels=(vessel,))
    required = case_of(bare, "boil-off").required_m3_h
    enough, short = (
        case_of(replace(bare, units=(a_unit(required * share),)), "boil-off")
        for share in (1 + 1e-6, 1 - 1e-4)
    )
    assert (enough.mark, short.mark) == (0, 1)


def test_a_room_that_holds_by_natural_air_is_short_of_none():
    vessel = a_vessel(10, measured_evaporation=0.5 * PER_DAY, filled_by="attended")
    found = assessed(a_room(50, vessels=(vessel,)))[0].ventilation
    assert found.shortfall_m3_h == 0.0
    assert found.credited_m3_h == found.outdoor_air_m3_h == pytest.approx(0.2 * 50)


def oxygen_by_integration(room, vessels, supply, exhaust, hours):
    """Lowest oxygen of a mixed room by its balance of oxygen, with SciPy's DOP853.

    V dC/dt = C0 max(Qs, Qe - R) + sum(y R) - max(Qs + R, Qe) C (methods D0, E), piece by piece
    between the times at which vessels run empty.
    """
    gas = GAS_CONSTANT * room.temperature / (room.station_pressure * 0.028_013_5)
    rates = [vessel.measured_evaporation * 806.08 * gas for vessel in vessels]
    ends = [
        vessel.capacity_volume / vessel.measured_evaporation
        if vessel.filled_by == "exchanged"
        else np.inf
        for vessel in vessels
    ]
    own = [vessel.fluid.oxygen_fraction for vessel in vessels]
    times = [0.0, *sorted(end for end in ends if end < hours * 3600), hours * 3600]
    level, lowest = 0.2095, 0.2095
    for begin, end in itertools.pairwise(times):
        going = [rate if last > begin else 0.0 for rate, last in zip(rates, ends, strict=True)]
        release = sum(going)
        brought = sum(rate * share for rate, share in zip(going, own, strict=True))
        fresh = max(supply, exhaust - release)
        leaving = max(supply + release, exhaust)

        def balance(_, state, fresh=fresh, brought=brought, leaving=leaving):
            return (0.2095 * fresh + brought - leaving * state) / room.gross_volume

        answer = solve_ivp(balance, (begin, end), [level], "LSODA", rtol=1e-11, atol=1e-14)
        level = float(answer.y[0, -1])
        lowest = min(lowest, level)
    return 100.0 * lowest


@pytest.mark.parametrize(
    "seed", [*range(8), *(pytest.param(seed, marks=pytest.mark.slow) for seed in range(8, 25))]
)
def test_random_rooms_agree_with_an_integrator(seed):
    random = np.random.default_rng(seed)
    mixture = a_fluid(
        "mixture", molar_mass=0.0280135, condensed_density=806.08, oxygen_fraction=0.08
    )
    vessels = tuple(
        a_vessel(
            litres,
            mixture if random.random() < 0.3 else NITROGEN,
            tag=f"V{place}",
            measured_evaporation=litres * random.uniform(0.1, 2.0) * PER_DAY,
            filled_by=str(random.choice(["exchanged", "attended"])),
        )
        for place, litres in enumerate(random.uniform(5, 80, random.integers(1, 5)))
    )
    supply, exhaust = random.uniform(0, 40, 2) * random.integers(0, 2, 2)
    units = (
        a_unit(supply, tag="S", arrangement="supply", mixing_factor=1.0),
        a_unit(exhaust, tag="E", arrangement="exhaust", mixing_factor=1.0),
    )
    room = a_room(
        random.uniform(20, 200),
        kind="pit",  # no natural air
        temperature=random.uniform(278, 303),
        station_pressure=random.uniform(70e3, 103e3),
        vessels=vessels,
        units=units,
    )
    expected = oxygen_by_integration(room, vessels, supply * PER_HOUR, exhaust * PER_HOUR, 96)
    assert case_of(room, "boil-off").oxygen_pct == pytest.approx(expected, rel=1e-6)


def test_it_is_judged_at_the_moment_asked_for():
    vessel = a_vessel(
        20,
        measured_evaporation=5 * PER_DAY,
        filled_by="exchanged",
        contents_volume=5 * LITRE,
        count_due=NOW.replace(hour=9),
    )
    room = a_room(1e4, basis=a_basis(contents="recorded"), vessels=(vessel,))
    before, after = (assessed(room, at=NOW.replace(hour=hour))[0].cases[0] for hour in (8, 9))
    assert before.gas_m3 == pytest.approx(5 * NITROGEN_GAS, rel=1e-9)
    assert after.gas_m3 == pytest.approx(20 * NITROGEN_GAS, rel=1e-9)
