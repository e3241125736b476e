"""Hydrogen and methane: by their lower limits, in the zone where each goes."""

from dataclasses import replace
from math import exp, log

import pytest

from tests.audit.builders import (
    HYDROGEN,
    METHANE,
    NITROGEN,
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
    judged,
    severity,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA
# Gas of a litre of liquid at 20 degrees Celsius and 101.325 kPa, as an ideal gas. [m3]
# Densities of saturated liquid: CoolProp 8 (methods A1).
HYDROGEN_GAS = 0.070_85 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.002_015_9)
METHANE_GAS = 0.422_36 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.016_042_8)
# Lower limits: methane by IEC 60079-20-1, hydrogen by NFPA and IEC (from memory).
HYDROGEN_LIMIT, METHANE_LIMIT = 0.04, 0.044
AT_ONCE = "flammable/largest-vessel"
LOW, HIGH = "floor", "ceiling"


def test_the_gas_of_a_litre_is_the_printed_expansion():
    """Methods A1, E_20: hydrogen 845.7, methane 632.1 (reference equations)."""
    assert pytest.approx(0.8457, rel=1e-3) == HYDROGEN_GAS
    assert pytest.approx(0.6321, rel=3e-3) == METHANE_GAS


def still(litres, fluid, **fields):
    return a_vessel(litres, fluid, measured_evaporation=0.0, **fields)


def of_hydrogen(**fields):
    return a_detector(**{"gas": "hydrogen", "alarms": (0.4, 1.0), "height": 2.4, **fields})


@pytest.mark.parametrize(("arrangement", "multiple"), [("supply", 99.0), ("exhaust", 100.0)])
def test_a_quarter_of_the_lower_limit_of_hydrogen_is_held_by_a_hundred_times_its_flow(
    arrangement, multiple
):
    """Methods E-4: R 0.001 m3/s, fan for 25 % LFL (1 %): 0.0990 and 0.1000 m3/s."""
    room = a_room(
        100,
        kind="pit",
        purge_flow=0.001,
        purge_fluid=HYDROGEN,
        units=(a_unit(1, arrangement=arrangement, mixing_factor=1.0),),
    )
    case = case_of(room, "boil-off", hazard="flammable")
    assert case.required_m3_h == pytest.approx(multiple * 0.001 * 3600, rel=1e-6)
    marks = [
        case_of(
            replace(room, units=(replace(room.units[0], measured_flow=flow),)),
            "boil-off",
            hazard="flammable",
        ).mark
        for flow in (multiple * 0.001 * (1 + 1e-6), multiple * 0.001 * (1 - 1e-4))
    ]
    assert marks == [0, 1]


def test_a_steady_leak_is_what_the_air_leaves_of_it():
    """Exhaust: X = R/Q (methods E); 24 L a day of methane into 300 m3/h counted."""
    vessel = a_vessel(100, METHANE, measured_evaporation=24 * PER_DAY, filled_by="attended")
    room = a_room(50, vessels=(vessel,), units=(a_unit(900),))
    case = case_of(room, "boil-off", hazard="flammable")
    assert case.peak_pct == pytest.approx(100 * METHANE_GAS / 300, rel=1e-9)
    assert case.lower_limit_pct == pytest.approx(case.peak_pct / METHANE_LIMIT, rel=1e-9)


