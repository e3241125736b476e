"""Whole rooms: what they come to, whoever stands beside them, and when they turn."""

from dataclasses import replace
from datetime import timedelta
from random import Random

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from service.audit.assessment import SEVERITIES, STANDINGS
from tests.audit.builders import (
    ARGON,
    BASELINE,
    EARLIER,
    HELIUM,
    LATER,
    LITRE,
    METHANE,
    NITROGEN,
    NOW,
    OXYGEN,
    PER_DAY,
    PER_HOUR,
    a_basis,
    a_detector,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    findings_of,
    judged,
    some_ice,
    standing_of,
)

AIR = a_fluid(
    "liquid-air",
    molar_mass=0.0289655,
    condensed_density=875.2,
    oxygen_fraction=0.21,
    hazards=frozenset({"oxidiser"}),
)
POOR = a_fluid("mixture", molar_mass=0.0285, condensed_density=830.0, oxygen_fraction=0.1)


def test_a_person_in_a_lift_with_a_dewar_is_told_to_stop():
    lift = a_room(8, kind="lift", most_people=1, vessels=(a_vessel(25),))
    assert standing_of(lift) == "stop"
    assert standing_of(replace(lift, unaccompanied=True)) != "stop"


def test_a_basement_with_a_dewar_no_fan_and_no_detector_needs_action_or_worse():
    basement = a_room(
        60,
        below_ground=None,
        occupied_fraction=None,
        temperature=None,
        elevation=None,
        way_out=None,
        vessels=(a_vessel(50, measured_evaporation=None, filled_by=None, vent_to=None),),
    )
    assert STANDINGS.index(standing_of(basement)) >= STANDINGS.index("action")


@pytest.mark.slow
@pytest.mark.parametrize("tag", ["baseline", "us", "uk-eu"])
def test_clean_air_at_three_thousand_metres_raises_nothing(tag):
    room = a_room(
        100,
        elevation=3000.0,
        basis=a_basis(tag),
        vessels=(a_vessel(0.001),),
        units=(a_unit(900),),
        detectors=(a_detector(),),
    )
    assert assessed(room)[0].judgements == ()
    assert standing_of(room) == "in-order"


@pytest.mark.parametrize(
    ("elevation", "danger", "critical"),
    [(0, 18.0, 10.0), (600, 19.08, 10.74), (1600, 19.5, 12.13), (3000, 19.5, 14.45)],
)
def test_the_marks_rise_with_height(elevation, danger, critical):
    """Methods B-6 to B-8."""
    figures = assessed(a_room(elevation=elevation))[0].figures
    assert figures["oxygen_danger_pct"] == pytest.approx(danger, abs=0.01)
    assert figures["oxygen_critical_pct"] == pytest.approx(critical, abs=0.01)


def test_an_empty_room_is_in_order_and_has_no_worst_case():
    found = assessed(a_room())[0]
    assert (found.cases, found.deciding, found.judgements) == ((), None, ())
    assert (found.ventilation.required_m3_h, found.ventilation.shortfall_m3_h) == (0.0, 0.0)


def test_the_worst_case_is_that_of_the_finding_that_sets_the_standing():
    """Both are beyond a mark; the oxygen is only one step from clean air, but it is critical."""
    room = a_room(50, vessels=(a_vessel(45, measured_evaporation=0.0), a_vessel(3, OXYGEN)))
    found = assessed(room)[0]
    worst = found.cases[found.deciding]
    assert (worst.release, worst.airflow, worst.hazard) == (
        "largest-vessel",
        "as-measured",
        "oxygen-low",
    )


def test_without_a_finding_on_a_case_the_worst_is_the_nearest_to_a_mark():
    """Of 50 m3: 2 L of nitrogen go 40 % of the way to 19.5 %, 1 L of oxygen 66 % to 23 %."""
    room = a_room(
        50,
        vessels=(
            a_vessel(2, measured_evaporation=0.0),
            a_vessel(1, OXYGEN, measured_evaporation=0.0),
        ),
    )
    found = assessed(room)[0]
    assert found.judgements == ()
    assert found.cases[found.deciding].hazard == "oxygen-high"


