"""Carbon dioxide and nitrous oxide: each by its own fraction, whatever the oxygen does."""

from dataclasses import replace
from math import exp, log

import pytest

from service.audit.hazards import CARBON_DIOXIDE_IN_AIR
from tests.audit.builders import (
    ARGON,
    CARBON_DIOXIDE,
    EARLIER,
    LATER,
    NITROGEN,
    NITROUS_OXIDE,
    PER_DAY,
    PER_HOUR,
    a_basis,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    case_of,
    judged,
    severity,
    some_ice,
)

# Gas of a kilogram of carbon dioxide at 20 degrees Celsius and 101.325 kPa (methods A-4, CoolProp);
# the ideal gas is 0.53 % more, the cautious side.
ICE_GAS = 0.5437  # [m3/kg]
IDEAL = 0.007
OF_CARBON_DIOXIDE = {"gas": "carbon-dioxide", "alarms": (0.5, 1.5)}
OF_NITROUS_OXIDE = {"gas": "nitrous-oxide", "alarms": (0.01,)}


def fifty_kilograms(arrangement="exhaust", *, sustained_h=96.0, volume=40.0, **fields):
    """Methods E-1: dry ice 50 kg at 1 % an hour in 40 m3, one air change counted."""
    ice = some_ice(50, measured_loss=0.5 / 3600, mobile=False)
    return a_room(
        volume,
        vessels=(ice,),
        units=(a_unit(40, arrangement=arrangement, mixing_factor=1.0),),
        basis=a_basis(sustained_h=sustained_h),
        **fields,
    )


@pytest.mark.parametrize(("arrangement", "ppm"), [("supply", 6750), ("exhaust", 6796)])
def test_dry_ice_in_a_box_tends_to_what_the_air_allows(arrangement, ppm):
    """Methods E-1. After four days nothing is left of the 0.05 % it began with."""
    case = case_of(fifty_kilograms(arrangement), "boil-off", hazard="toxic")
    assert case.peak_pct == pytest.approx(ppm / 1e4, rel=IDEAL)
    assert case.mean_8h_pct == pytest.approx(case.peak_pct, rel=1e-6)
    assert case.gas_m3 == pytest.approx(48 * ICE_GAS, rel=IDEAL)


@pytest.mark.parametrize(
    ("hours", "measure", "ppm"), [(0.25, "mean_15min_pct", 783), (8.0, "mean_8h_pct", 5947)]
)
def test_the_first_means_of_dry_ice_are_those_of_the_air_it_fills(hours, measure, ppm):
    """Methods E-2, of clean air; the 500 ppm of the start are cleared by one air change an hour."""
    case = case_of(fifty_kilograms(sustained_h=hours), "boil-off", hazard="toxic")
    left_of_the_start = 500 * (1 - exp(-hours)) / hours
    # 0.7 % of the gas, as the ideal gas, and nothing of the start.
    assert getattr(case, measure) * 1e4 == pytest.approx(ppm + left_of_the_start, abs=IDEAL * ppm)


def test_a_case_starts_from_the_carbon_dioxide_of_air_which_then_dies_away():
    """A room with carbon dioxide begins at 0.05 % (judging 1); 1 g of ice adds next to none.

    One air change an hour leaves exp(-1) of it after an hour.
    """
    assert CARBON_DIOXIDE_IN_AIR == 0.0005
    ice = some_ice(0.001, measured_loss=1e-12, mobile=False)
    room = replace(fifty_kilograms(), vessels=(ice,))
    case = case_of(room, "boil-off", hazard="toxic")
    assert case.peak_pct == pytest.approx(0.05, rel=1e-6)
    assert case.at_s == 0.0
    assert case.mean_15min_pct == pytest.approx(0.05 * (1 - exp(-0.25)) / 0.25, rel=1e-6)
    assert case.mean_8h_pct == pytest.approx(0.05 * (1 - exp(-8.0)) / 8.0, rel=1e-6)


