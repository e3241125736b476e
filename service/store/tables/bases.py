"""The table of bases."""

from sqlalchemy import ForeignKey, Index
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import Json, RecordId, Row, record_table


class Basis(Row):
    """The values a site is judged by; those that come with the service belong to no site."""

    __tablename__ = "basis"
    __table_args__ = record_table()

    site_id: Mapped[RecordId | None] = mapped_column(ForeignKey("site.id"))
    derived_from_id: Mapped[RecordId | None] = mapped_column(ForeignKey("basis.id"), index=True)
    derived_from: Mapped[str | None]
    values: Mapped[Json]
    sources: Mapped[Json]


# A null site makes no pair equal, so the tags of what is shared need an index of their own.
Index(
    "ix_basis_shared_tag",
    Basis.tag_folded,
    unique=True,
    sqlite_where=Basis.site_id.is_(None),
    postgresql_where=Basis.site_id.is_(None),
)