def test_an_assessment_names_every_record_it_rests_on():
    basis = replace(BASELINE, derived_from=(replace(BASELINE.record, id="basis-parent"),))
    room = a_room(
        vessels=(a_vessel(),),
        units=(a_unit(),),
        detectors=(a_detector(),),
        purge_flow=PER_HOUR,
        purge_fluid=ARGON,
        basis=basis,
    )
    found = assessed(room)[0]
    assert {each.id for each in found.read} == {
        room.record.id,
        room.site.id,
        "basis-baseline",
        "basis-parent",
        "vessel-V-50-nitrogen",
        "fluid-nitrogen",
        "fluid-argon",
        "ventilation-unit-F-600",
        "detector-D-1",
    }
    assert list(found.read) == sorted(found.read)


def test_every_number_has_at_most_ten_figures():
    room = a_room(77.7, vessels=(a_vessel(33.3), a_vessel(2.2, OXYGEN)), units=(a_unit(123.4),))
    found = assessed(room)[0]
    numbers = [found.ventilation.credited_m3_h, found.ventilation.required_m3_h]
    for case in found.cases:
        numbers += [case.oxygen_pct, case.oxygen_kpa, case.gas_m3, case.restore_m3_h]
        numbers += list(case.without_margins.values())
    numbers = [number for number in numbers if number is not None]
    assert len(numbers) > 50
    assert all(float(f"{number:.10g}") == number for number in numbers)


# Rooms of any make-up: what is unknown, empty, overdue and out of order too.
moments = st.sampled_from([None, EARLIER, NOW, LATER])
flags = st.sampled_from([None, False, True])
vessels = st.builds(
    a_vessel,
    st.sampled_from([0.0, 0.5, 5.0, 25.0, 50.0, 200.0]),
    st.sampled_from([NITROGEN, HELIUM, ARGON, OXYGEN, METHANE, AIR, POOR]),
    tag=st.uuids().map(str),
    kind=st.sampled_from(["open-dewar", "pressurised-dewar", "freezer", "magnet", "cylinder"]),
    state=st.sampled_from(["in-service", "in-service", "empty", "withdrawn"]),
    measured_evaporation=st.sampled_from([None, 0.0, PER_DAY, 20 * PER_DAY]),
    rated_evaporation=st.sampled_from([None, PER_DAY]),
    use=st.sampled_from([None, PER_DAY]),
    contents_volume=st.sampled_from([None, LITRE]),
    count_due=moments,
    vent_to=st.sampled_from([None, "room", "outdoors"]),
    filled_by=st.sampled_from([None, "automatic", "attended", "exchanged"]),
    manifold=st.sampled_from([None, None, "1"]),
)
ice = st.builds(some_ice, st.sampled_from([1.0, 50.0]), measured_loss=st.sampled_from([None, 1e-5]))
units = st.builds(
    a_unit,
    st.sampled_from([5.0, 60.0, 600.0]),
    tag=st.uuids().map(str),
    arrangement=st.sampled_from([None, "supply", "exhaust", "balanced"]),
    design_flow=st.sampled_from([None, 10 * PER_HOUR, 900 * PER_HOUR]),
    measurement_due=moments,
    outdoor_air_fraction=st.sampled_from([None, 0.0, 0.3, 1.0]),
    mixing_factor=st.sampled_from([None, 1.0, 2.0]),
    state=st.sampled_from(["running", "running", "stopped"]),
    standby_power=flags,
    fail_alarm=flags,
)
detectors = st.builds(
    a_detector,
    tag=st.uuids().map(str),
    gas=st.sampled_from(["oxygen", "oxygen", "helium"]),
    height=st.sampled_from([None, 0.5, 1.3, 2.4]),
    t90=st.sampled_from([None, 30.0]),
    calibration_due=moments,
    state=st.sampled_from(["in-service", "in-service", "fault", "off"]),
    silenced_since=st.sampled_from([None, None, EARLIER]),
    heard_outside=flags,
    display_outside=flags,
    power_backed=flags,
)
rooms = st.builds(
    a_room,
    st.sampled_from([6.0, 40.0, 150.0]),
    tag=st.uuids().map(str),
    kind=st.sampled_from(["room", "corridor", "walk-in", "pit", "lift", "vehicle"]),
    elevation=st.sampled_from([None, 0.0, 1600.0, 3000.0]),
    occupied_fraction=st.sampled_from([None, 0.3]),
    temperature=st.sampled_from([None, 278.15]),
    below_ground=flags,
    unaccompanied=flags,
    way_out=st.sampled_from([None, 5.0, 500.0]),
    purge_flow=st.sampled_from([None, None, PER_HOUR]),
    basis=st.sampled_from(
        [
            BASELINE,
            a_basis("us"),
            a_basis("uk-eu", contents="recorded"),
            a_basis(instant_mixing="mixing"),
        ]
    ),
    vessels=st.lists(vessels | ice, max_size=4).map(tuple),
    units=st.lists(units, max_size=3).map(tuple),
    detectors=st.lists(detectors, max_size=3).map(tuple),
)
thorough = settings(max_examples=10, deadline=None)

