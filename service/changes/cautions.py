"""The cautions that every answer for people carries; they stand here and nowhere else."""

from typing import Final

CAUTIONS: Final = (
    "The figures are screening calculations by published methods under stated assumptions; they "
    "judge records, not the air. They do not replace local codes, the manufacturer's instructions, "
    "or review by a competent, licensed person. Oxygen can be lower locally than the mixed figure. "
    "No calculation makes it safe to enter a room in alarm. Hydrogen and LNG indoors need their "
    "own hazard study."
)
