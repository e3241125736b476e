"""Rules on too much oxygen."""

from typing import Final

from service.audit.hazards import OXYGEN_HIGH
from service.audit.releases import BOIL_OFF, LARGEST_VESSEL
from service.audit.rules.case_rules import CaseRule

_SOURCE: Final = (
    "29 CFR 1910.146 and European gas-industry guidance (from memory); 25 and 30 %: common "
    "practice, no source"
)

RULES: Final = (
    CaseRule(
        slug="enrichment/largest-vessel",
        release=LARGEST_VESSEL,
        hazard=OXYGEN_HIGH,
        method="mixing/displacement",
        source=_SOURCE,
    ),
    CaseRule(
        slug="enrichment/boil-off",
        release=BOIL_OFF,
        hazard=OXYGEN_HIGH,
        method="ventilation/piecewise-constant",
        source=_SOURCE,
    ),
)
