"""The table of detectors."""

from datetime import datetime

from sqlalchemy import ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    Json,
    RecordId,
    Row,
    a_day,
    above_zero,
    not_negative,
    one_of,
    record_table,
)

PLACES = ("inside", "entrance")
STATES = ("in-service", "fault", "off")


class Detector(Row):
    """A gas detector."""

    __tablename__ = "detector"
    __table_args__ = record_table(
        ForeignKeyConstraint(["site_id", "room_id"], ["room.site_id", "room.id"]),
        one_of("placed", PLACES),
        one_of("state", STATES),
        *not_negative("height_m", "t90_s", "delay_s"),
        *above_zero("calibrate_every_days", "zeroed_at_kpa_abs"),
        *a_day("calibrated_on"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    room_id: Mapped[RecordId] = mapped_column(index=True)
    gas: Mapped[str]
    height_m: Mapped[float | None]
    placed: Mapped[str | None]
    t90_s: Mapped[float | None]
    delay_s: Mapped[float | None]
    alarms_pct: Mapped[Json | None]
    calibrated_on: Mapped[str | None]
    calibrate_every_days: Mapped[int | None]
    state: Mapped[str]
    silenced_since: Mapped[datetime | None]
    heard_outside: Mapped[bool | None]
    display_outside: Mapped[bool | None]
    power_backed: Mapped[bool | None]
    monitored: Mapped[bool | None]
    zeroed_at_kpa_abs: Mapped[float | None]
    outages: Mapped[Json | None]
