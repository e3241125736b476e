"""Broken lines, lost vacuum, quenches, bund and filling by a line (judging 1, methods G)."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.audit.builders import (
    HELIUM,
    LATER,
    LITRE,
    NITROGEN,
    NOW,
    PER_HOUR,
    a_basis,
    a_control,
    a_detector,
    a_line,
    a_magnet,
    a_room,
    a_shut_line,
    a_unit,
    a_vessel,
    assessed,
    judged,
    severity,
)

AIR = 20.95
GAS = 1.0 / 1.1648  # [m3/kg] of nitrogen at 20 degrees Celsius; methods A1
RATIO = 0.69202  # [m3] of gas from a litre of liquid nitrogen; methods A-2
HELIUM_RATIO = 0.7496  # the same of helium; methods A1


def cases(room, release, hazard="oxygen-low", airflow="as-measured"):
    return [
        case
        for case in assessed(room)[0].cases
        if (case.release, case.hazard, case.airflow) == (release, hazard, airflow)
    ]


def the_case(room, release, **choice):
    found = cases(room, release, **choice)
    assert len(found) == 1
    return found[0]


def outdoors(litres, **fields):
    """The tank that a line comes from."""
    return a_vessel(litres, kind="tank", tag="TANK", **fields)


class TestLineBreak:
    def test_liquid_flows_by_bernoulli_until_the_source_is_empty(self):
        """Methods G-6 with Cd 1: 1.0228 / 0.62 kg/s for 738.6 kg/m3, here 806.08 kg/m3."""
        rate = 1.0228 / 0.62 * np.sqrt(806.08 / 738.6)
        room = a_room(1000, kind="walk-in", lines=(a_line(source=outdoors(100)),))
        case = the_case(room, "line-break")
        found = judged(
            a_room(100, kind="walk-in", lines=(a_line(source=outdoors(100)),)), "oxygen/line-break"
        )
        assert found.evidence["flow_kg_h"] == pytest.approx(rate * 3600.0, rel=3e-3)
        assert found.evidence["flows_s"] == pytest.approx(80.608 / rate, rel=3e-3)
        assert case.gas_m3 == pytest.approx(100 * RATIO, rel=1e-3)
        # Methods D5: without air the gas mixes while it displaces.
        assert case.oxygen_pct == pytest.approx(AIR * np.exp(-100 * RATIO / 1000.0), rel=1e-3)
        assert [line.tag for line in case.lines] == ["L-1"]

    def test_a_restrictor_limits_it(self):
        room = a_room(70, lines=(a_line(restrictor=0.02, source=outdoors(1000)),))
        found = judged(room, "oxygen/line-break")
        assert found.evidence["flow_kg_h"] == pytest.approx(72.0)
        assert found.evidence["rupture_kg_h"] > 5000.0

    def test_gas_left_open_chokes(self):
        """Methods G-7 with Cd 1: 0.027275 / 0.85 kg/s of nitrogen from 11 bar through 4 mm."""
        line = a_line(phase="gas", bore=0.004, source_pressure=11e5)
        found = judged(a_room(20, lines=(line,)), "oxygen/line-break")
        assert found.evidence["flow_kg_h"] == pytest.approx(0.027275 / 0.85 * 3600.0, rel=3e-3)

    def test_a_source_that_is_no_record_never_runs_empty(self):
        room = a_room(70, kind="walk-in", lines=(a_line(restrictor=0.01),))
        assert the_case(room, "line-break").oxygen_pct == pytest.approx(0.0, abs=1e-6)

    def test_a_withdrawn_source_lets_nothing_go(self):
        room = a_room(70, lines=(a_line(source=outdoors(100, state="withdrawn")),))
        assert cases(room, "line-break") == []

    def test_an_excess_flow_that_may_be_relied_on_ends_it(self):
        room = a_room(70, lines=(a_shut_line(restrictor=None, source=outdoors(1000)),))
        rate = 1.0228 / 0.62 * np.sqrt(806.08 / 738.6)
        assert the_case(room, "line-break").gas_m3 == pytest.approx(rate * GAS, rel=5e-3)

    @pytest.mark.parametrize(
        "fields",
        [
            {"trigger": "manual"}, {"trigger": "high-level"}, {"trigger": None},
            {"fails_closed": False}, {"fails_closed": None}, {"shut_off_test_due": NOW},
            {"shut_off_test_due": None},
        ],
    )  # fmt: skip
    def test_a_shut_off_that_may_not_be_relied_on_ends_nothing(self, fields):
        line = a_shut_line(restrictor=None, source=outdoors(100), **fields)
        case = the_case(a_room(70, lines=(line,)), "line-break")
        assert case.gas_m3 == pytest.approx(100 * RATIO, rel=1e-3)

    def test_a_detector_of_the_room_ends_it_after_its_alarm_and_the_closing(self):
        detector = a_detector()
        line = a_shut_line(
            restrictor=0.05, trigger=detector.record.id, closes_in=5.0, source=outdoors(1000)
        )
        room = a_room(70, lines=(line,), detectors=(detector,))
        case = the_case(room, "line-break")
        assert case.gas_m3 == pytest.approx(0.05 * GAS * (case.alarm_s + 5.0), rel=2e-3)
        held = judged(room, "oxygen/line-break").evidence["safeguards"]
        assert held["shut-off"]
        broken = replace(room, detectors=(replace(detector, state="fault"),))
        assert the_case(broken, "line-break").gas_m3 > 600.0

    def test_the_hose_of_a_dewar_breaks_at_what_is_recorded_or_assumed(self):
        """Bernoulli's equation by hand: pi d2 / 4 sqrt(2 rho dp), 10 mm and 150 kPa assumed."""
        dewar = a_vessel(200, withdrawal_bore=None, working_pressure=None)
        room = a_room(70, vessels=(dewar,))
        found = judged(room, "oxygen/line-break")
        rate = np.pi / 4.0 * 0.010**2 * np.sqrt(2.0 * 806.08 * 150e3)
        assert found.evidence["gas_m3_h"] == pytest.approx(rate * GAS * 3600.0, rel=2e-3)
        assert "withdrawal hose" in found.statement
        assumed = {each.field: each.value for each in assessed(room)[0].assumed}
        assert (assumed["withdrawal_bore_mm"], assumed["working_pressure_kpa"]) == (10.0, 150.0)

    def test_what_nobody_recorded_of_a_line_is_assumed_and_said(self):
        room = a_room(70, lines=(a_line(bore=None, source_pressure=None),))
        assumed = {each.field: each.record.kind for each in assessed(room)[0].assumed}
        assert assumed["bore_mm"] == assumed["source_pressure_kpa"] == "supply-line"

    def test_the_working_pressure_of_its_vessel_is_that_of_the_source(self):
        source = outdoors(1000, working_pressure=4e5)
        by_vessel = judged(
            a_room(70, lines=(a_line(source_pressure=None, source=source),)), "oxygen/line-break"
        )
        recorded = judged(a_room(70, lines=(a_line(source=outdoors(1000)),)), "oxygen/line-break")
        assert by_vessel.evidence["flow_kg_h"] == recorded.evidence["flow_kg_h"]