class TestLeChatelier:
    """Several flammable gases: their shares of their own limits add up."""

    def both(self, **fields):
        return a_room(
            400,
            height=20.0,
            floor_area=20.0,
            vessels=(
                still(2, HYDROGEN, manifold="one"),
                still(3, METHANE, manifold="one"),
            ),
            **fields,
        )

    def test_what_is_let_go_together_adds_up(self):
        """The rule of Le Chatelier: sum of x/LFL; methane goes to the floor and the ceiling.

        Floor zone 20 m2 x 1.5 m = 30 m3, the smaller of the two (methods F1).
        """
        case = case_of(self.both(), hazard="flammable")
        shares = 2 * HYDROGEN_GAS / HYDROGEN_LIMIT + 3 * METHANE_GAS / METHANE_LIMIT
        assert case.lower_limit_pct == pytest.approx(100 * shares / 30, rel=1e-9)
        assert case.peak_pct == pytest.approx(
            100 * (2 * HYDROGEN_GAS + 3 * METHANE_GAS) / 30, rel=1e-9
        )
        assert case.fluids == ("hydrogen", "methane")

    def test_what_leaks_together_adds_up(self):
        vessels = (
            a_vessel(50, HYDROGEN, measured_evaporation=3 * PER_DAY, filled_by="attended"),
            a_vessel(50, METHANE, measured_evaporation=4 * PER_DAY, filled_by="attended"),
        )
        room = a_room(50, vessels=vessels, units=(a_unit(600),))
        shares = 3 * HYDROGEN_GAS / HYDROGEN_LIMIT + 4 * METHANE_GAS / METHANE_LIMIT
        case = case_of(room, "boil-off", hazard="flammable")
        assert case.lower_limit_pct == pytest.approx(100 * shares / 24 / 200, rel=1e-8)

    def test_the_mixture_burns_at_the_limit_of_the_mixture(self):
        """1/LFL of the mixture is sum of y/LFL: half and half of 4 and 4.4 % burns at 4.190 %."""
        room = a_room(
            1000,
            vessels=(
                still(1 / HYDROGEN_GAS, HYDROGEN, manifold="one"),
                still(1 / METHANE_GAS, METHANE, manifold="one"),
            ),
        )
        case = case_of(room, hazard="flammable")
        assert 100 * case.peak_pct / case.lower_limit_pct == pytest.approx(4.1905, rel=1e-4)

    def test_a_gas_that_does_not_burn_has_no_part_in_it(self):
        alone = a_room(50, vessels=(still(2, HYDROGEN),))
        room = replace(alone, vessels=(*alone.vessels, still(200, NITROGEN)))
        first, second = (case_of(each, hazard="flammable") for each in (alone, room))
        assert replace(second, without_margins=first.without_margins) == first

    def test_a_site_may_have_a_gas_of_its_own(self):
        """A limit recorded with the fluid is used: 2.5 % of a litre of it in 37.5 m3 of zone."""
        own = a_fluid(
            "town-gas",
            molar_mass=0.0160428,
            condensed_density=422.36,
            hazards=frozenset({"asphyxiant", "flammable"}),
            flammable_limit=0.025,
        )
        case = case_of(a_room(62.5, vessels=(still(1, own),)), hazard="flammable")
        assert case.lower_limit_pct == pytest.approx(100 * METHANE_GAS / 37.5 / 0.025, rel=1e-9)

    def test_a_limit_of_next_to_nothing_is_judged_and_stops_no_other_room(self):
        """A slip in a record, 0.01 % for 10 %, makes a hard case, not an error."""
        own = a_fluid(
            "slip",
            molar_mass=0.0160428,
            condensed_density=422.36,
            hazards=frozenset({"flammable"}),
            flammable_limit=0.0001,
        )
        vessel = a_vessel(1, own, measured_evaporation=PER_DAY, filled_by="automatic")
        room = a_room(1000, vessels=(vessel,))
        assert case_of(room, hazard="flammable").mark == 3

    def test_the_basis_sets_the_limits_of_methane(self):
        """NFPA 5 %, IEC 4.4 % (from memory)."""
        found = {
            tag: case_of(
                a_room(100, vessels=(still(2, METHANE),), basis=a_basis(tag)), hazard="flammable"
            ).lower_limit_pct
            for tag in ("baseline", "us")
        }
        assert found["baseline"] / found["us"] == pytest.approx(5.0 / 4.4, rel=1e-9)


