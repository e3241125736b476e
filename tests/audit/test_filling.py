"""Filling a room's vessels: what is lost, for how long, in which order."""

import itertools
from dataclasses import replace
from math import exp

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.audit.builders import (
    ARGON,
    HELIUM,
    LATER,
    NITROGEN,
    NITROUS_OXIDE,
    OXYGEN,
    a_basis,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    case_of,
    severity,
    some_ice,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA
# Gas of a litre of liquid nitrogen at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]
NITROGEN_GAS = 0.806_08 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.028_013_5)
HELIUM_GAS = 0.124_67 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.004_002_6)
A_MINUTE = 1e-3 / 60.0  # [m3/s] of a litre a minute


def filled(litres=50.0, fluid=NITROGEN, flow=None, **fields):
    """A vessel filled in the room, that loses nothing otherwise."""
    defaults = {"measured_evaporation": 0.0, "filled_by": "attended"}
    return a_vessel(
        litres,
        fluid,
        **{**defaults, "fill_flow": None if flow is None else flow * A_MINUTE, **fields},
    )


def lost(*vessels, **fields):
    """Gas lost in a session, in litres of liquid nitrogen."""
    return case_of(a_room(1e6, vessels=vessels, **fields), "filling").gas_m3 / NITROGEN_GAS


@pytest.mark.parametrize(
    ("fluid", "state", "share"),
    [
        (NITROGEN, "in-service", 0.10),
        (NITROGEN, "empty", 0.30),
        (HELIUM, "in-service", 0.20),
        (HELIUM, "empty", 0.30),
    ],
)
def test_a_share_of_the_liquid_is_lost_in_the_transfer(fluid, state, share):
    """Nitrogen 5 to 10 % into cold, 10 to 30 % into warm; helium 10 to 20 % (methods G2)."""
    vessel = filled(50, fluid, state=state)
    gas = HELIUM_GAS if fluid is HELIUM else NITROGEN_GAS
    case = case_of(a_room(1e6, vessels=(vessel,)), "filling")
    assert case.gas_m3 == pytest.approx(share * 50 * gas, rel=1e-9)


def test_the_basis_says_how_much():
    basis = a_basis(fill_loss_fraction=0.08, warm_fill_loss=0.25)
    assert lost(filled(50), basis=basis) == pytest.approx(4.0, rel=1e-9)
    assert lost(filled(50, state="empty"), basis=basis) == pytest.approx(12.5, rel=1e-9)


@pytest.mark.parametrize(("flow", "minutes"), [(None, 5.0), (10.0, 5.0), (25.0, 2.0)])
def test_it_takes_as_long_as_the_flow_fills_the_vessel(flow, minutes):
    """10 L/min where none is recorded: common practice, no source. 50 L at 10 L/min: 5 min.

    No air: C = C0 exp(-Vg/V) at the end of it (methods D5).
    """
    room = a_room(100, kind="pit", vessels=(filled(50, flow=flow),))
    case = case_of(room, "filling")
    assert case.at_s == pytest.approx(60 * minutes, rel=1e-9)
    assert case.oxygen_pct == pytest.approx(20.95 * exp(-0.1 * 50 * NITROGEN_GAS / 100), rel=1e-9)


def test_vessels_without_a_line_are_filled_one_after_another():
    """Three times 5 min, and then the room clears: no more than one flow at a time."""
    vessels = tuple(filled(50, tag=tag) for tag in "ABC")
    room = a_room(100, vessels=vessels, units=(a_unit(600, mixing_factor=1.0),))
    case = case_of(room, "filling")
    assert case.at_s == pytest.approx(900, rel=1e-9)
    rate = 0.1 * 10 * 60 * NITROGEN_GAS  # m3/h
    # Exhaust: X = R/Q (1 - exp(-Q t/V)) (methods D2).
    assert case.oxygen_pct == pytest.approx(
        20.95 * (1 - rate / 600 * (1 - exp(-600 / 100 * 0.25))), rel=1e-9
    )


