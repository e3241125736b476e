"""What must hold of any room, whatever stands in it (judging 4): sought, not listed."""

from dataclasses import replace
from itertools import chain

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from service.audit.assessment import SEVERITIES
from service.audit.releases import RELEASES
from service.audit.rules.case_rules import CaseRule
from service.audit.rules.registry import RULES
from tests.audit.builders import (
    ARGON,
    BASELINE,
    CARBON_DIOXIDE,
    EARLIER,
    HELIUM,
    HYDROGEN,
    LATER,
    METHANE,
    NITROGEN,
    NITROUS_OXIDE,
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
    case_of,
    some_ice,
)

LIQUID_CARBON_DIOXIDE = replace(CARBON_DIOXIDE, solid=False)
POOR = a_fluid("mixture", molar_mass=0.0285, condensed_density=830.0, oxygen_fraction=0.1)
GASES = ("oxygen", "oxygen", "carbon-dioxide", "nitrous-oxide", "hydrogen", "methane", "helium")
ALARMS = {"oxygen": (19.5, 23.5), "carbon-dioxide": (0.5,), "nitrous-oxide": (0.01,)}
# To the last of ten figures.
ROUNDING = 1e-8

moments = st.sampled_from([None, EARLIER, NOW, LATER])
flags = st.sampled_from([None, False, True])
fluids = st.sampled_from(
    [NITROGEN, HELIUM, ARGON, OXYGEN, METHANE, HYDROGEN, NITROUS_OXIDE, LIQUID_CARBON_DIOXIDE, POOR]
)
vessels = st.builds(
    a_vessel,
    st.sampled_from([0.5, 5.0, 50.0, 200.0]),
    fluids,
    tag=st.uuids().map(str),
    kind=st.sampled_from(["open-dewar", "pressurised-dewar", "freezer", "magnet", "cylinder"]),
    state=st.sampled_from(["in-service", "in-service", "empty"]),
    measured_evaporation=st.sampled_from([None, 0.0, PER_DAY, 20 * PER_DAY]),
    rated_evaporation=st.sampled_from([None, PER_DAY]),
    use=st.sampled_from([None, PER_DAY]),
    vent_to=st.sampled_from([None, "room", "outdoors"]),
    filled_by=st.sampled_from([None, "automatic", "attended", "exchanged"]),
    fill_flow=st.sampled_from([None, 1e-5, 5e-4]),
    independent_high_level=flags,
    closes_in=st.sampled_from([None, 20.0, 600.0]),
    shut_off_test_due=moments,
    mobile=flags,
    manifold=st.sampled_from([None, None, "1"]),
)
ice = st.builds(
    some_ice,
    st.sampled_from([1.0, 10.0, 80.0]),
    measured_loss=st.sampled_from([None, 1e-5]),
    mobile=flags,
)


@st.composite
def some_units(draw):
    unit = a_unit(
        draw(st.sampled_from([5.0, 60.0, 600.0])),
        tag=str(draw(st.uuids())),
        arrangement=draw(st.sampled_from([None, "supply", "exhaust", "balanced"])),
        design_flow=draw(st.sampled_from([None, 10 * PER_HOUR, 900 * PER_HOUR])),
        measurement_due=draw(moments),
        outdoor_air_fraction=draw(st.sampled_from([None, 0.0, 0.3, 1.0])),
        mixing_factor=draw(st.sampled_from([None, 1.0, 2.0])),
        state=draw(st.sampled_from(["running", "running", "stopped"])),
        standby_power=draw(flags),
        fail_alarm=draw(flags),
    )
    if draw(st.booleans()):
        return replace(unit, boost_flow=2000 * PER_HOUR, boost_trigger="manual")
    return unit