class TestZones:
    """The highest of room, floor and ceiling figure (methods F1)."""

    @pytest.mark.parametrize(
        ("fluid", "gas", "zone"),
        [
            (HYDROGEN, HYDROGEN_GAS, 20.0),  # above 1.5 m
            (METHANE, METHANE_GAS, 20.0),  # floor 30 m3, ceiling 20 m3
        ],
    )
    def test_a_light_gas_stays_above_the_heads_of_people(self, fluid, gas, zone):
        """Floor 20 m2, 2.5 m high: 20 m3 above 1.5 m, 30 m3 below (methods F-1)."""
        room = a_room(50, floor_area=20.0, height=2.5, vessels=(still(1, fluid),))
        case = case_of(room, hazard="flammable")
        assert case.peak_pct == pytest.approx(100 * gas / zone, rel=1e-9)

    def test_a_heavy_one_stays_where_people_breathe(self):
        """A zone of 20 m2 x 1.5 m (methods F-1)."""
        heavy = a_fluid(
            "propane-like",
            molar_mass=0.0440956,
            condensed_density=580.9,
            hazards=frozenset({"flammable"}),
            flammable_limit=0.017,
        )
        room = a_room(100, floor_area=20.0, height=5.0, vessels=(still(1, heavy),))
        gas = 0.5809 * GAS_CONSTANT * 293.15 / (101_325.0 * 0.0440956)
        case = case_of(room, hazard="flammable")
        assert case.peak_pct == pytest.approx(100 * gas / 30, rel=1e-9)

    def test_a_room_without_a_zone_of_its_own_is_taken_whole(self):
        """1.4 m high: nothing lies above 1.5 m."""
        room = a_room(28, floor_area=20.0, height=1.4, vessels=(still(1, HYDROGEN),))
        case = case_of(room, hazard="flammable")
        assert case.peak_pct == pytest.approx(100 * HYDROGEN_GAS / 28, rel=1e-9)

    def test_fittings_take_their_share_of_the_zone(self):
        room = a_room(
            50, floor_area=20.0, height=2.5, occupied_fraction=0.5, vessels=(still(1, HYDROGEN),)
        )
        case = case_of(room, hazard="flammable")
        assert case.peak_pct == pytest.approx(100 * HYDROGEN_GAS / 10, rel=1e-9)
        assert case.without_margins["peak_pct"] == pytest.approx(case.peak_pct / 2, rel=1e-9)

    def test_a_steady_leak_is_the_same_in_the_zone_and_in_the_room(self):
        """The same air passes through: X = R/Q whatever the volume (methods D2)."""
        vessel = a_vessel(50, HYDROGEN, measured_evaporation=10 * PER_DAY, filled_by="attended")
        peaks = [
            case_of(
                a_room(volume, height=height, vessels=(vessel,), units=(a_unit(300),)),
                "boil-off",
                hazard="flammable",
            ).peak_pct
            for volume, height in ((50, 2.5), (400, 8.0))
        ]
        assert peaks == [pytest.approx(10 * HYDROGEN_GAS / 24, rel=1e-8)] * 2

    def test_the_oxygen_of_the_room_is_that_of_the_mixed_room(self):
        room = a_room(50, floor_area=20.0, height=2.5, vessels=(still(5, HYDROGEN),))
        low = case_of(room)
        assert low.oxygen_pct == pytest.approx(20.95 * (1 - 5 * HYDROGEN_GAS / 50), rel=1e-9)

    def test_the_room_is_back_only_when_all_of_its_air_is(self):
        """2 L of hydrogen in 80 m3: 52.9 % of the limit mixed; 264 % of it in 16 m3 of ceiling.

        300 m3/h counted. The zone alone would be clear after 16/300 h x ln(264.3/25) = 0.126 h,
        the mixed room after 80/300 h x ln(52.9/25) = 0.200 h.
        """
        room = a_room(
            80,
            floor_area=80 / 1.875,
            height=1.875,
            vessels=(still(2, HYDROGEN),),
            units=(a_unit(900),),
        )
        case = case_of(room, hazard="flammable")
        mixed = 2 * HYDROGEN_GAS / 80 / HYDROGEN_LIMIT
        assert case.lower_limit_pct == pytest.approx(100 * mixed * 5, rel=1e-9)
        hours = 80 / 300 * log(mixed / 0.25)
        assert case.recovered_s == pytest.approx(3600 * hours, rel=1e-8)
        assert case.restore_m3_h == pytest.approx(900 * hours, rel=1e-8)

    def test_where_the_zone_takes_longer_the_zone_decides(self):
        """0.5 L: 66.1 % of the limit in the zone, 13.2 % in the room, which never was beyond it."""
        room = a_room(
            80,
            floor_area=80 / 1.875,
            height=1.875,
            vessels=(still(0.5, HYDROGEN),),
            units=(a_unit(900),),
        )
        case = case_of(room, hazard="flammable")
        zone = 0.5 * HYDROGEN_GAS / 16 / HYDROGEN_LIMIT
        assert case.lower_limit_pct == pytest.approx(100 * zone, rel=1e-9)
        hours = 16 / 300 * log(zone / 0.25)
        assert case.recovered_s == pytest.approx(3600 * hours, rel=1e-8)

    @pytest.mark.parametrize(("flow", "holds"), [(560, False), (572, True)])
    def test_ventilation_is_a_safeguard_only_where_the_whole_room_comes_back(self, flow, holds):
        """10 L of hydrogen in 80 m3: 264 % of the limit mixed, 80 m3 x ln(264.3/25) = 188.6 m3/h.

        Three times that for mixing: 566 m3/h. The zone of 32 m3 alone would ask for 314.
        """
        room = a_room(80, vessels=(still(10, HYDROGEN),), units=(a_unit(flow),))
        assert (severity(room, AT_ONCE) == "major") is holds


@pytest.mark.parametrize(
    ("share", "mark"),
    [(0.249, 0), (0.251, 1), (0.499, 1), (0.501, 2), (0.999, 2), (1.001, 3), (30.0, 3)],
)
def test_the_marks_are_a_quarter_a_half_and_the_whole_of_the_limit(share, mark):
    """NFPA practice for a quarter (from memory), the others: common practice, no source."""
    litres = share * HYDROGEN_LIMIT * 20 / HYDROGEN_GAS
    room = a_room(50, floor_area=20.0, height=2.5, vessels=(still(litres, HYDROGEN),))
    case = case_of(room, hazard="flammable")
    assert case.mark == mark
    assert case.gas == "flammable-gas"
    assert [(mark.measure, mark.limit_pct) for mark in case.marks] == [
        ("lower-limit", 25.0),
        ("lower-limit", 50.0),
        ("lower-limit", 100.0),
    ]