CASE_RULES = (
    "oxygen/largest-vessel",
    "oxygen/boil-off",
    "enrichment/largest-vessel",
    "enrichment/boil-off",
)


def severities(*many):
    """Severity of each rule on cases, room by room; -1 where it is not broken."""
    return [
        {
            rule: max(
                (SEVERITIES.index(each.severity) for each in found.judgements if each.rule == rule),
                default=-1,
            )
            for rule in CASE_RULES
        }
        for found in assessed(*many)
    ]


def with_more_safeguards(room):
    """The room with each safeguard that could be added, one at a time."""
    good = a_detector(tag="added")
    yield replace(room, detectors=(*room.detectors, good))
    yield replace(room, detectors=(*room.detectors, replace(good, height=2.4)))
    yield replace(room, unaccompanied=True)
    for flow in (1.0, 30.0, 900.0):
        for arrangement in ("supply", "exhaust", "balanced"):
            fan = a_unit(flow, tag="added", arrangement=arrangement)
            yield replace(room, units=(*room.units, fan))
    for place, unit in enumerate(room.units):
        for better in (
            {"standby_power": True},
            {"fail_alarm": True},
            {"measurement_due": LATER},
            {"state": "running"},
            {"outdoor_air_fraction": 1.0},
        ):
            # A measurement that replaces a higher design is no safeguard added.
            units = (*room.units[:place], replace(unit, **better), *room.units[place + 1 :])
            yield replace(room, units=units)
    for place, detector in enumerate(room.detectors):
        for better in (
            {"heard_outside": True},
            {"display_outside": True},
            {"power_backed": True},
            {"calibration_due": LATER},
            {"silenced_since": None},
            {"state": "in-service"},
        ):
            improved = replace(detector, **better)
            rest = room.detectors
            yield replace(room, detectors=(*rest[:place], improved, *rest[place + 1 :]))


def with_fewer_records(room):
    """The room with the record of each safeguard taken away, one at a time."""
    yield replace(room, unaccompanied=None)
    for place, unit in enumerate(room.units):
        yield replace(room, units=room.units[:place] + room.units[place + 1 :])
        for unknown in ("standby_power", "fail_alarm", "measurement_due", "outdoor_air_fraction"):
            if unknown == "outdoor_air_fraction" and unit.arrangement == "exhaust":
                continue  # an exhaust of unknown share counts whole
            units = (
                *room.units[:place],
                replace(unit, **{unknown: None}),
                *room.units[place + 1 :],
            )
            yield replace(room, units=units)
    for place, detector in enumerate(room.detectors):
        rest = room.detectors
        yield replace(room, detectors=rest[:place] + rest[place + 1 :])
        for unknown in (
            "heard_outside",
            "display_outside",
            "power_backed",
            "calibration_due",
            "height",
        ):
            worse = replace(detector, **{unknown: None})
            yield replace(room, detectors=(*rest[:place], worse, *rest[place + 1 :]))


@pytest.mark.slow
@thorough
@given(rooms)
def test_adding_a_safeguard_never_raises_a_severity(room):
    before, *after = severities(room, *with_more_safeguards(room))
    assert all(each[rule] <= before[rule] for each in after for rule in CASE_RULES)


@pytest.mark.slow
@thorough
@given(rooms)
def test_removing_the_record_of_a_safeguard_never_lowers_a_severity(room):
    before, *after = severities(room, *with_fewer_records(room))
    assert all(each[rule] >= before[rule] for each in after for rule in CASE_RULES)