@st.composite
def some_detectors(draw):
    gas = draw(st.sampled_from(GASES))
    return a_detector(
        tag=str(draw(st.uuids())),
        gas=gas,
        alarms=draw(st.sampled_from([ALARMS.get(gas, (0.4,)), ()])),
        height=draw(st.sampled_from([None, 0.5, 1.3, 2.4])),
        t90=draw(st.sampled_from([None, 5.0, 300.0])),
        calibration_due=draw(moments),
        state=draw(st.sampled_from(["in-service", "in-service", "fault", "off"])),
        silenced_since=draw(st.sampled_from([None, None, EARLIER])),
        heard_outside=draw(flags),
        display_outside=draw(flags),
        power_backed=draw(flags),
    )


rooms = st.builds(
    a_room,
    st.sampled_from([6.0, 40.0, 150.0, 800.0]),
    tag=st.uuids().map(str),
    kind=st.sampled_from(["room", "room", "walk-in", "pit", "lift", "vehicle"]),
    elevation=st.sampled_from([None, 0.0, 1600.0, 3000.0]),
    occupied_fraction=st.sampled_from([None, 0.3]),
    temperature=st.sampled_from([None, 278.15]),
    below_ground=flags,
    attended=flags,
    unaccompanied=flags,
    way_out=st.sampled_from([None, 5.0, 500.0]),
    purge_flow=st.sampled_from([None, None, PER_HOUR]),
    basis=st.sampled_from([BASELINE, a_basis("us"), a_basis("uk-eu", instant_mixing="mixing")]),
    vessels=st.lists(vessels | ice, min_size=1, max_size=4).map(tuple),
    units=st.lists(some_units(), max_size=3).map(tuple),
    detectors=st.lists(some_detectors(), max_size=3).map(tuple),
)
thorough = settings(max_examples=2)
quick = settings(max_examples=5)

CASE_RULES = tuple((rule.slug, rule.gas) for rule in RULES if isinstance(rule, CaseRule))


def severities(*many):
    """Severity of each rule on cases and gas, room by room; -1 where it is not broken."""
    answers = []
    for found in assessed(*many):
        answer = dict.fromkeys(CASE_RULES, -1)
        for each in found.judgements:
            key = (each.rule, each.gas)
            if key in answer:
                answer[key] = max(answer[key], SEVERITIES.index(each.severity))
        answers.append(answer)
    return answers


def changed(room, field, place, **fields):
    """The room with some fields of one of its records changed."""
    records = getattr(room, field)
    better = replace(records[place], **fields)
    return replace(room, **{field: (*records[:place], better, *records[place + 1 :])})


def without(room, field, place):
    records = getattr(room, field)
    return replace(room, **{field: records[:place] + records[place + 1 :]})


def with_more_safeguards(room):
    """The room with each safeguard that could be added, one at a time."""
    for gas in sorted(set(GASES)):
        for height in (0.5, 2.4):
            alarms = ALARMS.get(gas, (0.4,))
            good = a_detector(tag="added", gas=gas, alarms=alarms, height=height)
            yield replace(room, detectors=(*room.detectors, good))
    yield replace(room, unaccompanied=True)
    for flow in (1.0, 30.0, 900.0):
        for arrangement in ("supply", "exhaust", "balanced"):
            fan = a_unit(flow, tag="added", arrangement=arrangement)
            yield replace(room, units=(*room.units, fan))
    for place in range(len(room.units)):
        for better in (
            {"standby_power": True},
            {"fail_alarm": True},
            {"measurement_due": LATER},
            {"state": "running"},
            {"outdoor_air_fraction": 1.0},
            {"boost_flow": 1.0, "boost_trigger": "manual"},
        ):
            yield changed(room, "units", place, **better)
    for place in range(len(room.detectors)):
        for better in (
            {"heard_outside": True},
            {"display_outside": True},
            {"power_backed": True},
            {"calibration_due": LATER},
            {"silenced_since": None},
            {"state": "in-service"},
        ):
            yield changed(room, "detectors", place, **better)
    for place in range(len(room.vessels)):
        yield changed(room, "vessels", place, independent_high_level=True, shut_off_test_due=LATER)


