"""The shipped bases, and what a basis may hold."""

import pytest

from service.audit.bases import (
    BASIS_FIELDS,
    SHIPPED_SOURCES,
    SHIPPED_VALUES,
    basis_problems,
    effective,
)

# The table of bases that this service ships, value by value; common practice, no source, or the
# works named beside each in the bases themselves.
EXPECTED = {
    "oxygen_deficient_pct": (19.5, 19.5, 19.5),
    "oxygen_danger_pct": (18, 18, 18),
    "oxygen_danger_kpa": (18.0, 18.0, 18.0),
    "oxygen_critical_pct": (10, 10, 10),
    "oxygen_critical_kpa": (10.13, 10.13, 10.13),
    "oxygen_enriched_pct": (23.0, 23.5, 23.0),
    "mixing_factor": (3, 3, 3),
    "instant_mixing": ("displacement",) * 3,
    "contents": ("capacity",) * 3,
    "fill_loss_fraction": (0.10, 0.10, 0.10),
    "evaporation_factor": (2, 2, 2),
    "sustained_h": (96, 72, 72),
    "restore_s": (3600, 3600, 3600),
    "react_s": (30, 30, 30),
    "walk_m_s": (1, 1, 1),
    "over_pressure_pa": (100, 100, 100),
    "door_force_n": (100, 133, 100),
    "net_volume_share": (0.8, 0.8, 0.8),
    "level_step_pct": (5, 5, 5),
    "count_every_days": (30, 30, 30),
    "reopen_days": (30, 30, 30),
    "neighbour_steps": (2, 2, 2),
    "many_vessels": (10, 10, 10),
    "never_measured_share": (0.75, 0.75, 0.75),
    "default_fill_flow_l_min": (10, 10, 10),
    "warm_fill_loss": (0.30, 0.30, 0.30),
    "helium_fill_loss": (0.20, 0.20, 0.20),
    "ice_share_per_h": (0.02, 0.02, 0.02),
    "loose_ice_share_per_h": (0.30, 0.30, 0.30),
    "inspected_pipe_share": (0.05, 0.05, 0.05),
    "oxygen_rich_marks_pct": ([25, 30],) * 3,
    "nitrous_oxide_accident_pct": (5, 5, 5),
    "lfl_shares": ([0.25, 0.5, 1],) * 3,
    "fatality_form": ("Kb",) * 3,
    "carbon_dioxide_pct": (
        {"mean_8h": 0.5, "mean_15min": 1.5, "peak": 4},
        {"mean_8h": 0.5, "mean_15min": 3, "peak": 4},
        {"mean_8h": 0.5, "mean_15min": 1.5, "peak": 4},
    ),
    "lfl_pct": (
        {"methane": 4.4, "hydrogen": 4},
        {"methane": 5, "hydrogen": 4},
        {"methane": 4.4, "hydrogen": 4},
    ),
    "natural_air_changes_per_h": (
        {"above_ground": 0.2, "below_ground": 0.1, "enclosed": 0},
        {"above_ground": 0.2, "below_ground": 0.1, "enclosed": 0},
        {"above_ground": 1.0, "below_ground": 0.4, "enclosed": 0},
    ),
    "evaporation_pct_day": (
        {
            "open-dewar": 3,
            "pressurised-dewar": 2,
            "freezer": 2.5,
            "tank": 0.5,
            "cryostat": 1.5,
            "magnet": 1.5,
        },
    )
    * 3,
}


@pytest.mark.parametrize("name", EXPECTED)
def test_shipped_bases_hold_the_values_that_are_published_with_them(name):
    found = tuple(SHIPPED_VALUES[tag][name] for tag in ("baseline", "us", "uk-eu"))
    assert found == EXPECTED[name]


def test_the_nitrous_oxide_limits_follow_from_the_eight_hour_limits():
    """NIOSH REL 25 ppm, EH40 WEL 100 ppm, and three times the second for 15 min (from memory)."""
    found = [SHIPPED_VALUES[tag]["nitrous_oxide_pct"] for tag in ("baseline", "us", "uk-eu")]
    assert [each["mean_8h"] for each in found] == [25e-4, 25e-4, 100e-4]
    assert [each["mean_15min"] for each in found] == pytest.approx([300e-4] * 3)


