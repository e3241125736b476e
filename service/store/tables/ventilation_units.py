"""The tables of ventilation units and of the rooms that they serve."""

from sqlalchemy import CheckConstraint, ForeignKey, ForeignKeyConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    Base,
    Json,
    RecordId,
    Row,
    a_day,
    above_zero,
    between,
    not_negative,
    one_of,
    record_table,
)

ARRANGEMENTS = ("supply", "exhaust", "balanced")
STATES = ("running", "stopped", "failed")
TERMINAL_HEIGHTS = ("low", "high")
MANUAL = "manual"
"""What a boost is triggered by where it is no detector."""


class VentilationUnit(Row):
    """A fan or air handling unit."""

    __tablename__ = "ventilation_unit"
    __table_args__ = record_table(
        ForeignKeyConstraint(
            ["site_id", "boost_detector_id"],
            ["detector.site_id", "detector.id"],
        ),
        one_of("arrangement", ARRANGEMENTS),
        one_of("state", STATES),
        one_of("terminal_height", TERMINAL_HEIGHTS),
        *not_negative("design_flow_m3_h", "measured_flow_m3_h", "boost_flow_m3_h"),
        CheckConstraint(
            "coalesce(boost_trigger, 'manual') = coalesce(boost_detector_id, 'manual')",
            name="boost_trigger_manual_or_detector",
        ),
        *above_zero("measure_every_days"),
        between("outdoor_air_fraction", 0, 1),
        between("mixing_factor", 1, 10),
        *a_day("measured_on", "mixing_tested_on"),
    )

    site_id: Mapped[RecordId] = mapped_column(ForeignKey("site.id"))
    arrangement: Mapped[str | None]
    design_flow_m3_h: Mapped[float | None]
    measured_flow_m3_h: Mapped[float | None]
    measured_on: Mapped[str | None]
    measure_every_days: Mapped[int | None]
    outdoor_air_fraction: Mapped[float | None]
    mixing_factor: Mapped[float | None]
    mixing_tested_on: Mapped[str | None]
    state: Mapped[str]
    standby_power: Mapped[bool | None]
    flow_proved: Mapped[bool | None]
    fail_alarm: Mapped[bool | None]
    serves: Mapped[Json]
    outages: Mapped[Json | None]
    boost_flow_m3_h: Mapped[float | None]
    boost_trigger: Mapped[str | None]
    # The detector that `boost_trigger` names, in a form that can be joined and is kept from going.
    boost_detector_id: Mapped[RecordId | None] = mapped_column(index=True)
    terminal_height: Mapped[str | None]


class VentilationUnitRoom(Base):
    """A room that a unit serves: what ``serves`` says, in a form that can be joined."""

    __tablename__ = "ventilation_unit_room"
    __table_args__ = (
        ForeignKeyConstraint(
            ["site_id", "unit_id"],
            ["ventilation_unit.site_id", "ventilation_unit.id"],
            ondelete="CASCADE",
        ),
        ForeignKeyConstraint(["site_id", "room_id"], ["room.site_id", "room.id"]),
        CheckConstraint("share >= 0 AND share <= 1", name="share_in_range"),
        {"sqlite_strict": True},
    )

    site_id: Mapped[RecordId]
    unit_id: Mapped[RecordId] = mapped_column(primary_key=True)
    room_id: Mapped[RecordId] = mapped_column(primary_key=True, index=True)
    share: Mapped[float]
