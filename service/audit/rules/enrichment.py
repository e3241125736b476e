"""Rules on too much oxygen."""

from typing import Final

from service.audit.hazards import OXYGEN_HIGH
from service.audit.rules.case_rules import case_rules

_SOURCE: Final = (
    "29 CFR 1910.146 and European gas-industry guidance (from memory); 25 and 30 %: common "
    "practice, no source"
)

RULES: Final = case_rules("enrichment", OXYGEN_HIGH, "oxygen", _SOURCE)