def with_fewer_records(room):
    """The room with the record of each safeguard taken away, one at a time."""
    yield replace(room, unaccompanied=None)
    for place, unit in enumerate(room.units):
        yield without(room, "units", place)
        for unknown in ("standby_power", "fail_alarm", "measurement_due", "outdoor_air_fraction"):
            if unknown == "outdoor_air_fraction" and unit.arrangement == "exhaust":
                continue  # an exhaust of unknown share counts whole
            yield changed(room, "units", place, **{unknown: None})
        yield changed(room, "units", place, boost_trigger=None)
    for place in range(len(room.detectors)):
        yield without(room, "detectors", place)
        for unknown in (
            "heard_outside",
            "display_outside",
            "power_backed",
            "calibration_due",
            "height",
            "placed",
        ):
            if unknown != "placed":  # one of unknown place is taken to hang inside
                yield changed(room, "detectors", place, **{unknown: None})
        yield changed(room, "detectors", place, alarms=())
    for place in range(len(room.vessels)):
        for unknown in ("independent_high_level", "shut_off_test_due"):
            yield changed(room, "vessels", place, **{unknown: None})


def none_higher(after, before):
    """Rules whose severity is higher in any of several rooms than before."""
    return [
        (number, rule, each[rule], before[rule])
        for number, each in enumerate(after)
        for rule in CASE_RULES
        if each[rule] > before[rule]
    ]


def none_lower(after, before):
    return [
        (number, rule, each[rule], before[rule])
        for number, each in enumerate(after)
        for rule in CASE_RULES
        if each[rule] < before[rule]
    ]


@pytest.mark.slow
@thorough
@given(rooms)
def test_adding_a_safeguard_never_raises_a_severity(room):
    before, *after = severities(room, *with_more_safeguards(room))
    assert none_higher(after, before) == []


@pytest.mark.slow
@thorough
@given(rooms)
def test_removing_the_record_of_a_safeguard_never_lowers_a_severity(room):
    before, *after = severities(room, *with_fewer_records(room))
    assert none_lower(after, before) == []


@pytest.mark.slow
@thorough
@given(rooms)
def test_that_nobody_is_usually_there_lowers_none_but_the_mean_of_a_working_day(room):
    """Of nitrous oxide, and there the first mark alone."""
    known = {
        "some": replace(room, attended=True, most_people=3),
        "none": replace(room, attended=False, most_people=0),
    }
    peopled, empty = severities(known["some"], known["none"])
    lowered = {rule for _, rule, *_ in none_lower([empty], peopled)}
    means = {("toxic/boil-off", "nitrous-oxide"), ("toxic/filling", "nitrous-oxide")}
    assert lowered <= means
    assert none_higher([empty], peopled) == []
    for rule in lowered:
        marks = [
            case.mark
            for case in assessed(known["none"])[0].cases
            if (case.release, case.gas) == (rule[0].split("/")[1], rule[1])
        ]
        assert max(marks) == 0


def test_a_fan_that_fails_a_working_day_is_no_safeguard_for_others_while_nobody_works():
    """2 L of nitrous oxide a day into 600 m3/h counted: 93 ppm, and no other mark but 25.

    The fan would clear the nitrogen in time; but "holds what lasts" is not milder because nobody
    is recorded to be there.
    """
    vessels = (
        a_vessel(50, NITROUS_OXIDE, measured_evaporation=2 * PER_DAY, filled_by="exchanged"),
        a_vessel(45, measured_evaporation=0.0),
    )
    room = a_room(50, vessels=vessels, units=(a_unit(1800, standby_power=True),))
    peopled, empty = severities(replace(room, attended=True), replace(room, attended=False))
    assert peopled["toxic/boil-off", "nitrous-oxide"] == SEVERITIES.index("major")
    assert empty["toxic/boil-off", "nitrous-oxide"] == -1
    assert peopled["oxygen/largest-vessel", "oxygen"] == SEVERITIES.index("critical")
    assert empty["oxygen/largest-vessel", "oxygen"] == SEVERITIES.index("critical")


