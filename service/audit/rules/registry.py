"""Every rule, in the order in which an auditor would read them."""

from typing import Final

from service.audit.rules import detectors, enrichment, flammable, oxygen, records, toxic
from service.audit.rules.rule import Rule

# A slug is public and never reused.
RULES: Final[tuple[Rule, ...]] = (
    *oxygen.RULES,
    *enrichment.RULES,
    *toxic.RULES,
    *flammable.RULES,
    *detectors.RULES,
    *records.RULES,
)
