"""The table of supply lines."""

from sqlalchemy import ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    Base,
    Json,
    RecordId,
    Row,
    above_zero,
    one_of,
    record_table,
)
from service.store.tables.vessels import INSULATIONS

PHASES = ("liquid", "gas")
TRIGGERS = ("high-level", "excess-flow", "manual")
"""What closes a shut-off where it is no detector."""


class SupplyLine(Row):
    """A line that brings liquid or gas into rooms."""

    __tablename__ = "supply_line"
    __table_args__ = record_table(
        ForeignKeyConstraint(["site_id", "source_vessel_id"], ["vessel.site_id", "vessel.id"]),
        ForeignKeyConstraint(
            ["site_id", "trigger_detector_id"], ["detector.site_id", "detector.id"]
        ),
        one_of("phase", PHASES),
        one_of("insulation", INSULATIONS),
        *above_zero("bore_mm", "length_m", "source_pressure_kpa", "restrictor_kg_h"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    source_vessel_id: Mapped[RecordId | None] = mapped_column(index=True)
    fluid_id: Mapped[RecordId] = mapped_column(ForeignKey("fluid.id"), index=True)
    fluid: Mapped[str]
    phase: Mapped[str]
    rooms: Mapped[Json]
    bore_mm: Mapped[float | None]
    length_m: Mapped[float | None]
    source_pressure_kpa: Mapped[float | None]
    restrictor_kg_h: Mapped[float | None]
    shutoff: Mapped[Json | None]
    # The detector that `shutoff` names, in a form that can be joined and is kept from going.
    trigger_detector_id: Mapped[RecordId | None] = mapped_column(index=True)
    insulation: Mapped[str | None]
    segments: Mapped[Json | None]


class SupplyLineRoom(Base):
    """A room that a line runs through: what ``rooms`` says, in a form that can be joined."""

    __tablename__ = "supply_line_room"
    __table_args__ = (
        ForeignKeyConstraint(
            ["site_id", "line_id"],
            ["supply_line.site_id", "supply_line.id"],
            ondelete="CASCADE",
        ),
        ForeignKeyConstraint(["site_id", "room_id"], ["room.site_id", "room.id"]),
        {"sqlite_strict": True},
    )

    site_id: Mapped[RecordId]
    line_id: Mapped[RecordId] = mapped_column(primary_key=True)
    room_id: Mapped[RecordId] = mapped_column(primary_key=True, index=True)