def extremes(*many):
    """Numbers of each kind of case that are worse when higher, over the cases of that kind."""
    answers = []
    for found in assessed(*many):
        worst = {}
        for case in found.cases:
            sign = 1.0 if case.hazard == "oxygen-high" else -1.0
            numbers = {
                "oxygen": sign * case.oxygen_pct,
                "peak": case.peak_pct,
                "15min": case.mean_15min_pct,
                "8h": case.mean_8h_pct,
                "limit": case.lower_limit_pct,
            }
            for name, value in numbers.items():
                if value is not None:
                    key = (case.release, case.airflow, case.hazard, case.gas, name)
                    worst[key] = max(worst.get(key, -100.0), value)
        answers.append(worst)
    return answers


def worse_than(after, before):
    """Numbers of the first that are worse than the second, where both have such a case."""
    return {
        key: (value, before[key])
        for key, value in after.items()
        if key in before and value > before[key] + ROUNDING * max(1.0, abs(before[key]))
    }


@pytest.mark.slow
@thorough
@given(rooms)
def test_lost_air_is_never_better_than_the_air_as_measured(room):
    (worst,) = extremes(room)
    for key, value in worst.items():
        release, airflow, *rest = key
        if airflow == "lost":
            measured = worst[(release, "as-measured", *rest)]
            assert value >= measured - ROUNDING * max(1.0, abs(measured))


@pytest.mark.slow
@thorough
@given(rooms, st.floats(1.0, 20.0))
def test_more_outdoor_air_makes_nothing_worse(room, factor):
    known = [replace(unit, design_flow=unit.design_flow or 0.0) for unit in room.units]
    more = [
        replace(
            unit,
            measured_flow=factor * unit.measured_flow,
            design_flow=factor * unit.design_flow,
            boost_flow=None if unit.boost_flow is None else factor * unit.boost_flow,
        )
        for unit in known
    ]
    before, after = extremes(replace(room, units=tuple(known)), replace(room, units=tuple(more)))
    # A boost begins with an alarm, and that with a mark: more air may mean neither.
    assert {
        key: both for key, both in worse_than(after, before).items() if key[1] != "boosted"
    } == {}


@pytest.mark.slow
@thorough
@given(rooms, st.floats(1.0, 20.0))
def test_more_contents_make_nothing_milder(room, factor):
    """Of one gas for each hazard: a gas with some oxygen, or of a higher limit, dilutes another."""
    mixed = [vessel.fluid.record.tag for vessel in room.vessels]
    assume("mixture" not in mixed)
    assume(not {"methane", "hydrogen"} <= set(mixed))

    def filled(vessel):
        if vessel.capacity_volume is None:
            return replace(vessel, capacity_mass=factor * vessel.capacity_mass)
        return replace(vessel, capacity_volume=factor * vessel.capacity_volume)

    more = replace(room, vessels=tuple(filled(vessel) for vessel in room.vessels))
    before, after = extremes(room, more)
    milder = worse_than(before, after)
    assert {key: both for key, both in milder.items() if key[1] != "boosted"} == {}


@pytest.mark.slow
@thorough
@given(rooms)
def test_every_fraction_is_one(room):
    for case in assessed(room)[0].cases:
        assert 0.0 <= case.oxygen_pct <= 100.0
        assert case.oxygen_kpa >= 0.0
        if case.hazard == "oxygen-high":
            assert case.oxygen_pct >= 20.95
        else:
            assert case.oxygen_pct <= 20.95
        for value in (case.peak_pct, case.mean_15min_pct, case.mean_8h_pct):
            assert value is None or 0.0 <= value <= 100.0
        if case.mean_8h_pct is not None:
            assert case.mean_8h_pct <= case.mean_15min_pct * (1 + 1e-9) + ROUNDING
            assert case.mean_15min_pct <= case.peak_pct * (1 + 1e-9) + ROUNDING
        assert all(mark.crossed is (mark.at_s is not None) for mark in case.marks)
        times = [mark.at_s for mark in case.marks if mark.at_s is not None]
        assert all(time >= 0.0 for time in times)
        if case.recovered_s is not None and times:
            assert case.recovered_s >= min(times) - 1e-6


