"""Openings, controls, and all that a single room's records can say."""

from collections.abc import Iterator, Sequence

import sqlalchemy as sa
from alembic import op
from sqlalchemy.dialects import postgresql

revision: str = "complete_the_room"
down_revision: str | Sequence[str] | None = "first_records"
branch_labels: str | Sequence[str] | None = None
depends_on: str | Sequence[str] | None = None

Text = sa.Text().with_variant(sa.Text(collation="C"), "postgresql")
Document = Text
Number: sa.REAL[float] = sa.REAL().with_variant(postgresql.DOUBLE_PRECISION(), "postgresql")
Whole = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
Flag = sa.Boolean().with_variant(sa.Integer(), "sqlite")
Instant = sa.Text().with_variant(postgresql.TIMESTAMP(timezone=True), "postgresql")

# Columns, and checks by the end of their names: table by table.
COLUMNS = {
    "fluid": (("lfl_pct", Number),),
    "room": (
        ("pit", Document),
        ("door", Document),
        ("leakage_area_m2", Number),
        ("relief_opening_m2", Number),
        ("floor_rating_kpa", Number),
    ),
    "detector": (
        ("zeroed_at_kpa_abs", Number),
        ("outages", Document),
    ),
    "ventilation_unit": (
        ("outages", Document),
        ("boost_flow_m3_h", Number),
        ("boost_trigger", Text),
        ("boost_detector_id", Text),
        ("terminal_height", Text),
    ),
    "vessel": (
        ("tare_kg", Number),
        ("footprint_m2", Number),
        ("cold_area_m2", Number),
        ("working_pressure_kpa", Number),
        ("withdrawal_bore_mm", Number),
        ("neck_plug", Text),
        ("relief", Document),
        ("quench", Document),
    ),
}
CHECKS = {
    "fluid": {"lfl_pct_in_range": "lfl_pct > 0 AND lfl_pct < 100"},
    "room": {
        "floor_rating_kpa_above_zero": "floor_rating_kpa > 0",
        "leakage_area_m2_not_negative": "leakage_area_m2 >= 0",
        "relief_opening_m2_not_negative": "relief_opening_m2 >= 0",
    },
    "detector": {"zeroed_at_kpa_abs_above_zero": "zeroed_at_kpa_abs > 0"},
    "ventilation_unit": {
        "terminal_height_known": "terminal_height IN ('low', 'high')",
        "boost_flow_m3_h_not_negative": "boost_flow_m3_h >= 0",
        "boost_trigger_manual_or_detector": (
            "coalesce(boost_trigger, 'manual') = coalesce(boost_detector_id, 'manual')"
        ),
    },
    "vessel": {
        "neck_plug_known": "neck_plug IN ('vented', 'sealed')",
        "tare_kg_above_zero": "tare_kg > 0",
        "footprint_m2_above_zero": "footprint_m2 > 0",
        "withdrawal_bore_mm_above_zero": "withdrawal_bore_mm > 0",
        "cold_area_m2_not_negative": "cold_area_m2 >= 0",
        "working_pressure_above_vacuum": "working_pressure_kpa > -101.325",
    },
}
BOOST = "fk_ventilation_unit_site_id_boost_detector_id"
# Triggers that keep a site's records to its own. SQLite copies the tables that they stand on and
# look into, and renames none that a trigger misses.
WATCHED = (("room", "purge_fluid_id", "fluid"), ("vessel", "fluid_id", "fluid"))


def upgrade() -> None:
    """Add what is missing; what is there gets nothing in its new columns."""
    _watch_no_longer()
    for table, columns in COLUMNS.items():
        with op.batch_alter_table(table, table_kwargs={"sqlite_strict": True}) as batch:
            for name, kind in columns:
                batch.add_column(sa.Column(name, kind))
            for name, text in CHECKS[table].items():
                batch.create_check_constraint(op.f(f"ck_{table}_{name}"), text)
            if table == "ventilation_unit":
                batch.create_foreign_key(
                    op.f(BOOST), "detector", ["site_id", "boost_detector_id"], ["site_id", "id"]
                )
    op.create_index(
        op.f("ix_ventilation_unit_boost_detector_id"), "ventilation_unit", ["boost_detector_id"]
    )
    _create_opening()
    _create_control()
    _watch_again()


def downgrade() -> None:
    """Take it away again, with what was recorded in it."""
    _watch_no_longer()
    op.drop_table("control")
    op.drop_table("opening")
    op.drop_index(op.f("ix_ventilation_unit_boost_detector_id"), "ventilation_unit")
    for table, columns in reversed(COLUMNS.items()):
        with op.batch_alter_table(table, table_kwargs={"sqlite_strict": True}) as batch:
            if table == "ventilation_unit":
                batch.drop_constraint(op.f(BOOST), type_="foreignkey")
            for name in CHECKS[table]:
                batch.drop_constraint(op.f(f"ck_{table}_{name}"), type_="check")
            for name, _kind in columns:
                batch.drop_column(name)
    _watch_again()


def _on_sqlite() -> bool:
    return op.get_bind().dialect.name == "sqlite"