@pytest.mark.parametrize("tag", ["baseline", "us", "uk-eu"])
def test_every_shipped_value_is_described_sourced_and_sound(tag):
    assert set(SHIPPED_VALUES[tag]) == set(BASIS_FIELDS) == set(SHIPPED_SOURCES[tag])
    assert all(SHIPPED_SOURCES[tag].values())
    assert basis_problems(SHIPPED_VALUES[tag]) == []


def test_own_values_stand_in_for_those_of_the_basis_derived_from():
    values = effective(SHIPPED_VALUES["us"], {"mixing_factor": 5})
    assert values["mixing_factor"] == 5
    assert values["oxygen_enriched_pct"] == 23.5


@pytest.mark.parametrize(
    ("name", "value", "place"),
    [
        ("mixing_factor", 0.5, "mixing_factor"),
        ("mixing_factor", "3", "mixing_factor"),
        ("mixing_factor", True, "mixing_factor"),
        ("mixing_factor", float("nan"), "mixing_factor"),
        ("mixing_factor", None, "mixing_factor"),
        ("reopen_days", 1.5, "reopen_days"),
        ("contents", "guessed", "contents"),
        ("contents", ["capacity"], "contents"),
        ("oxygen_rich_marks_pct", [25], "oxygen_rich_marks_pct"),
        ("oxygen_rich_marks_pct", [25, 101], "oxygen_rich_marks_pct/1"),
        ("oxygen_rich_marks_pct", "25", "oxygen_rich_marks_pct"),
        ("carbon_dioxide_pct", {"mean_8h": 0.5}, "carbon_dioxide_pct"),
        ("lfl_pct", {"methane": 0, "hydrogen": 4}, "lfl_pct/methane"),
        ("severity_table", {"first": []}, "severity_table"),
        ("severity_table", [], "severity_table"),
        ("oxygen_deficient_pct", 20.95, "oxygen_deficient_pct"),
        ("oxygen_enriched_pct", 20.95, "oxygen_enriched_pct"),
        ("no_such_value", 1, "no_such_value"),
    ],
)
def test_a_value_that_cannot_be_is_named(name, value, place):
    problems = basis_problems({**SHIPPED_VALUES["baseline"], name: value})
    assert [where for where, _ in problems] == [place]


@pytest.mark.parametrize(
    ("own", "place"),
    [
        ({"oxygen_critical_pct": 18.5}, "oxygen_critical_pct"),
        ({"oxygen_danger_pct": 19.6}, "oxygen_danger_pct"),
        ({"oxygen_critical_kpa": 18.5}, "oxygen_critical_kpa"),
        ({"oxygen_enriched_pct": 26.0}, "oxygen_enriched_pct"),
        ({"oxygen_rich_marks_pct": [31.0, 30.0]}, "oxygen_rich_marks_pct/0"),
        ({"lfl_shares": [0.6, 0.5, 1.0]}, "lfl_shares/0"),
        (
            {"carbon_dioxide_pct": {"mean_8h": 2.0, "mean_15min": 1.5, "peak": 4.0}},
            "carbon_dioxide_pct/mean_8h",
        ),
    ],
)
def test_values_that_stand_against_each_other_are_named(own, place):
    problems = basis_problems(effective(SHIPPED_VALUES["baseline"], own))
    assert [where for where, _ in problems] == [place]


def test_a_severity_table_in_which_a_safeguard_makes_worse_is_refused():
    table = {
        **SHIPPED_VALUES["baseline"]["severity_table"],
        "first": ["observation", "minor", "minor"],
    }
    problems = basis_problems({"severity_table": table})
    assert "severity_table/first/1" in [where for where, _ in problems]


def test_a_severity_table_in_which_a_worse_mark_is_milder_is_refused():
    table = {**SHIPPED_VALUES["baseline"]["severity_table"], "third": ["minor", "minor", "minor"]}
    problems = basis_problems({"severity_table": table})
    assert [where for where, _ in problems] == ["severity_table/second/0"]


def test_orders_are_asked_only_of_values_that_are_there():
    assert basis_problems({"oxygen_critical_pct": 18.5}) == []
