"""Rules on gases that poison before they suffocate."""

from typing import Final

from service.audit.columns import CARBON_DIOXIDE, NITROUS_OXIDE
from service.audit.hazards import TOXIC
from service.audit.rules.case_rules import case_rules

_CARBON_DIOXIDE: Final = (
    "OSHA PEL and EH40 WEL for 8 h, EH40 WEL or NIOSH STEL for 15 min, NIOSH IDLH (from memory)"
)
_NITROUS_OXIDE: Final = (
    "NIOSH REL or EH40 WEL for 8 h, three times the WEL for 15 min (from memory); accidents: "
    "common practice, no source"
)

RULES: Final = (
    *case_rules("toxic", TOXIC, CARBON_DIOXIDE, _CARBON_DIOXIDE),
    *case_rules("toxic", TOXIC, NITROUS_OXIDE, _NITROUS_OXIDE),
)