@pytest.mark.slow
@thorough
@given(rooms, st.sampled_from([OXYGEN, NITROGEN, ARGON]))
def test_gases_of_different_kind_are_never_netted(room, fluid):
    """Oxygen never helps where it is low, nitrogen never where it is high, nor argon a toxic gas.

    The gas that comes is let go by itself too; of the cases that were, none is milder.
    """
    assume(POOR not in [vessel.fluid for vessel in room.vessels])
    added = a_vessel(
        30,
        fluid,
        tag="added",
        measured_evaporation=10 * PER_DAY,
        filled_by="automatic",
        manifold="1",
    )
    before, after = extremes(room, replace(room, vessels=(*room.vessels, added)))
    milder = {key: both for key, both in worse_than(before, after).items() if key[1] != "boosted"}
    assert milder == {}
    untouched = {
        OXYGEN.record.tag: "oxygen-high",
        NITROGEN.record.tag: "oxygen-low",
        ARGON.record.tag: "oxygen-low",
    }[fluid.record.tag]
    for key, value in before.items():
        if key[2] != untouched and key[1] != "boosted":
            assert after[key] == value


@quick
@given(
    st.lists(
        st.tuples(
            st.sampled_from([NITROGEN, ARGON, HELIUM]),
            st.floats(0.5, 100.0),
            st.floats(0.05, 20.0),
            st.sampled_from(["exchanged", "attended"]),
        ),
        min_size=1,
        max_size=4,
    ),
    st.sampled_from([None, 5.0, 600.0]),
)
def test_no_gas_is_made_or_lost(held, flow):
    """Gas let go until a vessel runs out is what it holds, by the ideal gas."""
    four_days = 96 / 24
    expected, inside = 0.0, []
    for place, (fluid, litres, share, filled_by) in enumerate(held):
        gas = (
            litres
            * 1e-3
            * fluid.condensed_density
            * 8.314_462_618
            * 293.15
            / (101_325.0 * fluid.molar_mass)
        )
        lasts = share * four_days if filled_by == "attended" else min(1.0, share * four_days)
        expected += gas * lasts
        inside.append(
            a_vessel(
                litres,
                fluid,
                tag=f"V{place}",
                measured_evaporation=share * litres * PER_DAY,
                filled_by=filled_by,
            )
        )
    units = () if flow is None else (a_unit(flow),)
    room = a_room(500, vessels=tuple(inside), units=units)
    assert case_of(room, "boil-off").gas_m3 == pytest.approx(expected, rel=1e-8)


@pytest.mark.slow
@thorough
@given(rooms)
def test_without_margins_no_number_is_worse(room):
    """Of the stacked factors: net volume, filling, evaporation, mixing, arrangement.

    One unit of unknown arrangement beside another is left out: taken as exhaust it adds to an
    exhaust, taken as supply it does not.
    """
    unknown = [unit for unit in room.units if unit.arrangement is None]
    assume(not unknown or len(room.units) == 1)
    # A gas with some oxygen, or of a higher limit, dilutes another, and filling loss is not of all.
    held = {vessel.fluid.record.tag for vessel in room.vessels}
    assume("mixture" not in held and not {"methane", "hydrogen"} <= held)
    for case in assessed(room)[0].cases:
        bare = case.without_margins
        sign = 1.0 if case.hazard == "oxygen-high" else -1.0
        pairs = [(sign * bare["oxygen_pct"], sign * case.oxygen_pct)]
        # Not the means: a larger room is cleared more slowly, of what was there before as well.
        for name in ("peak_pct", "lower_limit_pct", "gas_m3"):
            pairs.append((bare[name], getattr(case, name)))
        if case.airflow == "boosted":
            continue  # milder air, a later alarm, a later boost
        for milder, worse in pairs:
            if worse is not None:
                assert milder <= worse + ROUNDING * max(1.0, abs(worse))


