"""The table of openings."""

from sqlalchemy import CheckConstraint, ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    RecordId,
    Row,
    above_zero,
    not_negative,
    one_of,
    record_table,
)

KINDS = ("door", "hatch", "window", "grille", "curtain", "gap")


class Opening(Row):
    """An opening between two rooms; one without the other room leads outdoors."""

    __tablename__ = "opening"
    __table_args__ = record_table(
        ForeignKeyConstraint(["site_id", "room_id"], ["room.site_id", "room.id"]),
        ForeignKeyConstraint(["site_id", "other_room_id"], ["room.site_id", "room.id"]),
        one_of("kind", KINDS),
        CheckConstraint("other_room_id <> room_id", name="two_rooms"),
        *above_zero("width_m", "height_m", "area_m2"),
        *not_negative("exchange_flow_m3_h"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    room_id: Mapped[RecordId] = mapped_column(index=True)
    other_room_id: Mapped[RecordId | None] = mapped_column(index=True)
    kind: Mapped[str]
    width_m: Mapped[float | None]
    height_m: Mapped[float | None]
    area_m2: Mapped[float | None]
    exchange_flow_m3_h: Mapped[float | None]
    net_flow_m3_h: Mapped[float | None]
    normally_open: Mapped[bool | None]