@pytest.mark.parametrize(
    ("vessel", "why"),
    [
        (filled(filled_by="exchanged"), "it is filled elsewhere"),
        (filled(vent_to="outdoors"), "what is lost goes outdoors"),
        (filled(kind="cylinder"), "a cylinder is not filled by transfer"),
        (filled(kind="magnet", filled_by=None), "nobody says that it is filled here"),
        (filled(state="withdrawn"), "it is not there"),
        (some_ice(10, filled_by="attended"), "ice is not poured"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_nothing_is_lost_where_nothing_is_filled(vessel, why):
    releases = {case.release for case in assessed(a_room(vessels=(vessel,)))[0].cases}
    assert "filling" not in releases, why


@pytest.mark.parametrize("filled_by", ["automatic", "attended", None])
def test_a_vessel_is_filled_here_unless_it_is_known_to_be_exchanged(filled_by):
    assert lost(filled(50, filled_by=filled_by)) == pytest.approx(5.0, rel=1e-9)


def test_a_magnet_is_filled_here_where_somebody_says_so():
    assert lost(filled(50, kind="magnet", filled_by="attended")) == pytest.approx(5.0, rel=1e-9)


def test_an_empty_vessel_that_was_counted_is_still_filled():
    vessel = filled(50, state="empty", count_due=LATER)
    assert lost(vessel) == pytest.approx(15.0, rel=1e-9)


def test_a_session_longer_than_what_is_followed_keeps_its_end():
    """100 h of filling in 96: 4 h of the first are left out, nothing of the last."""
    slow, fast = filled(600, flow=0.1, tag="slow"), filled(60, flow=1.0, tag="fast")
    room = a_room(1e6, vessels=(fast, slow), basis=a_basis(sustained_h=96))
    case = case_of(room, "filling")
    # 600 L at 0.1 L/min take 100 h, 60 L at 1 L/min one: 95 h of the slow one remain.
    expected = 0.1 * (0.1 * 60 * 95 + 60) * NITROGEN_GAS
    assert case.gas_m3 == pytest.approx(expected, rel=1e-9)


flows = st.sampled_from([2.0, 5.0, 10.0, 40.0])
sessions = st.lists(
    st.tuples(st.sampled_from([5.0, 20.0, 80.0]), flows), min_size=2, max_size=4, unique=True
)


def peak_of_session(rates, volume, supply, exhaust):
    """Highest fraction of gas of flows one after another (methods D6), step by step."""
    fraction = highest = 0.0
    for rate, seconds in rates:
        leaving = max(supply + rate, exhaust)
        steady = rate / leaving
        fraction = steady + (fraction - steady) * exp(-leaving * seconds / volume)
        highest = max(highest, fraction)
    return highest


@pytest.mark.slow
@settings(max_examples=20)
@given(sessions, st.sampled_from(["supply", "exhaust"]), st.sampled_from([0.0, 30.0, 500.0]))
def test_no_order_of_a_session_is_worse_than_the_one_taken(session, arrangement, moved):
    vessels = tuple(
        filled(litres, flow=flow, tag=f"V{place}") for place, (litres, flow) in enumerate(session)
    )
    unit = a_unit(moved, arrangement=arrangement, mixing_factor=1.0)
    case = case_of(a_room(80, kind="pit", vessels=vessels, units=(unit,)), "filling")
    rates = [
        (0.1 * flow * A_MINUTE * 1e3 * NITROGEN_GAS, 60 * litres / flow) for litres, flow in session
    ]
    air = moved / 3600
    supply, exhaust = (air, 0.0) if arrangement == "supply" else (0.0, air)
    worst = max(
        peak_of_session(order, 80.0, supply, exhaust) for order in itertools.permutations(rates)
    )
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - worst), rel=1e-9)


class TestSeverity:
    """It happens without any accident: at least major, critical beyond the second mark."""

    @pytest.mark.parametrize(
        ("volume", "expected"), [(60.0, None), (45.0, "major"), (15.0, "critical")]
    )
    def test_by_the_mark_whatever_the_safeguards(self, volume, expected):
        """50 L lose 5 L, 3.461 m3 of gas, without air: 19.77, 19.40 and 16.63 %."""
        room = a_room(volume, kind="pit", vessels=(filled(50),))
        assert severity(room, "oxygen/filling") == expected

    def test_it_is_shown_without_power_and_counts_only_as_measured(self):
        room = a_room(60, vessels=(filled(50),), units=(a_unit(600),))
        counts = {
            case.airflow: case.counts
            for case in assessed(room)[0].cases
            if case.release == "filling"
        }
        assert counts == {"as-measured": True, "design": False, "lost": False}


def test_the_flow_asked_for_just_holds_a_whole_session():
    """Finite: less than R C0/(C0 - Ct) for ever (methods D), and exactly enough by D6."""
    vessels = tuple(filled(50, tag=tag) for tag in "AB")
    room = a_room(60, kind="pit", vessels=vessels, units=(a_unit(1, mixing_factor=1.0),))
    required = case_of(room, "filling").required_m3_h
    assert 0.0 < required < 14.448 * 0.1 * 10 * 60 * NITROGEN_GAS
    marks = [
        case_of(replace(room, units=(a_unit(required * share, mixing_factor=1.0),)), "filling").mark
        for share in (1 + 1e-6, 1 - 1e-4)
    ]
    assert marks == [0, 1]
    assert assessed(room)[0].ventilation.deciding_case == "filling/as-measured"


def test_filling_with_oxygen_enriches():
    """No air, 5 L of liquid oxygen: C = 1 - (1 - C0) exp(-Vg/V); gas 0.8573 m3/L (E_20)."""
    room = a_room(100, kind="pit", vessels=(filled(50, OXYGEN),))
    case = case_of(room, "filling", hazard="oxygen-high")
    assert case.oxygen_pct == pytest.approx(
        100 * (1 - (1 - 0.2095) * exp(-5 * 0.8573 / 100)), rel=2e-4
    )


def test_filling_with_two_gases_is_a_session_of_each_hazard():
    """Nitrous oxide is a toxic session by itself, and one with argon for the oxygen."""
    vessels = (filled(10, NITROUS_OXIDE), filled(20, ARGON))
    room = a_room(200, vessels=vessels)
    both, toxic = case_of(room, "filling"), case_of(room, "filling", hazard="toxic")
    assert set(both.fluids) == {"argon", "nitrous-oxide"}
    assert toxic.fluids == ("nitrous-oxide",)
    assert toxic.gas_m3 < both.gas_m3
