"""Rules on gases that burn."""

from typing import Final

from service.audit.hazards import FLAMMABLE, FLAMMABLE_GAS
from service.audit.rules.case_rules import case_rules

_SOURCE: Final = (
    "lower limits of IEC 60079-20-1 or NFPA, a quarter of them by NFPA practice (from memory); the "
    "rule of Le Chatelier for several; half and the whole: common practice, no source"
)

RULES: Final = case_rules("flammable", FLAMMABLE, FLAMMABLE_GAS, _SOURCE)
