"""Supply lines, the rooms that they run through, and the vessels that they fill."""

from collections.abc import Sequence

import sqlalchemy as sa
from alembic import op
from sqlalchemy.dialects import postgresql

revision: str = "add_supply_lines"
down_revision: str | Sequence[str] | None = "complete_the_room"
branch_labels: str | Sequence[str] | None = None
depends_on: str | Sequence[str] | None = None

Text = sa.Text().with_variant(sa.Text(collation="C"), "postgresql")
Document = Text
Number: sa.REAL[float] = sa.REAL().with_variant(postgresql.DOUBLE_PRECISION(), "postgresql")
Whole = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
Instant = sa.Text().with_variant(postgresql.TIMESTAMP(timezone=True), "postgresql")

LINE = "supply_line"


def upgrade() -> None:
    """Add the tables; no vessel is filled by a line yet."""
    _create_line()
    _create_line_room()
    # A plain column, which SQLite adds without copying the table.
    op.add_column("vessel", sa.Column("filling_line_id", Text))
    op.create_index(op.f("ix_vessel_filling_line_id"), "vessel", ["filling_line_id"])
    for statement in _triggers():
        op.execute(statement)


def downgrade() -> None:
    """Take them away again, with what was recorded in them."""
    op.drop_index(op.f("ix_vessel_filling_line_id"), "vessel")
    op.drop_column("vessel", "filling_line_id")
    # Their triggers go with them.
    op.drop_table("supply_line_room")
    op.drop_table(LINE)


def _triggers() -> Sequence[str]:
    """Write the triggers that keep a site from naming the fluid of another."""
    if op.get_bind().dialect.name != "sqlite":
        return (
            f"CREATE TRIGGER {LINE}_fluid_id_of_its_site BEFORE INSERT OR UPDATE OF"
            f" fluid_id, site_id ON {LINE} FOR EACH ROW"
            " EXECUTE FUNCTION refuse_reference_across_sites('fluid_id', 'fluid')",
        )
    of_another = (
        "EXISTS (SELECT 1 FROM fluid AS r WHERE r.id = NEW.fluid_id"
        " AND r.site_id IS NOT NULL AND r.site_id IS NOT NEW.site_id)"
    )
    refuse = f"BEGIN SELECT RAISE(ABORT, '{LINE}.fluid_id refers to another site'); END"
    return tuple(
        f"CREATE TRIGGER {LINE}_fluid_id_of_its_site_{named} BEFORE {when} ON {LINE}"
        f" WHEN {of_another} {refuse}"
        for when, named in (("INSERT", "insert"), ("UPDATE OF fluid_id, site_id", "update"))
    )


def _of_its_site(table: str, column: str, referred: str) -> sa.ForeignKeyConstraint:
    return sa.ForeignKeyConstraint(
        ["site_id", column],
        [f"{referred}.site_id", f"{referred}.id"],
        name=op.f(f"fk_{table}_site_id_{column}"),
    )


def _create_line() -> None:
    above_zero = ("bore_mm", "length_m", "source_pressure_kpa", "restrictor_kg_h")
    op.create_table(
        LINE,
        sa.Column("id", Text, nullable=False),
        sa.Column("revision", Whole, nullable=False),
        sa.Column("created_at", Instant, nullable=False),
        sa.Column("updated_at", Instant, nullable=False),
        sa.Column("tag", Text, nullable=False),
        sa.Column("tag_folded", Text, nullable=False),
        sa.Column("external_id", Text),
        sa.Column("name", Text),
        sa.Column("notes", Text),
        sa.Column("labels", Document, nullable=False),
        sa.Column("site_id", Text, nullable=False),
        sa.Column("source_vessel_id", Text),
        sa.Column("fluid_id", Text, nullable=False),
        sa.Column("fluid", Text, nullable=False),
        sa.Column("phase", Text, nullable=False),
        sa.Column("rooms", Document, nullable=False),
        sa.Column("bore_mm", Number),
        sa.Column("length_m", Number),
        sa.Column("source_pressure_kpa", Number),
        sa.Column("restrictor_kg_h", Number),
        sa.Column("shutoff", Document),
        sa.Column("trigger_detector_id", Text),
        sa.Column("insulation", Text),
        sa.Column("segments", Document),
        sa.PrimaryKeyConstraint("id", name=op.f(f"pk_{LINE}")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f(f"uq_{LINE}_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f(f"uq_{LINE}_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f(f"uq_{LINE}_site_id_tag_folded")),
        sa.CheckConstraint("revision >= 1", name=op.f(f"ck_{LINE}_revision_from_one")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f(f"fk_{LINE}_site_id")),
        sa.ForeignKeyConstraint(["fluid_id"], ["fluid.id"], name=op.f(f"fk_{LINE}_fluid_id")),
        _of_its_site(LINE, "source_vessel_id", "vessel"),
        _of_its_site(LINE, "trigger_detector_id", "detector"),
        sa.CheckConstraint("phase IN ('liquid', 'gas')", name=op.f(f"ck_{LINE}_phase_known")),
        sa.CheckConstraint(
            "insulation IN ('vacuum-multilayer', 'vacuum-powder', 'foam', 'none')",
            name=op.f(f"ck_{LINE}_insulation_known"),
        ),
        *(
            sa.CheckConstraint(f"{name} > 0", name=op.f(f"ck_{LINE}_{name}_above_zero"))
            for name in above_zero
        ),
        sqlite_strict=True,
    )
    for name in ("source_vessel_id", "fluid_id", "trigger_detector_id"):
        op.create_index(op.f(f"ix_{LINE}_{name}"), LINE, [name])


def _create_line_room() -> None:
    table = "supply_line_room"
    op.create_table(
        table,
        sa.Column("site_id", Text, nullable=False),
        sa.Column("line_id", Text, nullable=False),
        sa.Column("room_id", Text, nullable=False),
        sa.PrimaryKeyConstraint("line_id", "room_id", name=op.f(f"pk_{table}")),
        sa.ForeignKeyConstraint(
            ["site_id", "line_id"],
            ["supply_line.site_id", "supply_line.id"],
            name=op.f(f"fk_{table}_site_id_line_id"),
            ondelete="CASCADE",
        ),
        _of_its_site(table, "room_id", "room"),
        sqlite_strict=True,
    )
    op.create_index(op.f(f"ix_{table}_room_id"), table, ["room_id"])