class TestVacuumLoss:
    def test_helium_is_as_worked_for_checks_g_2_and_g_3(self):
        """Methods G-2, G-3: 1.2 m2, 2.105 m3/s with multilayer insulation and 13.33 without."""
        for insulation, rate in (("vacuum-multilayer", 2.105), ("vacuum-powder", 13.33)):
            vessel = a_vessel(500, HELIUM, insulation=insulation, cold_area=1.2)
            found = judged(a_room(70, vessels=(vessel,)), "oxygen/vacuum-loss")
            case = the_case(a_room(70, vessels=(vessel,)), "vacuum-loss")
            assert found.evidence["heat_flux_kw_m2"] in (6.0, 38.0)
            lasts = 500 * HELIUM_RATIO / rate
            assert case.at_s == pytest.approx(lasts, rel=0.03)

    def test_both_ends_of_the_bracket_of_nitrogen_are_shown_and_one_counts(self):
        """Methods G3 (b) and (c): 2.8 kW/m2, and 6.9 with the jacket torn open."""
        vessel = a_vessel(500, insulation="vacuum-powder", cold_area=3.0)
        room = a_room(200, vessels=(vessel,), units=(a_unit(600),))
        found = {case.variant: case for case in cases(room, "vacuum-loss")}
        assert found.keys() == {None, "jacket-open"}
        assert found[None].counts
        assert not found["jacket-open"].counts
        assert found["jacket-open"].oxygen_pct < found[None].oxygen_pct
        evidence = judged(room, "oxygen/vacuum-loss").evidence
        assert evidence["heat_flux_kw_m2"] == 2.8
        assert {each["heat_flux_kw_m2"] for each in evidence["cases"] if "variant" in each} == {6.9}
        # 2.8 kW/m2 on 3 m2 evaporate 0.04217 kg/s of nitrogen (199.18 kJ/kg, methods A1).
        assert evidence["records"][0]["tag"] == "V-500-nitrogen"
        assert found[None].at_s == pytest.approx(
            500 * 0.80608 / (2800.0 * 3.0 / 199_180.0), rel=1e-3
        )

    @pytest.mark.parametrize("insulation", ["foam", "none"])
    def test_what_has_no_vacuum_loses_none(self, insulation):
        assert cases(a_room(vessels=(a_vessel(50, insulation=insulation),)), "vacuum-loss") == []

    def test_the_surface_is_estimated_where_unknown_and_that_is_said(self):
        """Methods G3: 1.3 (36 pi V2)^(1/3), 1.354 m2 for 100 L."""
        vessel = a_vessel(100, insulation=None, cold_area=None)
        answer = assessed(a_room(50, vessels=(vessel,)))[0]
        assumed = {each.field: each.value for each in answer.assumed}
        assert assumed["cold_area_m2"] == pytest.approx(1.354, rel=1e-3)
        assert assumed["insulation"] == "vacuum-powder"

    def test_an_outdoor_vent_does_not_take_it_away(self):
        vessel = a_vessel(500, insulation="vacuum-powder", vent_to="outdoors", relief_to="outdoors")
        found = judged(a_room(20, vessels=(vessel,)), "oxygen/vacuum-loss")
        assert "not credited" in found.evidence["relief_outdoors"]