def extremes(*many):
    """Lowest and highest oxygen of each room, by release and airflow, over the cases."""
    answers = []
    for found in assessed(*many):
        levels = {}
        for case in found.cases:
            key = (case.release, case.airflow, case.hazard)
            sign = -1.0 if case.hazard == "oxygen-high" else 1.0
            levels[key] = min(levels.get(key, 100.0), sign * case.oxygen_pct)
        answers.append(levels)
    return answers


def no_better(worse, better):
    """Whether the first is nowhere milder than the second, to the last figure."""
    return all(level <= better.get(key, 100.0) + 1e-8 for key, level in worse.items())


@pytest.mark.slow
@thorough
@given(rooms, st.floats(1.0, 20.0))
def test_more_outdoor_air_never_lowers_the_lowest_oxygen(room, factor):
    more = [
        replace(
            unit,
            measured_flow=factor * unit.measured_flow,
            design_flow=factor * (unit.design_flow or 0.0),
        )
        for unit in room.units
    ]
    less = [replace(unit, design_flow=unit.design_flow or 0.0) for unit in room.units]
    before, after = extremes(replace(room, units=tuple(less)), replace(room, units=tuple(more)))
    assert no_better(before, after)


@pytest.mark.slow
@thorough
@given(rooms, st.floats(1.0, 20.0))
def test_more_contents_never_raise_it(room, factor):
    """Of gases equally rich: a mixture with some oxygen dilutes one with none."""
    own = {vessel.fluid.oxygen_fraction for vessel in room.vessels}
    assume(sum(share <= 0.2095 for share in own) <= 1)
    assume(sum(share > 0.2095 for share in own) <= 1)
    # Purge gas has no oxygen, and counts like a vessel of its own.
    assume(room.purge_flow is None or POOR not in [vessel.fluid for vessel in room.vessels])

    def filled(vessel):
        if vessel.capacity_volume is None:
            return replace(vessel, capacity_mass=factor * vessel.capacity_mass)
        return replace(vessel, capacity_volume=factor * vessel.capacity_volume)

    more = replace(room, vessels=tuple(filled(vessel) for vessel in room.vessels))
    before, after = extremes(room, more)
    assert all(after[key] <= level + 1e-8 for key, level in before.items())


@pytest.mark.slow
@thorough
@given(rooms)
def test_lost_air_is_never_better_than_the_air_as_measured(room):
    (levels,) = extremes(room)
    for (release, airflow, hazard), level in levels.items():
        if airflow == "lost":
            assert level <= levels[release, "as-measured", hazard] + 1e-8


def a_neighbour(number):
    """One of fifty rooms that differ in what they hold, know and are judged by."""
    random = Random(number)
    held = tuple(
        a_vessel(
            random.choice([0.5, 5.0, 50.0]),
            random.choice([NITROGEN, HELIUM, OXYGEN, METHANE, POOR]),
            tag=f"V{number}-{place}",
            measured_evaporation=random.choice([None, 0.0, 20 * PER_DAY]),
            filled_by=random.choice([None, "exchanged"]),
            manifold=random.choice([None, "1"]),
        )
        for place in range(random.randrange(4))
    )
    return a_room(
        random.choice([6.0, 40.0, -1.0]),
        tag=f"R{number}",
        kind=random.choice(["room", "pit"]),
        occupied_fraction=random.choice([None, 0.3]),
        basis=random.choice([BASELINE, a_basis("us", contents="recorded")]),
        vessels=held,
        units=(a_unit(60.0),) if random.random() < 0.5 else (),
        detectors=(a_detector(gas=random.choice(["oxygen", "helium"])),),
    )


NEIGHBOURS = tuple(a_neighbour(number) for number in range(50))


@pytest.mark.slow
@thorough
@given(rooms, st.integers(0, 50))
def test_a_room_judged_alone_is_judged_the_same_among_others(room, place):
    many = (*NEIGHBOURS[:place], room, *NEIGHBOURS[place:])
    assert assessed(room) == (assessed(*many)[place],)


@pytest.mark.slow
def test_rooms_judged_together_are_judged_as_each_alone():
    together = assessed(*NEIGHBOURS)
    assert together == tuple(assessed(room)[0] for room in NEIGHBOURS)


