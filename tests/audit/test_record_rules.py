"""Rules on records, beside their two rooms."""

from dataclasses import replace

import pytest

from tests.audit.builders import (
    METHANE,
    PER_DAY,
    PER_HOUR,
    a_detector,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    judged,
    some_ice,
    standing_of,
)
from tests.audit.rule_rooms import a_room_with_nothing_to_say, still, with_unit, with_vessel


class TestCannotCompute:
    """Impossible numbers are a finding, and hide nothing else."""

    @pytest.mark.parametrize(
        "fields",
        [
            {"volume_m3": float("nan")},
            {"volume_m3": -1.0},
            {"volume_m3": float("inf")},
            {"occupied_fraction": 1.0},
            {"elevation": 20_000.0},
            {"station_pressure": 0.0},
            {"temperature": -1.0},
            {"floor_area": 0.0},
            {"way_out": -1.0},
            {"purge_flow": -1.0},
            {"vessels": (a_vessel(-5),)},
            {"vessels": (a_vessel(capacity_volume=None),)},
            {"vessels": (a_vessel(capacity_volume=float("inf")),)},
            {"vessels": (a_vessel(use=-1.0),)},
            {"vessels": (a_vessel(fluid=a_fluid("x", molar_mass=0.0, condensed_density=1.0)),)},
            {"purge_flow": 1.0, "purge_fluid": a_fluid("x", molar_mass=1.0, condensed_density=0.0)},
            {"units": (a_unit(-5),)},
            {"units": (a_unit(share=float("nan")),)},
            {"units": (a_unit(mixing_factor=0.0),)},
            {"detectors": (a_detector(t90=0.0),)},
            {"detectors": (a_detector(delay=-1.0),)},
        ],
    )
    def test_a_room_of_impossible_numbers_is_at_least_in_need_of_action(self, fields):
        bad, good = a_room(**fields), a_room(50, tag="good", vessels=(still(20),))
        first, second = assessed(bad, good)
        assert first.failed
        assert first.cases == ()
        assert [each.rule for each in first.judgements] == ["records/cannot-compute"]
        assert first.failed in first.judgements[0].statement
        assert standing_of(bad) == "action"
        assert (second,) == assessed(good)

    def test_no_rooms_make_no_assessments(self):
        assert assessed() == ()


OWN = a_fluid(
    "own-mixture",
    molar_mass=0.03,
    condensed_density=700.0,
    hazards=frozenset({"flammable", "toxic"}),
    flammable_limit=0.05,
)


class TestNotComputed:
    """A site's own gas whose limit nobody knows."""

    @pytest.mark.parametrize("fluid", ["methane", "ice"])
    def test_what_is_computed_is_not_said_to_be_unknown(self, fluid):
        vessel = some_ice(1) if fluid == "ice" else still(1, fluid=METHANE)
        assert judged(a_room(vessels=(vessel,)), "records/hazard-not-computed") is None

    def test_each_hazard_that_is_not_computed_is_named(self):
        other = replace(
            OWN,
            record=replace(OWN.record, id="other", tag="other"),
            hazards=frozenset({"flammable"}),
            flammable_limit=None,
        )
        room = a_room(vessels=(still(1, fluid=OWN), still(1, fluid=other), some_ice(1)))
        found = judged(room, "records/hazard-not-computed")
        assert found.evidence["hazards"] == {"own-mixture": ["toxic"], "other": ["flammable"]}

    def test_a_flammable_gas_with_a_limit_is_computed(self):
        burns = replace(OWN, hazards=frozenset({"flammable"}))
        room = a_room(vessels=(still(1, fluid=burns),))
        assert judged(room, "records/hazard-not-computed") is None

    def test_a_withdrawn_vessel_of_another_hazard_is_none(self):
        room = a_room(vessels=(still(1, fluid=OWN, state="withdrawn"),))
        assert judged(room, "records/hazard-not-computed") is None

    def test_purge_gas_counts_too(self):
        room = a_room(purge_flow=PER_HOUR, purge_fluid=OWN)
        assert judged(room, "records/hazard-not-computed") is not None