class TestQuench:
    PIPE = {  # noqa: RUF012
        "has_pipe": True,
        "pipe_inspected": True,
        "pipe_inspection_due": LATER,
        "outlet_clear": True,
    }

    def shares(self, **quench):
        found = cases(a_room(5000, vessels=(a_magnet(1000, **quench),)), "quench")
        return {case.variant: round(case.gas_m3 / (1000 * HELIUM_RATIO), 3) for case in found}

    def test_it_runs_as_expected_and_with_its_pipe_failed(self):
        """Judging 1: 0.05 with the pipe inspected in date and clear; 1 with it failed."""
        assert self.shares(**self.PIPE) == {"expected": 0.05, "pipe-failed": 1.0}

    @pytest.mark.parametrize(
        "changed",
        [{"outlet_clear": False}, {"outlet_clear": None}, {"pipe_inspection_due": NOW},
         {"pipe_inspection_due": None}],
    )  # fmt: skip
    def test_a_pipe_that_may_not_be_relied_on_leaves_all_of_it(self, changed):
        assert self.shares(**{**self.PIPE, **changed})["expected"] == 1.0

    def test_the_share_recorded_goes_before(self):
        assert self.shares(**{**self.PIPE, "share_to_room": 0.2})["expected"] == 0.2

    def test_without_a_pipe_there_is_nothing_that_could_fail(self):
        assert self.shares(has_pipe=False) == {"expected": 1.0}

    def test_the_failed_pipe_counts_one_step_lower(self):
        room = a_room(300, vessels=(a_magnet(1000, **self.PIPE),))
        found = {
            each["variant"]: each["severity"]
            for each in [
                judged(room, "oxygen/quench").evidence,
                *judged(room, "oxygen/quench").evidence["cases"],
            ]
            if each["airflow"] == "as-measured"
        }
        bare = severity(a_room(300, vessels=(a_magnet(1000),)), "oxygen/quench")
        assert (found["pipe-failed"], bare) == ("major", "critical")

    def test_the_rates_are_those_of_check_g_9(self):
        """Methods G-9: 1700 L in 60 s are 1274 m3, at a mean of 21.24 m3/s; the peak twice that."""
        room = a_room(500, vessels=(a_magnet(1700, duration=60.0),))
        evidence = judged(room, "oxygen/quench").evidence
        assert evidence["gas_m3"] == pytest.approx(1274.0, rel=5e-3)
        assert evidence["mean_rate_m3_s"] == pytest.approx(21.24, rel=5e-3)
        assert evidence["peak_rate_m3_s"] == pytest.approx(42.48, rel=5e-3)

    def test_a_magnet_that_quenches_is_in_no_other_release_at_once(self):
        answer = assessed(a_room(70, vessels=(a_magnet(100),)))[0]
        assert {case.release for case in answer.cases} == {"quench"}
        bare = a_vessel(100, HELIUM, kind="magnet", measured_evaporation=0.0)
        found = {case.release for case in assessed(a_room(70, vessels=(bare,)))[0].cases}
        assert found == {"largest-vessel", "all-vessels"}


