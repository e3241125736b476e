"""Every rule has two rooms: one just inside what it asks for, and one just outside."""

from datetime import timedelta

import pytest

from service.audit.assessment import SEVERITIES
from service.audit.rules.registry import RULES
from tests.audit.builders import (
    CARBON_DIOXIDE,
    METHANE,
    NOW,
    OXYGEN,
    PER_DAY,
    a_basis,
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

HOUR = timedelta(hours=1)
SECOND = timedelta(seconds=1)


def still(litres, **fields):
    return a_vessel(litres, measured_evaporation=0.0, **fields)


def evaporating(litres_a_day, **fields):
    vessel = a_vessel(
        1, measured_evaporation=litres_a_day * PER_DAY, filled_by="attended", **fields
    )
    units = (a_unit(60, standby_power=True),)
    return a_room(50, vessels=(vessel,), units=units, basis=a_basis("us"))


# Five litres of nitrogen bring 50 m3 to 19.5 % (methods C-5), 1.88 L of oxygen to 23.5 % (E4). An
# exhaust of 20 m3/h counted holds 20/14.448 m3/h of nitrogen, 48.0 L/d, at 19.5 %, and 20/31.0
# m3/h of oxygen, 18.05 L/d, at 23.5 % (D, E4). The other limits: common practice, no source.
ROOMS = {
    "oxygen/largest-vessel": (
        a_room(50, vessels=(still(4.98),)),
        a_room(50, vessels=(still(5.02),)),
    ),
    "oxygen/boil-off": (evaporating(47.8), evaporating(48.2)),
    "enrichment/largest-vessel": (
        a_room(50, vessels=(still(1.87, fluid=OXYGEN),), basis=a_basis("us")),
        a_room(50, vessels=(still(1.89, fluid=OXYGEN),), basis=a_basis("us")),
    ),
    "enrichment/boil-off": (evaporating(17.95, fluid=OXYGEN), evaporating(18.15, fluid=OXYGEN)),
    "detectors/calibration-overdue": (
        a_room(detectors=(a_detector(calibration_due=NOW + SECOND),)),
        a_room(detectors=(a_detector(calibration_due=NOW),)),
    ),
    "detectors/silenced": (
        a_room(detectors=(a_detector(silenced_since=NOW - HOUR + SECOND),)),
        a_room(detectors=(a_detector(silenced_since=NOW - HOUR),)),
    ),
    "detectors/missing": (
        a_room(50, vessels=(still(4.98),)),
        a_room(50, vessels=(still(5.02),)),
    ),
    "detectors/misplaced": (
        a_room(vessels=(still(1),), detectors=(a_detector(height=0.2),)),
        a_room(vessels=(still(1),), detectors=(a_detector(height=0.19),)),
    ),
    "records/cannot-compute": (a_room(1e-3), a_room(0.0)),
    "records/hazard-not-computed": (
        a_room(vessels=(still(1),)),
        a_room(vessels=(still(1, fluid=METHANE),)),
    ),
    "records/assumed": (
        a_room(vessels=(still(1, filled_by="attended"),)),
        a_room(vessels=(still(1, filled_by=None),)),
    ),
    # Four litres fill a fifth less than five: with four fifths of 50 m3 they just reach 19.5 %.
    "records/assumed-deciding": (
        a_room(50, vessels=(still(3.98),), occupied_fraction=None),
        a_room(50, vessels=(still(4.02),), occupied_fraction=None),
    ),
}
SEVERITY_OF = {
    "oxygen/largest-vessel": "minor",
    "oxygen/boil-off": "major",
    "enrichment/largest-vessel": "minor",
    "enrichment/boil-off": "major",
    "detectors/calibration-overdue": "minor",
    "detectors/silenced": "major",
    "detectors/missing": "minor",
    "detectors/misplaced": "minor",
    "records/cannot-compute": "major",
    "records/hazard-not-computed": "major",
    "records/assumed": "observation",
    "records/assumed-deciding": "minor",
}


def test_every_rule_has_a_room_on_either_side_and_a_name_of_its_own():
    slugs = [rule.slug for rule in RULES]
    assert len(slugs) == len(set(slugs))
    assert set(slugs) == set(ROOMS) == set(SEVERITY_OF)


@pytest.mark.parametrize("slug", ROOMS)
def test_a_rule_is_broken_just_outside_and_not_just_inside(slug):
    inside, outside = ROOMS[slug]
    assert judged(inside, slug) is None
    found = judged(outside, slug)
    assert found.severity == SEVERITY_OF[slug]
    assert found.family == slug.split("/")[0]


@pytest.mark.parametrize("slug", ROOMS)
def test_a_judgement_says_what_is_wrong_what_helps_and_where_it_comes_from(slug):
    found = judged(ROOMS[slug][1], slug)
    assert found.statement.endswith(".")
    assert found.remedy.endswith(".")
    assert found.severity in SEVERITIES
    assert found.worse_is in ("lower", "higher")
    assert found.method
    assert found.source
    assert found.evidence


def test_a_finding_on_cases_is_about_the_room_and_names_the_other_cases():
    room = a_room(
        50,
        vessels=(
            still(20),
            still(20, fluid=a_fluid("argon", molar_mass=0.039948, condensed_density=1395.4)),
        ),
    )
    found = judged(room, "oxygen/largest-vessel")
    assert found.subject == room.record
    assert found.gas == "oxygen"
    assert [vessel["tag"] for vessel in found.evidence["records"]] == ["V-20-argon"]
    others = [(case["airflow"], case["records"][0]["tag"]) for case in found.evidence["cases"]]
    assert others == [
        ("as-measured", "V-20-nitrogen"),
        ("lost", "V-20-argon"),
        ("lost", "V-20-nitrogen"),
    ]


class TestRemedies:
    """Quantified, and never more air for what is let go at once."""

    def test_the_amount_that_may_stay_is_the_amount_that_just_holds(self):
        """Methods C-5: 5.001 L in 50 m3; by the ideal gas 4.9998 L."""
        remedy = judged(a_room(50, vessels=(still(20),)), "oxygen/largest-vessel").remedy
        assert "most 4.99 L of nitrogen" in remedy
        assert "air" not in remedy

    def test_with_the_loss_of_filling_it_is_less(self):
        """4.9998 L / 1.1 = 4.545 L."""
        room = a_room(50, vessels=(still(20, filled_by="attended"),))
        assert "most 4.54 L of nitrogen" in judged(room, "oxygen/largest-vessel").remedy

    def test_by_mixing_it_is_more(self):
        """ln(20.95/19.5) x 50 m3 / 0.69218 m3/L = 5.181 L."""
        room = a_room(50, vessels=(still(20),), basis=a_basis(instant_mixing="mixing"))
        assert "most 5.18 L of nitrogen" in judged(room, "oxygen/largest-vessel").remedy

    def test_air_is_asked_for_in_figures(self):
        """Exhaust 14.448 R, three times for mixing: 48.2 L/d is 1.390 m3/h, 60.26 m3/h moved."""
        remedy = judged(evaporating(48.2), "oxygen/boil-off").remedy
        assert "60.3 m3/h in all" in remedy

    def test_nobody_rides_with_a_dewar(self):
        room = a_room(8, kind="lift", vessels=(still(25),))
        assert "Let nobody ride" in judged(room, "oxygen/largest-vessel").remedy


class TestDetectors:
    """Rules on detectors beside their two rooms."""

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

    @pytest.mark.parametrize(
        "flaw", [{"state": "fault"}, {"placed": "entrance"}, {"gas": "helium"}]
    )
    def test_a_detector_that_cannot_see_the_room_leaves_it_without(self, flaw):
        room = a_room(50, vessels=(still(20),), detectors=(a_detector(**flaw),))
        assert judged(room, "detectors/missing") is not None


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


def test_a_room_of_several_other_hazards_names_them_all():
    room = a_room(vessels=(still(1, fluid=METHANE), some_ice(1)))
    found = judged(room, "records/hazard-not-computed")
    assert found.evidence["hazards"] == {
        "methane": ["flammable"],
        CARBON_DIOXIDE.record.tag: ["toxic"],
    }


def test_a_withdrawn_vessel_of_another_hazard_is_none():
    room = a_room(vessels=(still(1, fluid=METHANE, state="withdrawn"),))
    assert judged(room, "records/hazard-not-computed") is None