class TestImplausible:
    """Numbers that can stand in a record and hardly be. Limits: common practice, no source."""

    @pytest.mark.parametrize(
        ("fields", "name"),
        [
            ({"floor_area": 20.0}, "volume_off_pct"),
            ({"height": 21.0, "floor_area": 100 / 21}, "height_m"),
            ({"occupied_fraction": 0.71}, "occupied_pct"),
            ({"units": (a_unit(6001),)}, "air_changes_per_h"),
        ],
    )
    def test_a_room_names_the_number_that_is_hardly_met(self, fields, name):
        found = judged(a_room_with_nothing_to_say(**fields), "records/room-implausible")
        assert list(found.evidence["values"]) == [name]
        assert found.severity == "observation"

    @pytest.mark.parametrize(
        "fields",
        [
            {"floor_area": 33.4},
            {"height": 20.0, "floor_area": 5.0},
            {"occupied_fraction": 0.7},
            {"units": (a_unit(6000),)},
            {"floor_area": None, "height": None},
        ],
    )
    def test_what_is_met_is_not_doubted(self, fields):
        room = a_room_with_nothing_to_say(**fields)
        assert judged(room, "records/room-implausible") is None

    def test_all_doubts_of_a_record_are_one_finding(self):
        room = a_room_with_nothing_to_say(occupied_fraction=0.75, height=25.0, floor_area=8.0)
        found = judged(room, "records/room-implausible")
        assert found.measure == 3
        assert len(found.evidence["reasons"]) == 3
        assert found.statement.count("it is") + found.statement.count("its") >= 3

    def test_an_open_dewar_may_lose_a_fifth_a_day(self):
        room = with_vessel(50, kind="open-dewar", measured_evaporation=15 * PER_DAY)
        assert judged(room, "records/vessel-implausible") is None

    def test_a_vessel_above_its_rating_is_told_of_its_vacuum_instead(self):
        room = with_vessel(50, rated_evaporation=PER_DAY, measured_evaporation=15 * PER_DAY)
        assert judged(room, "records/vessel-implausible") is None
        assert judged(room, "vessels/evaporation-above-rated") is not None

    def test_a_unit_that_nobody_measured_is_not_doubted(self):
        assert judged(with_unit(measured_flow=None), "records/unit-implausible") is None


UNKNOWN = {
    "flow proved": (
        a_room(50, vessels=(still(20),), units=(a_unit(flow_proved=None),)),
        a_room(50, vessels=(still(20),), units=(a_unit(),)),
    ),
    "flow measured": (
        a_room(50, vessels=(still(20),), units=(a_unit(measured_flow=None, measurement_due=None),)),
        a_room(50, vessels=(still(20),), units=(a_unit(),)),
    ),
    "relief": (with_vessel(relief_fitted=None), with_vessel(relief_fitted=True)),
    "neck plug": (
        with_vessel(kind="freezer", neck_plug=None),
        with_vessel(kind="freezer", neck_plug="vented"),
    ),
    "high level": (
        with_vessel(filled_by="automatic"),
        with_vessel(filled_by="automatic", independent_high_level=True),
    ),
    "heard outside": (
        a_room(50, vessels=(still(20),), detectors=(a_detector(heard_outside=None),)),
        a_room(50, vessels=(still(20),), detectors=(a_detector(),)),
    ),
}


@pytest.mark.parametrize("what", UNKNOWN)
def test_recording_what_is_in_order_never_makes_a_room_worse(what):
    unknown, recorded = UNKNOWN[what]
    order = ("in-order", "attention", "action", "stop")
    assert order.index(standing_of(recorded)) <= order.index(standing_of(unknown))
    before, after = assessed(unknown)[0].judgements, assessed(recorded)[0].judgements
    assert len(after) <= len(before)
