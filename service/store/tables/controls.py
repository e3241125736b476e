"""The table of controls."""

from sqlalchemy import CheckConstraint, ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    RecordId,
    Row,
    a_day,
    above_zero,
    one_of,
    record_table,
)

KINDS = (
    "signage",
    "procedure",
    "training",
    "personal-monitor",
    "alarm-response",
    "rescue",
    "lone-working",
    "protective-equipment",
    "access",
    "delivery-route",
    "bund",
)


class Control(Row):
    """An administrative measure of a room, or of a vessel."""

    __tablename__ = "control"
    __table_args__ = record_table(
        ForeignKeyConstraint(["site_id", "room_id"], ["room.site_id", "room.id"]),
        ForeignKeyConstraint(["site_id", "vessel_id"], ["vessel.site_id", "vessel.id"]),
        one_of("kind", KINDS),
        CheckConstraint("(room_id IS NULL) <> (vessel_id IS NULL)", name="one_subject"),
        CheckConstraint("(kind = 'bund') = (area_m2 IS NOT NULL)", name="area_of_a_bund"),
        *above_zero("area_m2", "check_every_days"),
        *a_day("checked_on"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    room_id: Mapped[RecordId | None] = mapped_column(index=True)
    vessel_id: Mapped[RecordId | None] = mapped_column(index=True)
    kind: Mapped[str]
    reference: Mapped[str | None]
    area_m2: Mapped[float | None]
    checked_on: Mapped[str | None]
    check_every_days: Mapped[int | None]
