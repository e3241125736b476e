"""The kinds of records that have paths: a row each, with their schemas and their words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import UnionType
from typing import Annotated, Any, Final, Literal, Union, get_args, get_origin

from service.api.fields import Patch
from service.api.schemas.bases import BasisCreate, BasisPatch, BasisRead, BasisWritten
from service.api.schemas.controls import (
    ControlCreate,
    ControlPatch,
    ControlRead,
    ControlWritten,
)
from service.api.schemas.detectors import (
    DetectorCreate,
    DetectorPatch,
    DetectorRead,
    DetectorWritten,
)
from service.api.schemas.fluids import FluidCreate, FluidPatch, FluidRead, FluidWritten
from service.api.schemas.openings import (
    OpeningCreate,
    OpeningPatch,
    OpeningRead,
    OpeningWritten,
)
from service.api.schemas.record import AnyRecordRead, RecordCreate
from service.api.schemas.rooms import RoomCreate, RoomPatch, RoomRead, RoomWritten
from service.api.schemas.sites import SiteCreate, SitePatch, SiteRead, SiteWritten
from service.api.schemas.supply_lines import (
    SupplyLineCreate,
    SupplyLinePatch,
    SupplyLineRead,
    SupplyLineWritten,
)
from service.api.schemas.ventilation_units import (
    VentilationUnitCreate,
    VentilationUnitPatch,
    VentilationUnitRead,
    VentilationUnitWritten,
)
from service.api.schemas.vessels import VesselCreate, VesselPatch, VesselRead, VesselWritten


@dataclass(frozen=True, slots=True)
class Filter:
    """A field that a list is filtered by: what it holds, and the words it knows."""

    text: str
    words: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Resource:
    """One kind of record as the API shows it."""

    kind: str
    path: str
    one: str
    many: str
    create: type[RecordCreate]
    patch: type[Patch]
    read: type[AnyRecordRead]
    written: type[AnyRecordRead]

    @property
    def words(self) -> str:
        """Write the kind in a sentence."""
        return self.kind.replace("-", " ")

    @property
    def filters(self) -> Mapping[str, Filter]:
        """Name the fields that a list can be filtered by."""
        return {
            name: asked
            for name, field in self.read.model_fields.items()
            if name not in _NO_FILTERS and (asked := _filter_of(field.annotation))
        }

    @property
    def sorts(self) -> frozenset[str]:
        """Name the fields that a list can be sorted by."""
        return frozenset(
            name
            for name, field in self.read.model_fields.items()
            if _filter_of(field.annotation) or _is_number(field.annotation)
        )


_NO_FILTERS: Final = frozenset({"id", "notes", "created_at", "updated_at", "counted_at"})


def _kinds(annotation: Any) -> tuple[Any, ...]:
    """Take a type apart: what is in its union, without null and without marks."""
    if get_origin(annotation) is Annotated:
        return _kinds(get_args(annotation)[0])
    if get_origin(annotation) in (Union, UnionType):
        return tuple(kind for choice in get_args(annotation) for kind in _kinds(choice))
    return () if annotation is type(None) else (annotation,)


def _filter_of(annotation: Any) -> Filter | None:
    """Say how a field is asked for; none: it cannot be equalled."""
    kinds = _kinds(annotation)
    if len(kinds) != 1:
        return None
    if get_origin(kinds[0]) is Literal:
        return Filter(f"One of {', '.join(get_args(kinds[0]))}.", get_args(kinds[0]))
    if kinds[0] is bool:
        return Filter("true or false.", ("true", "false"))
    return Filter("A text.") if kinds[0] is str else None


def _is_number(annotation: Any) -> bool:
    return _kinds(annotation) in ((float,), (int,))


RESOURCES: Final[Mapping[str, Resource]] = {
    resource.kind: resource
    for resource in (
        Resource("site", "sites", "Site", "Sites", SiteCreate, SitePatch, SiteRead, SiteWritten),
        Resource("room", "rooms", "Room", "Rooms", RoomCreate, RoomPatch, RoomRead, RoomWritten),
        Resource(
            "opening", "openings", "Opening", "Openings",
            OpeningCreate, OpeningPatch, OpeningRead, OpeningWritten,
        ),
        Resource(
            "ventilation-unit",
            "ventilation-units",
            "VentilationUnit",
            "VentilationUnits",
            VentilationUnitCreate,
            VentilationUnitPatch,
            VentilationUnitRead,
            VentilationUnitWritten,
        ),
        Resource(
            "vessel", "vessels", "Vessel", "Vessels",
            VesselCreate, VesselPatch, VesselRead, VesselWritten,
        ),
        Resource(
            "supply-line", "supply-lines", "SupplyLine", "SupplyLines",
            SupplyLineCreate, SupplyLinePatch, SupplyLineRead, SupplyLineWritten,
        ),
        Resource(
            "detector", "detectors", "Detector", "Detectors",
            DetectorCreate, DetectorPatch, DetectorRead, DetectorWritten,
        ),
        Resource(
            "control", "controls", "Control", "Controls",
            ControlCreate, ControlPatch, ControlRead, ControlWritten,
        ),
        Resource(
            "basis", "bases", "Basis", "Bases", BasisCreate, BasisPatch, BasisRead, BasisWritten
        ),
        Resource(
            "fluid", "fluids", "Fluid", "Fluids", FluidCreate, FluidPatch, FluidRead, FluidWritten
        ),
    )
}  # fmt: skip
