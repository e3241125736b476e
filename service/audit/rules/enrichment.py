"""Rules on too much oxygen."""

from typing import Final

from service.audit.hazards import OXYGEN_HIGH
from service.audit.releases import SPILL
from service.audit.rules.case_rules import case_rules

_SOURCE: Final = (
    "29 CFR 1910.146 and European gas-industry guidance (from memory); 25 and 30 %: common "
    "practice, no source"
)

# No ice is richer in oxygen than air.
RULES: Final = tuple(
    rule
    for rule in case_rules("enrichment", OXYGEN_HIGH, "oxygen", _SOURCE)
    if rule.release != SPILL
)
