"""Every rule, in the order in which an auditor would read them."""

from typing import Final

from service.audit.rules import (
    controls,
    detectors,
    enrichment,
    flammable,
    layering,
    magnets,
    neighbours,
    oxygen,
    records,
    supply_lines,
    toxic,
    ventilation,
    vessels,
)
from service.audit.rules.rule import Rule

# A slug is public and never reused.
RULES: Final[tuple[Rule, ...]] = (
    *oxygen.RULES,
    *enrichment.RULES,
    *toxic.RULES,
    *flammable.RULES,
    *neighbours.RULES,
    *layering.RULES,
    *ventilation.RULES,
    *detectors.RULES,
    *vessels.RULES,
    *magnets.RULES,
    *supply_lines.RULES,
    *controls.RULES,
    *records.RULES,
)