@pytest.mark.slow
@thorough
@given(rooms)
def test_a_design_never_lets_a_room_pass(room):
    """A flow that was measured in date is what it is, whatever was designed (judging 2)."""
    measured = [
        replace(unit, measurement_due=LATER, design_flow=flow)
        for flow in (1.0 * PER_HOUR,)
        for unit in room.units
    ]
    designed = [replace(unit, design_flow=1e4 * PER_HOUR) for unit in measured]
    poor, rich = severities(
        replace(room, units=tuple(measured)), replace(room, units=tuple(designed))
    )
    # A case that the design holds is one observation less, and nothing else.
    assert [max(value, 0) for value in rich.values()] == [max(value, 0) for value in poor.values()]
    for case in assessed(room)[0].cases:
        if case.airflow in ("design", "boosted"):
            assert not case.counts


@pytest.mark.slow
@thorough
@given(
    st.lists(vessels | ice, min_size=1, max_size=4).map(tuple),
    st.sampled_from(["supply", "exhaust", "balanced"]),
    st.sampled_from([6.0, 40.0, 150.0]),
)
def test_the_air_required_just_holds_and_a_little_less_does_not(held, arrangement, volume):
    """Each release that lasts and each hazard by itself, means too."""
    unit = a_unit(1e-3, arrangement=arrangement)
    room = a_room(volume, kind="pit", attended=True, vessels=held, units=(unit,))
    lasting = [
        (case.release, case.hazard, case.gas, case.required_m3_h)
        for case in assessed(room)[0].cases
        if case.release in ("boil-off", "filling")
        and case.airflow == "as-measured"
        and case.required_m3_h
    ]
    shares = (1 + 1e-7, 1 - 1e-4)
    aired = [
        replace(room, units=(a_unit(required * share, arrangement=arrangement),))
        for *_, required in lasting
        for share in shares
    ]
    answers = iter(assessed(*aired))
    for release, hazard, gas, _ in lasting:
        enough, short = (
            next(
                case.mark
                for case in next(answers).cases
                if (case.release, case.airflow, case.hazard, case.gas)
                == (release, "as-measured", hazard, gas)
            )
            for _ in shares
        )
        assert (enough, short > 0) == (0, True)


@pytest.mark.slow
@quick
@given(rooms)
def test_what_is_said_of_a_case_is_what_it_is(room):
    """Each case beyond a mark is in the finding of its rule, and no other is."""
    (found,) = assessed(room)
    broken = {(each.rule, each.gas) for each in found.judgements if each.rule.count("/") == 1}
    family = {
        "oxygen-low": "oxygen",
        "oxygen-high": "enrichment",
        "toxic": "toxic",
        "flammable": "flammable",
    }
    beyond = {
        (f"{family[case.hazard]}/{case.release}", case.gas)
        for case in found.cases
        if case.mark and not (case.release == "all-vessels" and len(case.vessels) < 2)
    }
    assert broken & set(CASE_RULES) == beyond


def test_there_is_a_rule_on_every_hazard_of_every_release():
    """Families are lower than their cases: a slug is public, and one for each gas."""
    families = sorted({slug.split("/")[0] for slug, _ in CASE_RULES})
    assert families == ["enrichment", "flammable", "oxygen", "toxic"]
    assert len(set(CASE_RULES)) == len(CASE_RULES)
    assert len(set(chain(*(slug.split("/")[1:] for slug, _ in CASE_RULES)))) == len(RELEASES)