@pytest.mark.slow
@thorough
@given(rooms)
def test_any_room_can_be_judged_and_its_answer_hangs_together(room):
    (found,) = assessed(room)
    assert found.failed is None
    for case in found.cases:
        crossed = [mark for mark in case.marks if mark.crossed]
        assert max((mark.place for mark in crossed), default=0) == case.mark
        assert all((mark.at_s is not None) is mark.crossed for mark in case.marks)
        if case.hazard == "oxygen-low":
            times = [case.to_deficient_s, case.to_danger_s, case.to_critical_s]
            assert times[: case.mark] == sorted(times[: case.mark])
            assert times[case.mark :] == [None] * (3 - case.mark)
        assert (case.required_m3_h is None) is (case.required_reason is not None)
    families = {"oxygen-low": "oxygen", "oxygen-high": "enrichment"}
    of_cases = {*families.values(), "toxic", "flammable"}
    assert {each.rule for each in found.judgements if each.family in of_cases} == {
        f"{families.get(case.hazard, case.hazard)}/{case.release}"
        for case in found.cases
        # A single vessel is what the largest vessel says already.
        if case.mark and (case.release != "all-vessels" or len(case.vessels) > 1)
    }
    if found.cases:
        assert found.cases[found.deciding].counts
    assert len({each.identity for each in findings_of(room)}) == len(found.judgements)


@pytest.mark.slow
@thorough
@given(rooms)
def test_a_room_turns_later_and_then_says_something_else(room):
    (found,) = assessed(room)
    if found.turns_at is None:
        assert [
            replace(each, at=NOW) for each in assessed(room, at=NOW + timedelta(days=9999))
        ] == [found]
        return
    assert found.turns_at > NOW
    (before,) = assessed(room, at=found.turns_at - timedelta(microseconds=1))
    assert replace(before, at=NOW) == found


@pytest.mark.parametrize(
    ("room", "turn"),
    [
        (a_room(detectors=(a_detector(calibration_due=LATER),)), LATER),
        (a_room(units=(a_unit(measurement_due=LATER),)), LATER),
        (
            a_room(vessels=(a_vessel(state="empty", count_due=LATER),)),
            LATER,
        ),
        (
            a_room(
                vessels=(a_vessel(contents_volume=LITRE, count_due=LATER),),
                basis=a_basis(contents="recorded"),
            ),
            LATER,
        ),
        (
            a_room(detectors=(a_detector(silenced_since=NOW),)),
            NOW + timedelta(hours=1),
        ),
        (
            a_room(
                vessels=(a_vessel(),),
                detectors=(a_detector(silenced_since=LATER - timedelta(days=1)),),
            ),
            LATER - timedelta(days=1),
        ),
    ],
)
def test_the_turn_is_the_moment_at_which_something_ages(room, turn):
    found = assessed(room)[0]
    assert found.turns_at == turn
    after = assessed(room, at=turn)[0]
    assert (after.judgements, after.assumed, after.cases) != (
        found.judgements,
        found.assumed,
        found.cases,
    )


@pytest.mark.parametrize(
    "room",
    [
        a_room(),
        a_room(vessels=(a_vessel(count_due=LATER),)),  # full by capacity, whatever was counted
        a_room(units=(a_unit(state="stopped"),)),
        a_room(detectors=(a_detector(state="off"),)),
        a_room(detectors=(a_detector(calibration_due=EARLIER),)),
    ],
)
def test_what_does_not_age_never_turns(room):
    assert assessed(room)[0].turns_at is None


def test_a_count_that_lapses_turns_the_reading_that_is_shown_beside_the_capacity():
    room = a_room(vessels=(a_vessel(10, contents_volume=LITRE, count_due=LATER),))
    before, after = (assessed(room, at=moment)[0] for moment in (NOW, LATER))
    assert before.turns_at == LATER
    assert after.figures["gas_as_recorded_m3"] == pytest.approx(
        10 * before.figures["gas_as_recorded_m3"]
    )


def test_an_overdue_finding_says_the_same_until_something_turns():
    room = a_room(detectors=(a_detector(calibration_due=EARLIER),))
    first, second = (
        judged(room, "detectors/calibration-overdue", at=NOW + timedelta(days=days))
        for days in (0, 5)
    )
    assert first == second