def _watch_no_longer() -> None:
    if _on_sqlite():
        for table, column, _referred in WATCHED:
            for named in ("insert", "update"):
                op.execute(f"DROP TRIGGER {table}_{column}_of_its_site_{named}")


def _watch_again() -> None:
    if _on_sqlite():
        for statement in _triggers_of_sqlite():
            op.execute(statement)


def _triggers_of_sqlite() -> Iterator[str]:
    for table, column, referred in WATCHED:
        of_another = (
            f"EXISTS (SELECT 1 FROM {referred} AS r WHERE r.id = NEW.{column}"  # noqa: S608
            " AND r.site_id IS NOT NULL AND r.site_id IS NOT NEW.site_id)"
        )
        refuse = f"BEGIN SELECT RAISE(ABORT, '{table}.{column} refers to another site'); END"
        for when, named in (("INSERT", "insert"), (f"UPDATE OF {column}, site_id", "update")):
            yield (
                f"CREATE TRIGGER {table}_{column}_of_its_site_{named} BEFORE {when} ON {table}"
                f" WHEN {of_another} {refuse}"
            )


def _record_columns() -> tuple[sa.Column[object], ...]:
    return (
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
    )


def _record_constraints(table: str) -> tuple[sa.Constraint, ...]:
    return (
        sa.PrimaryKeyConstraint("id", name=op.f(f"pk_{table}")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f(f"uq_{table}_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f(f"uq_{table}_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f(f"uq_{table}_site_id_tag_folded")),
        sa.CheckConstraint("revision >= 1", name=op.f(f"ck_{table}_revision_from_one")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f(f"fk_{table}_site_id")),
    )


def _of_its_site(table: str, column: str, referred: str) -> sa.ForeignKeyConstraint:
    return sa.ForeignKeyConstraint(
        ["site_id", column],
        [f"{referred}.site_id", f"{referred}.id"],
        name=op.f(f"fk_{table}_site_id_{column}"),
    )


def _create_opening() -> None:
    op.create_table(
        "opening",
        *_record_columns(),
        sa.Column("room_id", Text, nullable=False),
        sa.Column("other_room_id", Text),
        sa.Column("kind", Text, nullable=False),
        sa.Column("width_m", Number),
        sa.Column("height_m", Number),
        sa.Column("area_m2", Number),
        sa.Column("exchange_flow_m3_h", Number),
        sa.Column("net_flow_m3_h", Number),
        sa.Column("normally_open", Flag),
        *_record_constraints("opening"),
        _of_its_site("opening", "room_id", "room"),
        _of_its_site("opening", "other_room_id", "room"),
        sa.CheckConstraint(
            "kind IN ('door', 'hatch', 'window', 'grille', 'curtain', 'gap')",
            name=op.f("ck_opening_kind_known"),
        ),
        sa.CheckConstraint("other_room_id <> room_id", name=op.f("ck_opening_two_rooms")),
        sa.CheckConstraint("width_m > 0", name=op.f("ck_opening_width_m_above_zero")),
        sa.CheckConstraint("height_m > 0", name=op.f("ck_opening_height_m_above_zero")),
        sa.CheckConstraint("area_m2 > 0", name=op.f("ck_opening_area_m2_above_zero")),
        sa.CheckConstraint(
            "exchange_flow_m3_h >= 0", name=op.f("ck_opening_exchange_flow_m3_h_not_negative")
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_opening_room_id"), "opening", ["room_id"])
    op.create_index(op.f("ix_opening_other_room_id"), "opening", ["other_room_id"])


def _create_control() -> None:
    op.create_table(
        "control",
        *_record_columns(),
        sa.Column("room_id", Text),
        sa.Column("vessel_id", Text),
        sa.Column("kind", Text, nullable=False),
        sa.Column("reference", Text),
        sa.Column("area_m2", Number),
        sa.Column("checked_on", Text),
        sa.Column("check_every_days", Whole),
        *_record_constraints("control"),
        _of_its_site("control", "room_id", "room"),
        _of_its_site("control", "vessel_id", "vessel"),
        sa.CheckConstraint(
            "kind IN ('signage', 'procedure', 'training', 'personal-monitor', 'alarm-response', "
            "'rescue', 'lone-working', 'protective-equipment', 'access', 'delivery-route', 'bund')",
            name=op.f("ck_control_kind_known"),
        ),
        sa.CheckConstraint(
            "(room_id IS NULL) <> (vessel_id IS NULL)", name=op.f("ck_control_one_subject")
        ),
        sa.CheckConstraint(
            "(kind = 'bund') = (area_m2 IS NOT NULL)", name=op.f("ck_control_area_of_a_bund")
        ),
        sa.CheckConstraint("area_m2 > 0", name=op.f("ck_control_area_m2_above_zero")),
        sa.CheckConstraint(
            "check_every_days > 0", name=op.f("ck_control_check_every_days_above_zero")
        ),
        sa.CheckConstraint("length(checked_on) = 10", name=op.f("ck_control_checked_on_a_day")),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_control_room_id"), "control", ["room_id"])
    op.create_index(op.f("ix_control_vessel_id"), "control", ["vessel_id"])
