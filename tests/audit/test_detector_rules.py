"""Rules on gas detectors, beside their two rooms."""

from dataclasses import replace
from datetime import timedelta

import pytest

from tests.audit.builders import (
    CARBON_DIOXIDE,
    HELIUM,
    HYDROGEN,
    METHANE,
    NITROUS_OXIDE,
    NOW,
    OXYGEN,
    a_basis,
    a_detector,
    a_room,
    assessed,
    judged,
    severity,
    some_ice,
)
from tests.audit.rule_rooms import an_outage, charged, still, with_detector

HOUR = timedelta(hours=1)


class TestHeights:
    """Where the gas goes."""

    @pytest.mark.parametrize(("height", "wrong"), [(0.95, False), (1.6, False), (1.61, True)])
    def test_a_detector_where_people_breathe_is_not_misplaced(self, height, wrong):
        room = a_room(vessels=(still(1),), detectors=(a_detector(height=height),))
        assert (judged(room, "detectors/misplaced") is not None) is wrong

    def test_a_detector_of_unknown_height_is_misplaced(self):
        room = a_room(vessels=(still(1),), detectors=(a_detector(height=None),))
        assert "not recorded" in judged(room, "detectors/misplaced").statement

    def test_a_detector_for_another_gas_hangs_where_that_gas_goes(self):
        for height, wrong in ((0.5, False), (2.4, True)):
            detector = a_detector(gas="carbon-dioxide", height=height)
            room = a_room(vessels=(some_ice(1),), detectors=(detector,))
            assert (judged(room, "detectors/misplaced") is not None) is wrong

    def test_a_detector_that_is_off_is_not_asked_for_its_calibration(self):
        room = a_room(detectors=(a_detector(state="off", calibration_due=None),))
        assert judged(room, "detectors/calibration-overdue") is None


class TestMissing:
    """An oxygen detector is for oxygen, and for nothing else."""

    @pytest.mark.parametrize(
        "flaw",
        [
            {"state": "fault"},
            {"placed": "entrance"},
            {"gas": "helium"},
            {"outages": (an_outage(HOUR),)},
        ],
    )
    def test_a_detector_that_cannot_see_the_room_leaves_it_without(self, flaw):
        room = a_room(50, vessels=(still(20),), detectors=(a_detector(**flaw),))
        assert judged(room, "detectors/missing") is not None

    def test_a_room_is_without_while_its_only_detector_is_out(self):
        detector = a_detector(outages=(an_outage(HOUR),))
        room = a_room(50, vessels=(still(20),), detectors=(detector,))
        assert assessed(room)[0].turns_at == NOW + HOUR
        assert judged(room, "detectors/missing", at=NOW + HOUR) is None

    def test_a_room_that_only_poisons_is_not_asked_for_an_oxygen_detector(self):
        """5.4 % of carbon dioxide is beyond every mark of its own; oxygen is at 19.8 %."""
        room = charged(5, CARBON_DIOXIDE)
        assert severity(room, "toxic/largest-vessel") == "critical"
        assert judged(room, "detectors/missing") is None
        assert severity(room, "detectors/carbon-dioxide-missing") == "minor"

    def test_at_the_alarm_of_an_oxygen_detector_carbon_dioxide_is_long_deadly(self):
        """Methods E1: 6.92 % at 19.5 %, 1.73 times what is an immediate danger (NIOSH IDLH)."""
        found = judged(
            a_room(50, vessels=(some_ice(10),), detectors=(a_detector(),)),
            "detectors/carbon-dioxide-missing",
        )
        assert "6.92 % of the gas" in found.statement
        assert "1.73 times" in found.statement
        assert found.evidence["gas_at_oxygen_alarm_pct"] == pytest.approx(6.9212, abs=1e-4)

    def test_of_nitrous_oxide_it_is_692_times_the_limit_of_a_shift(self):
        """Methods E1: by the limit of 100 ppm (EH40, from memory)."""
        room = replace(charged(5, NITROUS_OXIDE), basis=a_basis("uk-eu"))
        assert "692 times" in judged(room, "detectors/nitrous-oxide-missing").statement

    @pytest.mark.parametrize(
        ("fluid", "rule"),
        [
            (CARBON_DIOXIDE, "detectors/carbon-dioxide-missing"),
            (NITROUS_OXIDE, "detectors/nitrous-oxide-missing"),
            (METHANE, "detectors/flammable-missing"),
        ],
    )
    def test_a_little_of_it_is_said_where_an_oxygen_detector_may_be_taken_for_one(
        self, fluid, rule
    ):
        little = replace(charged(0.001, fluid), kind="room", gross_volume=5e4)
        assert judged(little, rule) is None
        watched = replace(little, detectors=(a_detector(),))
        assert severity(watched, rule) == "observation"
        own = a_detector(gas=fluid.record.tag, tag="D-2")
        assert judged(replace(watched, detectors=(a_detector(), own)), rule) is None

    def test_each_flammable_gas_needs_its_own(self):
        room = a_room(
            50,
            vessels=(still(5, fluid=METHANE), *charged(1, HYDROGEN).vessels),
            detectors=(a_detector(gas="methane"),),
        )
        assert severity(room, "detectors/flammable-missing") == "minor"
        both = (*room.detectors, a_detector(gas="hydrogen", tag="D-2"))
        assert judged(replace(room, detectors=both), "detectors/flammable-missing") is None

    def test_liquid_hydrogen_needs_its_own_however_large_the_room(self):
        hall = a_room(1e6, vessels=(still(1, fluid=HYDROGEN),), detectors=(a_detector(),))
        found = judged(hall, "detectors/hydrogen-missing")
        assert found.severity == "major"
        assert "V-1-hydrogen" in found.statement
        # One rule says it, not two.
        assert judged(hall, "detectors/flammable-missing") is None

    def test_hydrogen_in_cylinders_is_a_flammable_gas_like_another(self):
        room = charged(1, HYDROGEN)
        assert judged(room, "detectors/hydrogen-missing") is None
        assert severity(room, "detectors/flammable-missing") == "minor"


