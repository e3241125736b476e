"""Rules on too little oxygen."""

from typing import Final

from service.audit.hazards import OXYGEN_LOW
from service.audit.releases import BOIL_OFF, LARGEST_VESSEL
from service.audit.rules.case_rules import CaseRule

_SOURCE: Final = (
    "29 CFR 1910.146 and European gas-industry guidance (from memory); partial pressure by "
    "laboratory manuals (from memory)"
)

RULES: Final = (
    CaseRule(
        slug="oxygen/largest-vessel",
        release=LARGEST_VESSEL,
        hazard=OXYGEN_LOW,
        method="mixing/displacement",
        source=_SOURCE,
    ),
    CaseRule(
        slug="oxygen/boil-off",
        release=BOIL_OFF,
        hazard=OXYGEN_LOW,
        method="ventilation/piecewise-constant",
        source=_SOURCE,
    ),
)
