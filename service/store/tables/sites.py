"""The table of sites."""

from sqlalchemy import CheckConstraint, ForeignKey, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import RecordId, Row, above_zero


class Site(Row):
    """A site; its own id stands as its site, so that all tables can be read alike."""

    __tablename__ = "site"
    __table_args__ = (
        UniqueConstraint("tag_folded"),
        UniqueConstraint("external_id"),
        CheckConstraint("site_id = id", name="its_own_site"),
        CheckConstraint("revision >= 1", name="revision_from_one"),
        *above_zero("station_pressure_kpa_abs"),
        {"sqlite_strict": True},
    )

    site_id: Mapped[RecordId]
    elevation_m: Mapped[float | None]
    station_pressure_kpa_abs: Mapped[float | None]
    # A site and its own basis name each other, so one of the two keys is added afterwards. That
    # the basis is shared or of this site is seen to by a trigger.
    basis_id: Mapped[RecordId] = mapped_column(ForeignKey("basis.id", use_alter=True), index=True)
    basis: Mapped[str]
    time_zone: Mapped[str]
    contact: Mapped[str | None]
    demo: Mapped[bool]