def test_the_oxygen_beside_it_is_what_the_gas_leaves():
    """Methods E: C = C0 (1 - X); at 3 % of carbon dioxide 20.3215 % oxygen (E-5)."""
    case = case_of(fifty_kilograms(), "boil-off", hazard="toxic")
    assert case.oxygen_pct == pytest.approx(20.95 * (1 - case.peak_pct / 100), rel=1e-9)
    three = replace(fifty_kilograms(), vessels=(some_ice(50, measured_loss=3e-2 / 0.5466 / 90),))
    case = case_of(three, "boil-off", hazard="toxic")
    share = 3.0 / case.peak_pct
    assert case.peak_pct == pytest.approx(3.0, rel=0.01)
    # Ten figures are answered of either.
    assert (20.95 - case.oxygen_pct) * share == pytest.approx(20.95 - 20.3215, rel=1e-7)


class TestMarksOfCarbonDioxide:
    """8 h mean, 15 min mean, peak at or above (judging 3)."""

    def test_what_lasts_is_held_to_the_mean_of_eight_hours_first(self):
        case = case_of(fifty_kilograms(), "boil-off", hazard="toxic")
        assert [(mark.place, mark.measure, mark.limit_pct) for mark in case.marks] == [
            (1, "mean-8h", 0.5),
            (2, "mean-15min", 1.5),
            (3, "peak", 4.0),
        ]
        # OSHA PEL 5000 ppm over 8 h (from memory); 6796 ppm are above it, the short limits not.
        assert case.mark == 1

    def test_what_lasts_less_than_eight_hours_may_pass_the_limit_for_a_while(self):
        """A peak of 0.64 % for an hour is a mean of 8 h below 0.5 %."""
        ice = some_ice(1.25, measured_loss=1.25 / 3600, mobile=False)
        case = case_of(replace(fifty_kilograms(), vessels=(ice,)), "boil-off", hazard="toxic")
        assert case.peak_pct > 0.5
        assert case.mean_15min_pct > 0.5
        assert case.mean_8h_pct < 0.5
        assert case.mark == 0

    def test_an_accident_is_held_to_the_same_limit_over_a_quarter_of_an_hour(self):
        ice = some_ice(1.25, mobile=True, measured_loss=0.0)
        case = case_of(replace(fifty_kilograms(), vessels=(ice,)), "spill", hazard="toxic")
        assert [(mark.measure, mark.limit_pct) for mark in case.marks] == [
            ("mean-15min", 0.5),
            ("mean-15min", 1.5),
            ("peak", 4.0),
        ]

    def test_a_peak_at_the_limit_is_beyond_it(self):
        """IDLH 4 % (NIOSH, from memory): reached counts, unlike the means."""
        steady = case_of(fifty_kilograms(), "boil-off", hazard="toxic").peak_pct
        at, above = (
            a_basis(carbon_dioxide_pct={"mean_8h": 4.0, "mean_15min": 4.0, "peak": peak})
            for peak in (steady, steady * (1 + 1e-9))
        )
        marks = [
            case_of(replace(fifty_kilograms(), basis=basis), "boil-off", hazard="toxic").mark
            for basis in (at, above)
        ]
        assert marks == [3, 0]

    def test_a_mean_at_its_limit_is_inside_it(self):
        steady = case_of(fifty_kilograms(), "boil-off", hazard="toxic").mean_8h_pct
        marks = []
        for limit in (steady, steady * (1 - 1e-9)):
            basis = a_basis(carbon_dioxide_pct={"mean_8h": limit, "mean_15min": 1.5, "peak": 4.0})
            room = replace(fifty_kilograms(), basis=basis)
            marks.append(case_of(room, "boil-off", hazard="toxic").mark)
        assert marks == [0, 1]

    def test_the_short_limit_of_the_us_is_twice_that_of_the_uk(self):
        """NIOSH STEL 3 %, EH40 WEL 1.5 % (from memory)."""
        ice = some_ice(150, measured_loss=1.5 / 3600, mobile=False)
        for tag, mark in (("us", 1), ("uk-eu", 2)):
            room = replace(fifty_kilograms(), vessels=(ice,), basis=a_basis(tag))
            case = case_of(room, "boil-off", hazard="toxic")
            assert case.mean_15min_pct == pytest.approx(2.04, rel=0.01)
            assert case.mark == mark

    def test_the_time_to_a_mean_is_when_the_fraction_passes_its_limit(self):
        """The cautious moment: a mean follows later. V/Q ln[(X0 - Xs)/(Xt - Xs)] (methods D2)."""
        case = case_of(fifty_kilograms(), "boil-off", hazard="toxic")
        steady = case.peak_pct
        expected = 3600 * log((0.05 - steady) / (0.5 - steady))
        assert case.marks[0].at_s == pytest.approx(expected, rel=1e-6)
        assert (case.marks[1].at_s, case.marks[2].at_s) == (None, None)