class TestAlarms:
    """Set in time, and heard."""

    def test_a_detector_without_an_alarm_of_falling_oxygen_is_late(self):
        found = judged(with_detector(alarms=(23.5,)), "detectors/alarm-set-late")
        assert found.measure is None
        assert "no alarm for falling oxygen" in found.statement

    def test_where_only_oxygen_is_held_nothing_falls(self):
        room = a_room(vessels=(still(1, fluid=OXYGEN),), detectors=(a_detector(alarms=(23.5,)),))
        assert judged(room, "detectors/alarm-set-late") is None

    def test_a_detector_whose_alarms_nobody_recorded_is_an_assumption(self):
        assert judged(with_detector(alarms=()), "detectors/alarm-set-late") is None
        assert judged(with_detector(alarms=()), "records/assumed") is not None

    @pytest.mark.parametrize(("elevation", "late"), [(0.0, False), (3000.0, True)])
    def test_high_up_an_alarm_must_be_set_higher(self, elevation, late):
        """Judging 3: danger at 3000 m is 19.5 %."""
        room = replace(with_detector(alarms=(19.0,)), elevation=elevation)
        assert (judged(room, "detectors/alarm-set-late") is not None) is late
        at_the_mark = replace(with_detector(alarms=(19.5,)), elevation=elevation)
        assert judged(at_the_mark, "detectors/alarm-set-late") is None

    @pytest.mark.parametrize("monitored", [None, True])
    def test_one_that_is_not_said_to_report_to_nobody_is_left_alone(self, monitored):
        room = replace(with_detector(monitored=monitored), attended=False)
        assert judged(room, "detectors/not-monitored") is None

    @pytest.mark.parametrize("attended", [None, True])
    def test_where_somebody_is_the_alarm_is_heard(self, attended):
        room = replace(with_detector(monitored=False), attended=attended)
        assert judged(room, "detectors/not-monitored") is None

    def test_one_at_the_entrance_needs_no_alarm_outside(self):
        room = with_detector(placed="entrance", heard_outside=None)
        assert judged(room, "detectors/not-warning-outside") is None


class TestZeroing:
    """A cell reads partial pressure."""

    def test_a_cell_zeroed_at_sea_level_reads_low_at_1500_m(self):
        """Methods M4: 17.5 % at 1500 m (from memory)."""
        room = replace(with_detector(zeroed_at=101_325.0), elevation=1500.0)
        found = judged(room, "detectors/zeroed-elsewhere")
        assert found.evidence["reads_in_clean_air_pct"] == pytest.approx(17.5, abs=0.05)
        assert "alarms early" in found.statement

    def test_one_carried_down_reads_high_and_alarms_late(self):
        found = judged(with_detector(zeroed_at=84_556.0), "detectors/zeroed-elsewhere")
        assert "25.1 %" in found.statement  # 20.95 x 101.325 / 84.556
        assert "alarms late" in found.statement

    @pytest.mark.parametrize("fields", [{"gas": "helium"}, {"state": "off"}, {"zeroed_at": None}])
    def test_others_are_not_asked(self, fields):
        room = with_detector(**{"zeroed_at": 84_556.0, **fields})
        assert judged(room, "detectors/zeroed-elsewhere") is None


def test_a_detector_in_fault_is_said_beside_one_that_works():
    room = a_room(
        50,
        vessels=(still(1, fluid=HELIUM),),
        detectors=(
            a_detector(height=2.4),
            a_detector(height=2.4, state="fault", tag="D-2"),
        ),
    )
    found = judged(room, "detectors/fault")
    assert found.subject.tag == "D-2"
    assert "watches no oxygen" in found.statement