class TestOverfillAndFilling:
    def filled(self, **fields):
        return a_vessel(50, filled_by="automatic", fill_flow=10 * LITRE / 60.0, **fields)

    def test_a_bund_slows_what_runs_over_and_loses_none_of_it(self):
        """Methods G5: by no time more than 2 A k dT / L sqrt(t / (pi alpha)) has evaporated."""
        closing = self.filled(independent_high_level=True, closes_in=600.0, shut_off_test_due=LATER)
        free = a_room(200, vessels=(closing,))
        bund = a_control("bund", area=0.5)
        held = replace(free, controls=(bund,))
        fast, slow = (the_case(room, "overfill") for room in (free, held))
        assert slow.gas_m3 == pytest.approx(fast.gas_m3, rel=1e-9)
        assert slow.gas_m3 == pytest.approx(100 * RATIO, rel=1e-3)
        assert slow.at_s > fast.at_s
        assert slow.oxygen_pct >= fast.oxygen_pct

    def test_it_ends_when_the_source_is_empty(self):
        line = a_line(source=outdoors(200))
        vessel = self.filled(supply_line_id=line.record.id)
        case = the_case(a_room(500, vessels=(vessel,), lines=(line,)), "overfill")
        assert case.gas_m3 == pytest.approx(200 * RATIO, rel=1e-3)

    def test_the_flow_is_the_recorded_one_else_that_of_the_line_else_the_usual(self):
        line = a_line(restrictor=0.5, source=outdoors(1000))
        vessel = a_vessel(50, filled_by="automatic", fill_flow=None, supply_line_id=line.record.id)
        by_line = the_case(a_room(500, vessels=(vessel,), lines=(line,)), "overfill")
        assert by_line.at_s == pytest.approx(806.08 / 0.5, rel=1e-3)
        alone = a_vessel(50, filled_by="automatic", fill_flow=None)
        usual = the_case(a_room(500, kind="walk-in", vessels=(alone,)), "overfill")
        # 10 L/min for 96 h, by judging 1.
        assert usual.gas_m3 == pytest.approx(10 * RATIO * 60 * 96, rel=1e-3)

    def test_a_vessel_on_a_line_is_filled_by_itself_unless_somebody_says_how(self):
        line = a_line()
        vessel = a_vessel(50, filled_by=None, supply_line_id=line.record.id)
        answer = assessed(a_room(vessels=(vessel,), lines=(line,)))[0]
        assert "overfill" in {case.release for case in answer.cases}
        assert {"filling.by": "automatic"}.items() <= {
            each.field: each.value for each in answer.assumed if each.field == "filling.by"
        }.items()
        said = replace(vessel, filled_by="attended")
        answer = assessed(a_room(vessels=(said,), lines=(line,)))[0]
        assert "overfill" not in {case.release for case in answer.cases}

    def test_vessels_on_one_line_fill_together_and_others_one_at_a_time(self):
        """Two at 5 L/min lose at 1 L/min of liquid for 10 min; alone at half that for 20."""
        line = a_line(source_pressure=101_325.0, restrictor=10.0)
        vessel = a_vessel(50, filled_by="attended", fill_flow=5 * LITRE / 60.0, tag="A")
        on_line = [
            replace(vessel, record=replace(vessel.record, id=name), supply_line_id=line.record.id)
            for name in ("one", "two")
        ]
        alone = [replace(each, supply_line_id=None) for each in on_line]
        together = the_case(a_room(500, vessels=tuple(on_line), lines=(line,)), "filling")
        apart = the_case(a_room(500, vessels=tuple(alone)), "filling")
        assert together.gas_m3 == pytest.approx(apart.gas_m3, rel=1e-9)
        assert together.gas_m3 == pytest.approx(10 * RATIO, rel=1e-3)
        assert (together.at_s, apart.at_s) == (pytest.approx(600.0), pytest.approx(1200.0))

    def test_a_line_brings_no_more_than_it_can(self):
        line = a_line(restrictor=5 * 0.80608 / 60.0)
        vessel = a_vessel(50, filled_by="attended", fill_flow=5 * LITRE / 60.0)
        both = [
            replace(vessel, record=replace(vessel.record, id=name), supply_line_id=line.record.id)
            for name in ("one", "two")
        ]
        case = the_case(a_room(500, vessels=tuple(both), lines=(line,)), "filling")
        assert case.at_s == pytest.approx(1200.0)

    def test_liquid_from_a_line_under_pressure_flashes(self):
        """Methods A-7: 0.1464 of nitrogen that boils at 4 bar absolute, above the usual tenth."""
        line = a_line(source_pressure=4e5)
        vessel = a_vessel(50, filled_by="attended", supply_line_id=line.record.id, fill_flow=1e-4)
        case = the_case(a_room(500, vessels=(vessel,), lines=(line,)), "filling")
        assert case.gas_m3 == pytest.approx(0.1464 * 50 * RATIO, rel=0.01)

    def test_no_count_holds_on_a_vessel_that_a_line_feeds(self):
        line = a_line()
        vessel = a_vessel(
            50, filled_by="attended", contents_volume=5 * LITRE, count_due=LATER,
            supply_line_id=line.record.id,
        )  # fmt: skip
        fed = a_room(vessels=(vessel,), lines=(line,), basis=a_basis(contents="recorded"))
        by_hand = replace(fed, vessels=(replace(vessel, supply_line_id=None),))
        full, counted = (the_case(room, "largest-vessel").gas_m3 for room in (fed, by_hand))
        assert full == pytest.approx(10 * counted, rel=1e-6)


