"""The table of vessels."""

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    Json,
    RecordId,
    Row,
    above_zero,
    not_negative,
    one_of,
    record_table,
)

KINDS = (
    "open-dewar",
    "pressurised-dewar",
    "freezer",
    "tank",
    "cryostat",
    "magnet",
    "dry-ice-box",
    "cylinder",
)
INSULATIONS = ("vacuum-multilayer", "vacuum-powder", "foam", "none")
VENTS = ("room", "outdoors")
STATES = ("in-service", "empty", "withdrawn")
NECK_PLUGS = ("vented", "sealed")


class Vessel(Row):
    """A vessel of cryogenic liquid, gas or ice; one without a room stands outdoors."""

    __tablename__ = "vessel"
    __table_args__ = record_table(
        ForeignKeyConstraint(["site_id", "room_id"], ["room.site_id", "room.id"]),
        one_of("kind", KINDS),
        one_of("insulation", INSULATIONS),
        one_of("vent_to", VENTS),
        one_of("state", STATES),
        one_of("neck_plug", NECK_PLUGS),
        *above_zero(
            "capacity_l",
            "capacity_kg",
            "gross_l",
            "tare_kg",
            "footprint_m2",
            "withdrawal_bore_mm",
        ),
        CheckConstraint("(capacity_l IS NULL) <> (capacity_kg IS NULL)", name="one_capacity"),
        CheckConstraint("contents_l IS NULL OR capacity_l IS NOT NULL", name="contents_l_fits"),
        CheckConstraint("contents_kg IS NULL OR capacity_kg IS NOT NULL", name="contents_kg_fits"),
        *not_negative(
            "contents_l",
            "contents_kg",
            "rated_evaporation_l_day",
            "measured_evaporation_l_day",
            "measured_loss_kg_day",
            "use_l_day",
            "cold_area_m2",
        ),
        CheckConstraint("working_pressure_kpa > -101.325", name="working_pressure_above_vacuum"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    room_id: Mapped[RecordId | None] = mapped_column(index=True)
    fluid_id: Mapped[RecordId] = mapped_column(ForeignKey("fluid.id"), index=True)
    fluid: Mapped[str]
    kind: Mapped[str]
    capacity_l: Mapped[float | None]
    capacity_kg: Mapped[float | None]
    gross_l: Mapped[float | None]
    contents_l: Mapped[float | None]
    contents_kg: Mapped[float | None]
    counted_at: Mapped[datetime | None]
    rated_evaporation_l_day: Mapped[float | None]
    measured_evaporation_l_day: Mapped[float | None]
    measured_loss_kg_day: Mapped[float | None]
    use_l_day: Mapped[float | None]
    insulation: Mapped[str | None]
    vent_to: Mapped[str | None]
    filling: Mapped[Json | None]
    manifold: Mapped[str | None]
    mobile: Mapped[bool | None]
    state: Mapped[str]
    tare_kg: Mapped[float | None]
    footprint_m2: Mapped[float | None]
    cold_area_m2: Mapped[float | None]
    working_pressure_kpa: Mapped[float | None]
    withdrawal_bore_mm: Mapped[float | None]
    neck_plug: Mapped[str | None]
    relief: Mapped[Json | None]
    quench: Mapped[Json | None]
    # The line that `filling` names, in a form that can be joined. Lines name their source vessel in
    # a foreign key; one back would make a circle, so that the line is kept from going by a search.
    filling_line_id: Mapped[RecordId | None] = mapped_column(index=True)
