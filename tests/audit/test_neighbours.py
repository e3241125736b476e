"""Gas that goes from room to room: networks, cuts, cases, findings (design 8, methods L)."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp

from service.audit.judge import assess_rooms
from service.audit.rules.registry import RULES
from service.audit.rules.rule import Subject
from tests.audit.accident_rooms import broken, leaking, quenching
from tests.audit.builders import (
    CARBON_DIOXIDE,
    HELIUM,
    HYDROGEN,
    METHANE,
    NITROUS_OXIDE,
    NOW,
    OXYGEN,
    PER_DAY,
    PER_HOUR,
    a_basis,
    a_detector,
    a_door,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    some_ice,
)

AIR = 20.95
LITRE_OF_NITROGEN = 0.69202  # [m3] of gas at 20 degrees Celsius; methods A-2


def a_lab(*vessels, volume=100.0, doors=(), **fields):
    return a_room(volume, tag="LAB", vessels=vessels, openings=tuple(doors), **fields)


def a_hall(*doors, volume=200.0, **fields):
    return a_room(volume, tag="HALL", openings=tuple(doors), **fields)


def joined(*vessels, door=None, hall=None, lab=None):
    """A laboratory and a hall, with a door between them."""
    said = {"tag": "O-1", **(door or {})}
    return (
        a_lab(*vessels, doors=(a_door("room-HALL", **said),), **(lab or {})),
        a_hall(a_door("room-LAB", **said), **(hall or {})),
    )


def incoming(assessment, release="largest-vessel", hazard="oxygen-low", airflow="as-measured"):
    found = [
        case
        for case in assessment.incoming
        if (case.release, case.hazard, case.airflow) == (release, hazard, airflow)
    ]
    assert len(found) == 1
    return found[0]


def findings(assessment, rule):
    return [each for each in assessment.judgements if each.rule == rule]


def test_gas_comes_through_an_open_door_and_the_finding_names_the_room_it_comes_from():
    lab, hall = assessed(*joined(a_vessel(100)))
    case = incoming(hall)
    assert case.from_room == lab.room
    assert case.oxygen_pct < 19.5
    (found,) = findings(hall, "neighbours/largest-vessel")
    assert "From room LAB, next to it, through O-1" in found.statement
    assert "LAB" in found.remedy
    assert found.evidence["from_room"]["tag"] == "LAB"
    assert found.subject == hall.room
    assert lab.incoming == ()
    assert not [each for each in lab.judgements if each.family == "neighbours"]


def test_the_course_in_the_other_room_is_that_of_an_ode_solver():
    """DOP853 on the balance of two rooms with an exchange of 360 m3/h and a fan in the hall."""
    flow, fan = 0.1, 0.05
    rooms = joined(
        a_vessel(100, measured_evaporation=0.0),
        door={"exchange_flow": flow},
        hall={
            "kind": "walk-in",
            "units": (a_unit(fan * 3600.0, arrangement="supply", mixing_factor=1.0),),
        },
        lab={"kind": "walk-in"},
    )
    _, hall = assessed(*rooms)
    case = incoming(hall)
    gas = 100 * 806.08 / (101_325.0 * 0.0280135 / (8.314462618 * 293.15))  # ideal gas
    start = min(gas * 1e-3 / 100.0, 1.0)

    def change(_, level):
        lab_gas, hall_gas = level
        # What the fan of the hall blows in leaves the hall.
        return [
            flow * (hall_gas - lab_gas) / 100.0,
            (flow * (lab_gas - hall_gas) - fan * hall_gas) / 200.0,
        ]

    with np.errstate(all="ignore"):
        solved = solve_ivp(
            change, (0.0, 20_000.0), [start, 0.0], method="DOP853", rtol=1e-11, max_step=5.0
        )
    place = int(np.argmax(solved.y[1]))
    assert_allclose(case.oxygen_pct, AIR * (1.0 - solved.y[1][place]), rtol=1e-6)
    assert_allclose(case.at_s, solved.t[place], atol=6.0)
    deficient = 1.0 - 19.5 / AIR
    rising = np.interp(deficient, solved.y[1][: place + 1], solved.t[: place + 1])
    assert_allclose(case.to_deficient_s, rising, rtol=5e-3)


def test_an_open_door_of_which_nothing_else_is_known_passes_what_one_degree_moves():
    """Methods L5: 0.100 m3/s through 0.9 by 2.1 m at 1 K, and that is said to be assumed."""
    lab, _ = assessed(*joined(a_vessel(50), door={"width": None, "height": None}))
    ((opening, fields, flow),) = lab.network.assumed
    assert opening.tag == "O-1"
    assert fields == ("exchange_flow_m3_h", "width_m", "height_m")
    assert_allclose(flow * PER_HOUR, 0.100, rtol=5e-3)


@pytest.mark.parametrize(
    ("door", "comes"),
    [
        ({"normally_open": False}, False),
        ({"normally_open": None}, True),
        ({"normally_open": False, "exchange_flow": 0.05}, True),
        ({"normally_open": False, "inflow": None}, False),
    ],
)
def test_air_passes_what_is_not_said_to_be_shut_or_has_a_flow(door, comes):
    lab, hall = assessed(*joined(a_vessel(100), door=door))
    assert (lab.network is not None) is comes
    assert bool(hall.incoming) is comes


def test_a_room_joined_to_nothing_equals_the_room_alone():
    vessel = a_vessel(100)
    alone = assessed(a_lab(vessel))[0]
    beside, _ = assessed(a_lab(vessel), a_hall())
    assert beside == alone
    shut, _ = assessed(*joined(vessel, door={"normally_open": False}))
    assert shut.cases == alone.cases


def test_the_room_of_the_release_gets_no_credit_for_an_open_door():
    """Judging 2: open doors and openings are never credited to the room of the release."""
    vessel = a_vessel(30)
    alone = assessed(a_lab(vessel))[0]
    lab, _ = assessed(*joined(vessel, door={"exchange_flow": 1.0}))
    assert lab.cases == alone.cases


def chain(count, **source):
    """A row of rooms, each with a door to the next; the first lets gas go."""
    rooms = []
    for place in range(count):
        doors = [
            a_door(f"room-R{other}", tag=f"O-{min(place, other)}")
            for other in (place - 1, place + 1)
            if 0 <= other < count
        ]
        vessels = (a_vessel(200),) if place == 0 else ()
        rooms.append(a_room(60, tag=f"R{place}", openings=tuple(doors), vessels=vessels, **source))
    return rooms


def test_a_network_goes_as_many_steps_as_the_basis_says_and_tells_where_it_was_cut():
    answers = assessed(*chain(5))
    assert [each.room.tag for each in answers[0].network.rooms] == ["R1", "R2"]
    assert [each.steps for each in answers[0].network.rooms] == [1, 2]
    ((through, room, beyond),) = answers[0].network.cut
    assert (through.tag, room.tag, beyond) == ("O-2", "R2", "room-R3")
    assert answers[3].incoming == answers[4].incoming == ()
    further = assessed(*chain(5, basis=a_basis(neighbour_steps=3)))
    assert further[3].incoming
    none = assessed(*chain(5, basis=a_basis(neighbour_steps=0)))
    assert not any(each.incoming for each in none)


def test_adding_a_room_beyond_the_cut_changes_nothing():
    three, four = assessed(*chain(3)), assessed(*chain(4))
    for few, many in zip(three[:2], four[:2], strict=True):
        assert few.cases == many.cases
        assert few.incoming == many.incoming
    assert three[2].incoming == four[2].incoming


def test_a_network_has_twelve_rooms_at_most_and_those_with_the_largest_flow():
    doors = [
        a_door(f"room-S{place}", tag=f"O-{place}", exchange_flow=0.01 * (place + 1))
        for place in range(20)
    ]
    lab = a_lab(a_vessel(200), doors=doors)
    others = [
        a_room(60, tag=f"S{place}", openings=(replace(door, other_room_id="room-LAB"),))
        for place, door in enumerate(doors)
    ]
    answers = assessed(lab, *others)
    reached = {each.room.tag for each in answers[0].network.rooms}
    assert reached == {f"S{place}" for place in range(9, 20)}
    assert len(answers[0].network.cut) == 9
    assert {answer.room.tag for answer in answers if answer.incoming} == reached


def test_a_unit_that_blows_back_air_of_two_rooms_carries_gas_between_them():
    """Methods L4 and L-3: a release in one room shows up in all."""
    unit = a_unit(720.0, arrangement="supply", outdoor_air_fraction=0.2, mixing_factor=1.0)
    first = a_room(
        60,
        tag="A",
        kind="walk-in",
        units=(replace(unit, share=0.5),),
        vessels=(
            a_vessel(
                1000,
                measured_evaporation=None,
                rated_evaporation=0.0,
                use=0.01 / LITRE_OF_NITROGEN * 1e-3,
            ),
        ),
    )
    second = a_room(40, tag="B", kind="walk-in", units=(replace(unit, share=0.5),))
    one, other = assessed(first, second)
    assert [each.through.tag for each in one.network.rooms] == [unit.record.tag]
    case = incoming(other, release="boil-off")
    # Steady C of L-3 with R 0.01 m3/s: 0.175980; the fluid is ideal here, which is 0.04 % more gas.
    assert_allclose(case.oxygen_pct, 17.598, rtol=1e-3)


def test_an_exhaust_or_a_unit_of_outdoor_air_alone_joins_nothing():
    for fields in (
        {"arrangement": "exhaust"},
        {"arrangement": "supply", "outdoor_air_fraction": 1.0},
    ):
        unit = a_unit(720.0, **fields)
        rooms = [
            a_room(60, tag=tag, units=(replace(unit, share=0.5),), vessels=(a_vessel(100),))
            for tag in ("A", "B")
        ]
        assert [each.network for each in assessed(*rooms)] == [None, None]


def test_without_power_what_stands_still_carries_nothing():
    unit = a_unit(720.0, arrangement="supply", outdoor_air_fraction=0.0, standby_power=False)
    evaporates = a_vessel(1000, measured_evaporation=50 * PER_DAY)
    rooms = [
        a_room(
            60, tag="A", kind="walk-in", units=(replace(unit, share=0.5),), vessels=(evaporates,)
        ),
        a_room(40, tag="B", kind="walk-in", units=(replace(unit, share=0.5),)),
    ]
    answers = assessed(*rooms)[1].incoming
    assert {case.airflow for case in answers if case.release == "boil-off"} == {"as-measured"}


def test_what_the_source_cannot_hold_fills_the_next_room():
    """Methods C1: 200 L make 138 m3; 60 m3 stay, 78 m3 go on into a room of 200 m3."""
    _, hall = assessed(
        *joined(
            a_vessel(200, measured_evaporation=0.0),
            lab={"volume": 60.0},
            door={"exchange_flow": 0.0},
        )
    )
    case = incoming(hall)
    rest = 200 * LITRE_OF_NITROGEN - 60.0
    assert case.at_s == 0.0
    assert_allclose(case.oxygen_pct, AIR * (1.0 - rest / 200.0), rtol=2e-3)


def test_an_open_window_takes_its_share_of_what_is_pushed_out():
    window = a_door(None, tag="W", kind="window", width=0.9, height=2.1)
    vessel = a_vessel(200, measured_evaporation=0.0)
    door = {"exchange_flow": 0.0}
    _, shut = assessed(*joined(vessel, lab={"volume": 60.0}, door=door))
    lab, hall = joined(vessel, lab={"volume": 60.0}, door=door)
    _, open_ = assessed(replace(lab, openings=(*lab.openings, window)), hall)
    taken = [AIR - incoming(each).oxygen_pct for each in (shut, open_)]
    assert_allclose(taken[1], 0.5 * taken[0], rtol=1e-8)
    unsaid = replace(window, normally_open=None)
    _, cautious = assessed(replace(lab, openings=(*lab.openings, unsaid)), hall)
    assert incoming(cautious).oxygen_pct == incoming(shut).oxygen_pct


def test_a_detector_of_the_other_room_guards_it_and_one_of_the_source_does_not():
    vessel = a_vessel(60, measured_evaporation=0.0)
    bare = findings(assessed(*joined(vessel))[1], "neighbours/largest-vessel")[0]
    elsewhere = assessed(*joined(vessel, lab={"detectors": (a_detector(),)}))[1]
    assert findings(elsewhere, "neighbours/largest-vessel")[0].severity == bare.severity
    guarded = assessed(*joined(vessel, hall={"detectors": (a_detector(height=0.5),)}))[1]
    assert incoming(guarded).alarm_s is not None
    held = findings(guarded, "neighbours/largest-vessel")[0].evidence["safeguards"]
    assert held["detection"]


def test_the_standing_and_the_worst_case_may_come_from_another_room():
    _, hall = assessed(*joined(a_vessel(240)))
    assert hall.cases == ()
    deciding = (*hall.cases, *hall.incoming)[hall.deciding]
    assert deciding.from_room.tag == "LAB"
    assert deciding.release in ("largest-vessel", "all-vessels", "spill")


def test_what_is_read_names_the_records_of_the_rooms_on_the_way():
    lab, hall = assessed(*joined(a_vessel(240), hall={"units": (a_unit(tag="F-9"),)}))
    read = {(each.kind, each.tag) for each in hall.read}
    assert {
        ("room", "LAB"),
        ("room", "HALL"),
        ("vessel", "V-240-nitrogen"),
        ("opening", "O-1"),
    } <= read
    assert ("ventilation-unit", "F-9") in {(each.kind, each.tag) for each in lab.read}


def test_rooms_beside_are_computed_with_and_not_answered():
    lab, hall = joined(a_vessel(240))

    (answer,) = assess_rooms([hall], at=NOW, beside=[lab])
    assert answer == assessed(lab, hall)[1]


PAIRED = {
    "largest-vessel": lambda fluid: a_lab(a_vessel(90, fluid, measured_evaporation=0.0)),
    "all-vessels": lambda fluid: a_lab(
        a_vessel(45, fluid, tag="V1", measured_evaporation=0.0),
        a_vessel(45, fluid, tag="V2", measured_evaporation=0.0),
    ),
    "spill": lambda fluid: a_lab(a_vessel(90, fluid, mobile=True, measured_evaporation=0.0)),
    "boil-off": lambda fluid: a_lab(
        a_vessel(900, fluid, measured_evaporation=90 * PER_DAY), kind="walk-in"
    ),
    "filling": lambda fluid: a_lab(
        a_vessel(900, fluid, filled_by="attended", fill_flow=9e-4), kind="walk-in"
    ),
    "overfill": lambda fluid: a_lab(
        a_vessel(90, fluid, filled_by="automatic", fill_flow=9e-4), kind="walk-in"
    ),
    "vacuum-loss": lambda fluid: leaking(900, fluid, tag="LAB"),
    "line-break": lambda fluid: replace(broken(900, fluid), record=a_lab().record),
    "quench": lambda fluid: replace(quenching(90, fluid), record=a_lab().record),
}
BY_GAS = {
    "oxygen": HELIUM,
    "carbon-dioxide": CARBON_DIOXIDE,
    "nitrous-oxide": NITROUS_OXIDE,
    "flammable": METHANE,
}
NEIGHBOURS = [rule for rule in RULES if rule.subject is Subject.INCOMING]


@pytest.mark.slow
@pytest.mark.parametrize("rule", NEIGHBOURS, ids=lambda rule: f"{rule.slug}-{rule.gas}")
def test_each_rule_is_broken_beyond_an_open_door_and_not_beyond_a_shut_one(rule):
    release = rule.slug.split("/")[1].removeprefix("enriched-")
    enriched = rule.slug != f"neighbours/{release}"
    fluid = OXYGEN if enriched else BY_GAS.get(rule.gas, HYDROGEN)
    source = PAIRED[release](fluid)
    if release == "spill" and rule.gas == "carbon-dioxide":
        source = a_lab(some_ice(500), kind="walk-in")
    for is_open in (True, False):
        door = {"normally_open": is_open, "exchange_flow": 0.5 if is_open else None}
        lab = replace(source, openings=(a_door("room-HALL", **door),))
        hall = a_hall(a_door("room-LAB", **door), volume=20.0, kind="walk-in")
        found = [
            each
            for each in assessed(lab, hall)[1].judgements
            if (each.rule, each.gas) == (rule.slug, rule.gas)
        ]
        assert bool(found) is is_open
        for each in found:
            assert each.statement.startswith("From room LAB")
            assert "nan" not in f"{each.statement} {each.remedy}"
            assert each.method == "neighbours/network"


@pytest.mark.slow
@settings(max_examples=8, deadline=None)
@given(
    st.floats(5.0, 400.0),
    st.floats(20.0, 300.0),
    st.floats(20.0, 300.0),
    st.floats(0.0, 1.0),
    st.floats(0.0, 2000.0),
)
def test_no_fraction_leaves_its_bounds_and_more_outdoor_air_never_lowers_the_lowest_oxygen(
    litres, lab, hall, exchange, air
):
    def answers(flow):
        unit = a_unit(flow, arrangement="supply")
        rooms = joined(
            a_vessel(litres),
            door={"exchange_flow": exchange},
            lab={"volume": lab},
            hall={"volume": hall, "units": (unit,)},
        )
        return [case for case in assessed(*rooms)[1].incoming if case.hazard == "oxygen-low"]

    few = {(case.release, case.airflow): case.oxygen_pct for case in answers(air)}
    more = {(case.release, case.airflow): case.oxygen_pct for case in answers(air + 500.0)}
    assert all(0.0 <= value <= AIR for value in (*few.values(), *more.values()))
    for name, value in more.items():
        assert value >= few.get(name, AIR) - 1e-7


@pytest.mark.slow
@settings(max_examples=8, deadline=None)
@given(st.floats(1.0, 300.0), st.floats(1.0, 300.0))
def test_more_contents_never_raise_the_lowest_oxygen_next_door(litres, more):
    def lowest(amount):
        found = assessed(*joined(a_vessel(amount, measured_evaporation=0.0)))[1].incoming
        return min((case.oxygen_pct for case in found), default=AIR)

    assert lowest(litres + more) <= lowest(litres) + 1e-9