@pytest.mark.slow
@settings(max_examples=10, deadline=None)
@given(
    st.floats(1.0, 500.0), st.floats(0.0, 500.0), st.floats(20.0, 500.0),
    st.sampled_from(["line-break", "vacuum-loss", "spill", "quench"]),
)  # fmt: skip
def test_more_contents_never_raise_and_more_air_never_lowers_the_lowest_oxygen(
    litres, more, volume, release
):
    def lowest(amount, air):
        room = a_room(
            volume,
            vessels=(
                a_vessel(amount, insulation="vacuum-powder", mobile=True, working_pressure=3e5),
                a_magnet(amount),
            ),
            lines=(a_line(source=outdoors(amount)),),
            units=(a_unit(air),),
        )
        return min(case.oxygen_pct for case in cases(room, release) if case.counts)

    little = lowest(litres, 200.0)
    assert lowest(litres + more, 200.0) <= little + 1e-7
    assert lowest(litres, 400.0) >= little - 1e-7
    assert 0.0 <= little <= AIR


def test_what_is_let_go_is_never_more_than_the_source_holds():
    """The balance of mass of each release, to 1e-9: gas let go over what is held."""
    room = a_room(
        300,
        vessels=(
            a_vessel(
                80,
                insulation="vacuum-powder",
                mobile=True,
                working_pressure=3e5,
                filled_by="exchanged",
            ),
            a_magnet(60),
        ),
        lines=(a_line(source=outdoors(40)),),
    )
    # By the ideal gas at 101 325 Pa and 293.15 K, as the service counts it.
    nitrogen = 0.80608 * 8.314462618 * 293.15 / (101_325.0 * 0.0280135)
    helium = 0.12467 * 8.314462618 * 293.15 / (101_325.0 * 0.0040026)
    held = {"L-1": 40 * nitrogen, "M-60": 60 * helium, "V-80-nitrogen": 80 * nitrogen}
    for case in assessed(room)[0].cases:
        if case.airflow == "as-measured" and case.release not in ("boil-off", "all-vessels"):
            (source,) = (*case.vessels, *case.lines)
            assert case.gas_m3 == pytest.approx(held[source.tag], rel=1e-9), case.release


def test_a_line_counts_in_each_room_that_it_runs_through():
    rooms = [a_room(30, tag=tag, lines=(a_line(source=outdoors(500)),)) for tag in ("A", "B")]
    assert [bool(cases(room, "line-break")) for room in rooms] == [True, True]
    assert NITROGEN.record.tag in cases(rooms[0], "line-break")[0].fluids
    assert PER_HOUR > 0.0