def test_at_the_limit_itself_the_third_mark_is_reached():
    """At or above LFL (judging 3); a quarter of it is beyond only when above."""
    # Filled with gas from floor to ceiling, of which a limit of 100 % is the whole.
    room = a_room(20, floor_area=20.0, height=1.0, vessels=(still(100, HYDROGEN),))
    for shares, mark in (([0.25, 0.5, 1.0], 3), ([1.0, 1.1, 1.2], 0)):
        basis = a_basis(lfl_pct={"methane": 4.4, "hydrogen": 100.0}, lfl_shares=shares)
        case = case_of(replace(room, basis=basis), hazard="flammable")
        assert (case.lower_limit_pct, case.mark) == (100.0, mark)


def test_mixing_at_once_is_milder_than_displacement():
    """C2 against C1 in the zone: 1 - exp(-x) against x."""
    room = a_room(50, floor_area=20.0, height=2.5, vessels=(still(5, HYDROGEN),))
    by_mixing = replace(room, basis=a_basis(instant_mixing="mixing"))
    share = 5 * HYDROGEN_GAS / 20
    assert case_of(by_mixing, hazard="flammable").peak_pct == pytest.approx(
        100 * (1 - exp(-share)), rel=1e-9
    )


class TestDetection:
    """A detector of the gas itself, where that gas goes."""

    def hydrogen(self, **fields):
        return a_room(50, vessels=(still(5, HYDROGEN),), **fields)

    def test_an_oxygen_detector_is_none_for_a_gas_that_burns(self):
        room = self.hydrogen(detectors=(a_detector(height=2.4),))
        assert severity(room, AT_ONCE) == "critical"
        assert severity(self.hydrogen(detectors=(of_hydrogen(),)), AT_ONCE) == "major"

    @pytest.mark.parametrize(("height", "found"), [(0.5, "critical"), (2.1, "major")])
    def test_hydrogen_is_met_at_the_ceiling(self, height, found):
        """Within 0.5 m of it: common practice, no source."""
        room = self.hydrogen(detectors=(of_hydrogen(height=height),))
        assert severity(room, AT_ONCE) == found

    def test_methane_is_met_at_the_ceiling_and_low(self):
        room = a_room(50, vessels=(still(5, METHANE),))
        high, low = (
            a_detector(gas="methane", alarms=(0.4,), height=height, tag=f"D-{height}")
            for height in (2.4, 0.5)
        )
        found = [
            severity(replace(room, detectors=detectors), AT_ONCE)
            for detectors in ((high,), (low,), (high, low))
        ]
        assert found == ["critical", "critical", "major"]

    def test_its_alarms_are_percent_of_the_air_and_not_of_the_limit(self):
        """V/Q ln[Xs/(Xs - Xt)] (methods D2), in the ceiling zone of 20 m3."""
        vessel = a_vessel(50, HYDROGEN, measured_evaporation=50 * PER_DAY, filled_by="attended")
        room = a_room(
            50,
            floor_area=20.0,
            height=2.5,
            kind="pit",
            vessels=(vessel,),
            units=(a_unit(100, mixing_factor=1.0),),
            detectors=(of_hydrogen(alarms=(0.4,), t90=1e-6),),
        )
        steady = 50 * HYDROGEN_GAS / 24 / 100
        case = case_of(room, "boil-off", hazard="flammable")
        expected = 20 / 100 * 3600 * log(steady / (steady - 0.004))
        assert case.alarm_s == pytest.approx(expected, rel=1e-5)


def test_the_finding_says_how_near_to_the_limit():
    found = judged(a_room(50, vessels=(still(1, HYDROGEN),)), AT_ONCE)
    assert found.gas == "flammable-gas"
    assert "of its lower flammable limit" in found.statement
    share = 100 * HYDROGEN_GAS / 20 / HYDROGEN_LIMIT
    assert found.measure == pytest.approx(share, rel=1e-9)
    assert found.limit == 100.0
    assert "may stand here" in found.remedy


def test_hydrogen_burns_long_before_it_suffocates():
    """25 % of LFL is 1 %; 19.5 % oxygen is 6.92 % of gas (methods E)."""
    found = assessed(a_room(1000, vessels=(still(20, HYDROGEN),)))[0]
    rules = {each.rule for each in found.judgements}
    assert AT_ONCE in rules
    assert not any(rule.startswith("oxygen/") for rule in rules)


def test_a_gas_that_does_not_burn_has_no_such_case():
    cases = assessed(a_room(vessels=(still(20, NITROGEN),), purge_flow=PER_HOUR))[0].cases
    assert "flammable" not in {case.hazard for case in cases}