class TestMarksOfNitrousOxide:
    """A mean of 8 h for those who work there; for accidents 5 % and too little oxygen."""

    def leaking(self, litres_a_day=1.0, **fields):
        vessel = a_vessel(50, NITROUS_OXIDE, measured_evaporation=litres_a_day * PER_DAY)
        fields = {"units": (a_unit(300, mixing_factor=1.0),), **fields}
        return a_room(100, vessels=(vessel,), **fields)

    @pytest.mark.parametrize(("tag", "limit"), [("us", 0.0025), ("uk-eu", 0.01)])
    def test_what_lasts_is_held_to_the_means(self, tag, limit):
        """NIOSH REL 25 ppm, EH40 WEL 100 ppm over 8 h, and 3 x 100 ppm over 15 min."""
        room = self.leaking(basis=a_basis(tag))
        case = case_of(room, "boil-off", hazard="toxic")
        assert case.gas == "nitrous-oxide"
        assert [(mark.measure, mark.limit_pct) for mark in case.marks[:2]] == [
            ("mean-8h", limit),
            ("mean-15min", 0.03),
        ]
        # 1 L/d x 0.6686 m3/L (methods A1, E_20) into 300 m3/h: 93 ppm.
        assert case.mean_8h_pct == pytest.approx(100 * 0.6686 / 24 / 300, rel=IDEAL)
        assert case.mark == (1 if tag == "us" else 0)

    @pytest.mark.parametrize(("attended", "mark"), [(True, 1), (None, 1), (False, 0)])
    def test_nobody_works_eight_hours_where_nobody_works(self, attended, mark):
        case = case_of(self.leaking(attended=attended), "boil-off", hazard="toxic")
        assert case.mark == mark
        assert (case.marks[0].place == 1) is (attended is not False)

    def test_that_nobody_works_there_takes_away_no_other_mark(self):
        case = case_of(self.leaking(10, attended=False), "boil-off", hazard="toxic")
        assert case.mark == 2

    def test_an_accident_is_held_to_five_percent_and_to_the_oxygen(self):
        """5 %: common practice, no source. Critical oxygen 10 % is 52.27 % of the gas."""
        for litres, mark in ((7.4, 0), (7.6, 2), (77, 2), (79, 3)):
            vessel = a_vessel(litres, NITROUS_OXIDE, measured_evaporation=0.0)
            case = case_of(a_room(100, vessels=(vessel,)), hazard="toxic")
            # 0.6686 m3/L by the reference equation, 0.6725 as an ideal gas.
            assert case.peak_pct == pytest.approx(0.6686 * litres, rel=IDEAL)
            assert case.mark == mark
            assert [mark.place for mark in case.marks] == [2, 3]

    def test_at_the_third_mark_the_oxygen_is_critical(self):
        """At sea level 10 % (methods B3); at 3000 m 14.45 % (B-8)."""
        for elevation, oxygen in ((0.0, 10.0), (3000.0, 14.45)):
            vessel = a_vessel(20, NITROUS_OXIDE)
            room = a_room(100, elevation=elevation, vessels=(vessel,))
            third = case_of(room, hazard="toxic").marks[-1]
            assert 20.95 * (1 - third.limit_pct / 100) == pytest.approx(oxygen, abs=0.01)


