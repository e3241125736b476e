"""Which table holds which kind of record."""

from collections.abc import Mapping
from typing import Final, cast

from sqlalchemy import Table

from service.store.tables.access import Answer, Installation, Key
from service.store.tables.bases import Basis
from service.store.tables.controls import Control
from service.store.tables.detectors import Detector
from service.store.tables.fluids import Fluid
from service.store.tables.history import (
    AssessmentVersion,
    Change,
    Event,
    Finding,
    FindingVersion,
    Head,
    RecordVersion,
    RoomState,
)
from service.store.tables.openings import Opening
from service.store.tables.rooms import Room
from service.store.tables.row import Base
from service.store.tables.sites import Site
from service.store.tables.supply_lines import SupplyLine, SupplyLineRoom
from service.store.tables.ventilation_units import VentilationUnit, VentilationUnitRoom
from service.store.tables.vessels import Vessel

METADATA: Final = Base.metadata


def _table(entity: type[Base]) -> Table:
    return cast(Table, entity.__table__)


# What is referred to comes before what refers to it, but for a site and its own bases.
TABLES: Final[Mapping[str, Table]] = {
    "basis": _table(Basis),
    "fluid": _table(Fluid),
    "site": _table(Site),
    "room": _table(Room),
    "opening": _table(Opening),
    "detector": _table(Detector),
    "ventilation-unit": _table(VentilationUnit),
    "vessel": _table(Vessel),
    "supply-line": _table(SupplyLine),
    "control": _table(Control),
}
KINDS: Final = tuple(TABLES)

VENTILATION_UNIT_ROOM: Final = _table(VentilationUnitRoom)
SUPPLY_LINE_ROOM: Final = _table(SupplyLineRoom)
HEAD: Final = _table(Head)
CHANGE: Final = _table(Change)
RECORD_VERSION: Final = _table(RecordVersion)
ASSESSMENT_VERSION: Final = _table(AssessmentVersion)
ROOM_STATE: Final = _table(RoomState)
FINDING: Final = _table(Finding)
FINDING_VERSION: Final = _table(FindingVersion)
EVENT: Final = _table(Event)
KEY: Final = _table(Key)
ANSWER: Final = _table(Answer)
INSTALLATION: Final = _table(Installation)
