"""Rules on too little oxygen."""

from typing import Final

from service.audit.hazards import OXYGEN_LOW
from service.audit.rules.case_rules import case_rules

_SOURCE: Final = (
    "29 CFR 1910.146 and European gas-industry guidance (from memory); partial pressure by "
    "laboratory manuals (from memory)"
)

RULES: Final = case_rules("oxygen", OXYGEN_LOW, "oxygen", _SOURCE)