class TestOwnGasAlone:
    """A toxic fraction is that of its own gas, diluted by nothing but air counted."""

    @pytest.mark.parametrize("fluid", [ARGON, NITROGEN])
    def test_another_gas_dilutes_none_of_it(self, fluid):
        alone = fifty_kilograms()
        vessel = a_vessel(200, fluid, measured_evaporation=100 * PER_DAY)
        with_another = replace(alone, vessels=(*alone.vessels, vessel))
        first, second = (
            case_of(room, "boil-off", hazard="toxic") for room in (alone, with_another)
        )
        assert replace(second, without_margins=first.without_margins) == first

    def test_each_toxic_gas_is_a_case_of_its_own(self):
        vessel = a_vessel(20, NITROUS_OXIDE)
        room = replace(fifty_kilograms(), vessels=(some_ice(50), vessel))
        gases = {
            case.gas
            for case in assessed(room)[0].cases
            if (case.release, case.hazard) == ("boil-off", "toxic")
        }
        assert gases == {"carbon-dioxide", "nitrous-oxide"}

    def test_a_gas_that_is_not_toxic_has_no_such_case(self):
        cases = assessed(a_room(vessels=(a_vessel(20),)))[0].cases
        assert {case.hazard for case in cases} == {"oxygen-low"}


class TestDetection:
    """An oxygen detector is none for a toxic gas (methods E1)."""

    def carbon_dioxide(self, **fields):
        """100 kg of liquid in a cylinder: 54 m3 into 200 m3 is 27 %, beyond IDLH."""
        liquid = replace(CARBON_DIOXIDE, solid=False)
        cylinder = replace(
            a_vessel(fluid=liquid, kind="cylinder"), capacity_volume=None, capacity_mass=100.0
        )
        return a_room(200, vessels=(cylinder,), **fields)

    def test_only_a_detector_of_the_gas_itself_is_a_safeguard(self):
        found = {
            gas: severity(self.carbon_dioxide(detectors=(detector,)), "toxic/largest-vessel")
            for gas, detector in (
                ("oxygen", a_detector()),
                ("nitrous-oxide", a_detector(gas="nitrous-oxide")),
                ("carbon-dioxide", a_detector(**OF_CARBON_DIOXIDE)),
            )
        }
        assert found == {
            "oxygen": "critical",
            "nitrous-oxide": "critical",
            "carbon-dioxide": "major",
        }

    def test_a_detector_of_carbon_dioxide_is_none_for_the_oxygen(self):
        room = self.carbon_dioxide(detectors=(a_detector(**OF_CARBON_DIOXIDE),))
        assert severity(room, "oxygen/largest-vessel") == severity(
            self.carbon_dioxide(), "oxygen/largest-vessel"
        )

    @pytest.mark.parametrize(
        "flaw",
        [
            {"state": "off"},
            {"calibration_due": EARLIER},
            {"silenced_since": EARLIER},
            {"height": 2.4},
            {"heard_outside": False},
        ],
    )
    def test_a_detector_with_a_flaw_is_none(self, flaw):
        detector = a_detector(**{**OF_CARBON_DIOXIDE, **flaw})
        room = self.carbon_dioxide(detectors=(detector,))
        assert severity(room, "toxic/largest-vessel") == "critical"

    def test_it_alarms_when_it_reads_the_fraction_it_is_set_to(self):
        """A reading without lag: V/Q ln[(X0 - Xs)/(Xt - Xs)], at 0.4 % before the mark."""
        detector = a_detector(gas="carbon-dioxide", alarms=(0.4, 1.5), t90=1e-6)
        case = case_of(fifty_kilograms(detectors=(detector,)), "boil-off", hazard="toxic")
        expected = 3600 * log((0.05 - case.peak_pct) / (0.4 - case.peak_pct))
        assert case.alarm_s == pytest.approx(expected, rel=1e-5)

    def test_without_a_recorded_alarm_it_is_taken_to_warn_at_the_second_mark(self):
        ice = some_ice(150, measured_loss=1.5 / 3600, mobile=False)
        detector = a_detector(gas="carbon-dioxide", alarms=(), t90=1e-6)
        room = replace(fifty_kilograms(detectors=(detector,)), vessels=(ice,))
        case = case_of(room, "boil-off", hazard="toxic")
        assert case.alarm_s == pytest.approx(case.marks[1].at_s, rel=1e-5)
        assert case.margin_s == pytest.approx(-35.0, rel=1e-3)


