"""The table of rooms."""

from sqlalchemy import CheckConstraint, ForeignKey
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    Json,
    RecordId,
    Row,
    above_zero,
    between,
    not_negative,
    one_of,
    record_table,
)

KINDS = ("room", "corridor", "walk-in", "pit", "lift", "vehicle")
STATES = ("planned", "in-service", "out-of-service")


class Room(Row):
    """A room, or another space that people enter."""

    __tablename__ = "room"
    __table_args__ = record_table(
        one_of("kind", KINDS),
        one_of("state", STATES),
        *above_zero("floor_area_m2", "height_m", "floor_rating_kpa"),
        CheckConstraint("volume_m3 > 0", name="volume_above_zero"),
        between("occupied_fraction", 0, 0.95),
        between("temperature_c", -200, 60),
        *not_negative("purge_flow_m3_h", "egress_m", "leakage_area_m2", "relief_opening_m2"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    kind: Mapped[str]
    state: Mapped[str]
    building: Mapped[str | None]
    floor: Mapped[str | None]
    floor_area_m2: Mapped[float | None]
    height_m: Mapped[float | None]
    volume_m3: Mapped[float]
    volume_derived: Mapped[bool]
    occupied_fraction: Mapped[float | None]
    temperature_c: Mapped[float | None]
    below_ground: Mapped[bool | None]
    purge_flow_m3_h: Mapped[float | None]
    purge_fluid_id: Mapped[RecordId | None] = mapped_column(ForeignKey("fluid.id"), index=True)
    purge_fluid: Mapped[str | None]
    people: Mapped[Json | None]
    unaccompanied: Mapped[bool | None]
    egress_m: Mapped[float | None]
    contact: Mapped[str | None]
    pit: Mapped[Json | None]
    door: Mapped[Json | None]
    leakage_area_m2: Mapped[float | None]
    relief_opening_m2: Mapped[float | None]
    floor_rating_kpa: Mapped[float | None]
