"""The table of fluids."""

from sqlalchemy import CheckConstraint, ForeignKey, Index
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import (
    Json,
    RecordId,
    Row,
    above_zero,
    between,
    one_of,
    record_table,
)

SETTLES = ("low", "high", "methane")


class Fluid(Row):
    """A fluid; those that come with the service belong to no site."""

    __tablename__ = "fluid"
    __table_args__ = record_table(
        *above_zero("molar_mass_g_mol", "boiling_k", "condensed_density_kg_m3"),
        between("oxygen_fraction", 0, 1),
        one_of("settles", SETTLES),
        CheckConstraint("lfl_pct > 0 AND lfl_pct < 100", name="lfl_pct_in_range"),
    )

    site_id: Mapped[RecordId | None] = mapped_column(ForeignKey("site.id"))
    molar_mass_g_mol: Mapped[float]
    boiling_k: Mapped[float]
    condensed_density_kg_m3: Mapped[float]
    oxygen_fraction: Mapped[float]
    solid: Mapped[bool]
    hazards: Mapped[Json]
    settles: Mapped[str]
    sources: Mapped[Json]
    lfl_pct: Mapped[float | None]


# A null site makes no pair equal, so the tags of what is shared need an index of their own.
Index(
    "ix_fluid_shared_tag",
    Fluid.tag_folded,
    unique=True,
    sqlite_where=Fluid.site_id.is_(None),
    postgresql_where=Fluid.site_id.is_(None),
)