def test_the_flow_asked_for_just_holds_the_mean_of_eight_hours():
    """Steady: Q = R/X (methods E3), 0.5 kg/h x 0.5437 m3/kg at 0.5 % is 54.4 m3/h."""
    required = case_of(fifty_kilograms(), "boil-off", hazard="toxic").required_m3_h
    assert required == pytest.approx(0.5 * ICE_GAS / 0.005, rel=IDEAL)
    marks = [
        case_of(
            replace(fifty_kilograms(), units=(a_unit(required * share, mixing_factor=1.0),)),
            "boil-off",
            hazard="toxic",
        ).mark
        for share in (1 + 1e-6, 1 - 1e-4)
    ]
    assert marks == [0, 1]


def test_the_finding_names_the_gas_its_peak_and_its_means():
    room = fifty_kilograms()
    backed = replace(room, units=(replace(room.units[0], standby_power=True),))
    found = judged(backed, "toxic/boil-off")
    assert found.severity == "major"
    assert found.gas == "carbon-dioxide"
    assert "bring carbon dioxide to a peak of 0.684 %" in found.statement
    assert "highest mean of 15 min 0.684 %" in found.statement
    assert "a mean over 8 h of 0.5 %" in found.statement
    assert found.evidence["mean_8h_pct"] == found.measure


def test_carbon_dioxide_beyond_a_limit_needs_no_lack_of_oxygen():
    """At 5000 ppm the oxygen is still 20.845 % (methods E1)."""
    found = assessed(fifty_kilograms())[0]
    rules = {each.rule for each in found.judgements}
    assert "toxic/boil-off" in rules
    assert not any(rule.startswith("oxygen/") for rule in rules)


def test_an_oxygen_alarm_comes_long_after_the_limits():
    """At 19.5 % oxygen the carbon dioxide is 1.73 times IDLH (methods E1)."""
    ice = some_ice(600, measured_loss=6.0 / 3600, mobile=False)
    room = replace(fifty_kilograms(), vessels=(ice,))
    case = case_of(room, "boil-off", hazard="toxic")
    oxygen = case_of(room, "boil-off")
    at_alarm = 100 * (1 - 19.5 / 20.95)
    assert at_alarm / 4.0 == pytest.approx(1.73, abs=0.01)
    assert case.marks[2].at_s < oxygen.to_deficient_s


def test_an_outdoor_vent_takes_the_sustained_case_away_and_not_the_accident():
    vessel = a_vessel(50, NITROUS_OXIDE, vent_to="outdoors", filled_by="attended")
    releases = {
        case.release
        for case in assessed(a_room(vessels=(vessel,)))[0].cases
        if case.hazard == "toxic"
    }
    assert releases == {"largest-vessel", "all-vessels"}


def test_purge_with_carbon_dioxide_is_toxic_too():
    """1 m3/h into 100 m3/h counted: 1 % by the balance of an exhaust (methods D2)."""
    room = a_room(
        units=(a_unit(300),), purge_flow=PER_HOUR, purge_fluid=replace(CARBON_DIOXIDE, solid=False)
    )
    case = case_of(room, "boil-off", hazard="toxic")
    assert case.peak_pct == pytest.approx(1.0, rel=1e-6)
    assert case.vessels == ()


def test_a_detector_calibrated_for_later_still_counts_today():
    detector = a_detector(**{**OF_NITROUS_OXIDE, "calibration_due": LATER})
    vessel = a_vessel(20, NITROUS_OXIDE, measured_evaporation=0.0)
    room = a_room(100, vessels=(vessel,), detectors=(detector,))
    assert severity(room, "toxic/largest-vessel") == "minor"
    assert severity(replace(room, detectors=()), "toxic/largest-vessel") == "major"
