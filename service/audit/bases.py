"""The three shipped bases: every value a room is judged by, with its source (judging 7)."""

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any, Final

from service.audit.basis_fields import BASIS_FIELDS, BasisField, basis_problems

__all__ = [
    "BASIS_FIELDS",
    "COMMON_PRACTICE",
    "SHIPPED_SOURCES",
    "SHIPPED_VALUES",
    "BasisField",
    "basis_problems",
    "effective",
]

COMMON_PRACTICE: Final = "common practice, no source"

_OSHA_SPACES: Final = "29 CFR 1910.146, European gas-industry guidance (from memory)"
_LABORATORY: Final = "oxygen-deficiency limit of laboratory manuals, 135 mmHg (from memory)"
_PHYSIOLOGY: Final = (
    "physiological tables of laboratory manuals and gas-industry guidance (from memory)"
)
_GAS_INDUSTRY: Final = "gas-industry guidance (from memory)"

_BASELINE: Final[Mapping[str, tuple[Any, str]]] = {
    "oxygen_deficient_pct": (19.5, _OSHA_SPACES),
    "oxygen_danger_pct": (18.0, _LABORATORY),
    "oxygen_danger_kpa": (18.0, _LABORATORY),
    "oxygen_critical_pct": (10.0, _PHYSIOLOGY),
    "oxygen_critical_kpa": (10.13, _PHYSIOLOGY),
    "oxygen_enriched_pct": (23.0, "lower figure of European gas-industry guidance (from memory)"),
    "oxygen_rich_marks_pct": ([25.0, 30.0], COMMON_PRACTICE),
    "carbon_dioxide_pct": (
        {"mean_8h": 0.5, "mean_15min": 1.5, "peak": 4.0},
        "OSHA PEL and EH40 WEL for 8 h, EH40 WEL for 15 min, NIOSH IDLH (from memory)",
    ),
    "nitrous_oxide_pct": (
        {"mean_8h": 0.0025, "mean_15min": 0.03},
        "NIOSH REL for 8 h; three times the EH40 WEL for 15 min (from memory)",
    ),
    "nitrous_oxide_accident_pct": (5.0, COMMON_PRACTICE),
    "lfl_pct": ({"methane": 4.4, "hydrogen": 4.0}, "IEC 60079-20-1 (from memory)"),
    "lfl_shares": (
        [0.25, 0.5, 1.0],
        "a quarter of LFL by NFPA practice (from memory); the rest: " + COMMON_PRACTICE,
    ),
    "mixing_factor": (3.0, "ACGIH Industrial Ventilation, range 1 to 10 (from memory)"),
    "natural_air_changes_per_h": (
        {"above_ground": 0.2, "below_ground": 0.1, "enclosed": 0.0},
        COMMON_PRACTICE,
    ),
    "instant_mixing": ("displacement", "gas-industry guidance, form C1 (from memory)"),
    "contents": ("capacity", COMMON_PRACTICE),
    "fill_loss_fraction": (0.10, _GAS_INDUSTRY),
    "evaporation_factor": (2.0, COMMON_PRACTICE),
    "evaporation_pct_day": (
        {
            "open-dewar": 3.0,
            "pressurised-dewar": 2.0,
            "freezer": 2.5,
            "tank": 0.5,
            "cryostat": 1.5,
            "magnet": 1.5,
        },
        "ranges of open catalogues by class of vessel (from memory)",
    ),
    "sustained_h": (96.0, "a closure of four days; " + COMMON_PRACTICE),
    "restore_s": (3600.0, COMMON_PRACTICE),
    "react_s": (30.0, COMMON_PRACTICE),
    "walk_m_s": (1.0, COMMON_PRACTICE),
    "over_pressure_pa": (100.0, "light partition walls (from memory)"),
    "door_force_n": (100.0, "EN 12101-6 (from memory)"),
    "net_volume_share": (0.8, COMMON_PRACTICE),
    "level_step_pct": (5.0, COMMON_PRACTICE),
    "count_every_days": (30.0, COMMON_PRACTICE),
    "reopen_days": (30.0, COMMON_PRACTICE),
    "neighbour_steps": (2.0, COMMON_PRACTICE),
    "many_vessels": (10.0, COMMON_PRACTICE),
    "never_measured_share": (0.75, COMMON_PRACTICE),
    "default_fill_flow_l_min": (10.0, COMMON_PRACTICE),
    "warm_fill_loss": (0.30, _GAS_INDUSTRY),
    "helium_fill_loss": (0.20, _GAS_INDUSTRY),
    "ice_share_per_h": (0.02, "small packages of dry ice (from memory)"),
    "loose_ice_share_per_h": (0.30, COMMON_PRACTICE),
    "inspected_pipe_share": (0.05, COMMON_PRACTICE),
    "severity_table": (
        {
            "first": ["minor", "observation", "observation"],
            "second": ["major", "minor", "observation"],
            "third": ["critical", "major", "minor"],
        },
        COMMON_PRACTICE,
    ),
    "fatality_form": (
        "Kb",
        "highest of the printed forms; laboratory manuals (from memory)",
    ),
}

_US: Final[Mapping[str, tuple[Any, str]]] = {
    "oxygen_deficient_pct": (19.5, "29 CFR 1910.146"),
    "oxygen_enriched_pct": (23.5, "29 CFR 1910.146"),
    "carbon_dioxide_pct": (
        {"mean_8h": 0.5, "mean_15min": 3.0, "peak": 4.0},
        "OSHA PEL for 8 h, NIOSH STEL for 15 min, NIOSH IDLH (from memory)",
    ),
    "lfl_pct": ({"methane": 5.0, "hydrogen": 4.0}, "NFPA (from memory)"),
    "sustained_h": (72.0, "a long weekend; " + COMMON_PRACTICE),
    "door_force_n": (133.0, "NFPA 101 (from memory)"),
}

_UK_EU: Final[Mapping[str, tuple[Any, str]]] = {
    "nitrous_oxide_pct": (
        {"mean_8h": 0.01, "mean_15min": 0.03},
        "EH40 WEL for 8 h; three times that for 15 min (from memory)",
    ),
    "natural_air_changes_per_h": (
        {"above_ground": 1.0, "below_ground": 0.4, "enclosed": 0.0},
        COMMON_PRACTICE,
    ),
    "sustained_h": (72.0, "a long weekend; " + COMMON_PRACTICE),
}

_DIFFERENCES: Final[Mapping[str, Mapping[str, tuple[Any, str]]]] = {
    "baseline": {},
    "us": _US,
    "uk-eu": _UK_EU,
}

SHIPPED_VALUES: Final[Mapping[str, Mapping[str, Any]]] = MappingProxyType(
    {
        tag: MappingProxyType({name: value for name, (value, _) in {**_BASELINE, **own}.items()})
        for tag, own in _DIFFERENCES.items()
    }
)
SHIPPED_SOURCES: Final[Mapping[str, Mapping[str, str]]] = MappingProxyType(
    {
        tag: MappingProxyType({name: source for name, (_, source) in {**_BASELINE, **own}.items()})
        for tag, own in _DIFFERENCES.items()
    }
)


def effective(derived: Mapping[str, Any], own: Mapping[str, Any]) -> Mapping[str, Any]:
    """Return the values of the basis derived from, with a basis's own values in their place."""
    return MappingProxyType({**derived, **own})
