"""What an assumption is: the field that nobody recorded, and what is taken in its place."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

from service.audit.cases import CaseTable
from service.audit.columns import Columns
from service.physics.arrays import Floats, Mask

Values: TypeAlias = Floats | str | bool
Missing: TypeAlias = Callable[[CaseTable], Mask]
Taken: TypeAlias = Callable[[CaseTable], Values]
Bound: TypeAlias = Callable[[Columns, Mask], Columns]  # of the rooms in the mask


@dataclass(frozen=True, slots=True)
class Assumption:
    """A field that may be missing, and what is done about it."""

    record: str  # kind of the record: room, site, vessel, ventilation-unit, detector
    field: str
    missing: Missing
    value: Taken  # by row of the record's table, in the unit of the field's name
    reason: str
    source: str  # a value of the basis, or where it comes from
    matters: bool
    mildest: Bound | None  # None: what is taken is already the mildest, or moves no mark
