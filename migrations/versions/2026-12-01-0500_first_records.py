"""The first records, their history, findings, events and keys."""

from collections.abc import Iterator, Sequence

import sqlalchemy as sa
from alembic import op
from sqlalchemy.dialects import postgresql

revision: str = "first_records"
down_revision: str | Sequence[str] | None = None
branch_labels: str | Sequence[str] | None = None
depends_on: str | Sequence[str] | None = None

Text = sa.Text().with_variant(sa.Text(collation="C"), "postgresql")
Document = Text
Number: sa.REAL[float] = sa.REAL().with_variant(postgresql.DOUBLE_PRECISION(), "postgresql")
Whole = sa.BigInteger().with_variant(sa.Integer(), "sqlite")
Flag = sa.Boolean().with_variant(sa.Integer(), "sqlite")
Instant = sa.Text().with_variant(postgresql.TIMESTAMP(timezone=True), "postgresql")
Bytes = sa.LargeBinary()

APPEND_ONLY = ("change", "record_version", "assessment_version", "finding_version", "event")
# All columns of an event but `feed_no`, which is given once.
EVENT = ("id", "site_id", "position", "number", "subject", "type", "body")
# A foreign key of site and id cannot name what is shared, which has no site. So what can be shared
# or a site's own is watched by a trigger: table, column, table referred to.
SHARED = (
    ("site", "basis_id", "basis"),
    ("basis", "derived_from_id", "basis"),
    ("room", "purge_fluid_id", "fluid"),
    ("vessel", "fluid_id", "fluid"),
)
TABLES = (
    "installation",
    "answer",
    "key",
    "event",
    "finding_version",
    "finding",
    "room_state",
    "assessment_version",
    "record_version",
    "change",
    "head",
    "detector",
    "vessel",
    "ventilation_unit_room",
    "ventilation_unit",
    "room",
    "fluid",
)


def upgrade() -> None:
    """Create everything."""
    _create_records()
    _create_history()
    _create_access()
    statements = _triggers_of_sqlite() if _on_sqlite() else _triggers_of_postgresql()
    for statement in statements:
        op.execute(statement)


def downgrade() -> None:
    """Drop everything, with all that was recorded."""
    for table in TABLES:
        op.drop_table(table)
    if not _on_sqlite():
        op.drop_constraint(op.f("fk_basis_site_id"), "basis", type_="foreignkey")
    op.drop_table("site")
    op.drop_table("basis")
    if not _on_sqlite():
        op.execute("DROP FUNCTION refuse_change_of_the_past()")
        op.execute("DROP FUNCTION refuse_change_of_an_event()")
        op.execute("DROP FUNCTION refuse_reference_across_sites()")


def _on_sqlite() -> bool:
    return op.get_bind().dialect.name == "sqlite"


def _later_on_postgresql(constraint: sa.ForeignKeyConstraint) -> Iterator[sa.ForeignKeyConstraint]:
    # A site and its own bases name each other. SQLite takes a table that is not there yet, and
    # cannot add a key afterwards; PostgreSQL the other way round.
    if _on_sqlite():
        yield constraint


def _triggers_of_sqlite() -> Iterator[str]:
    same = " AND ".join(f"NEW.{column} IS OLD.{column}" for column in EVENT)
    given_once = f"OLD.feed_no IS NULL AND NEW.feed_no IS NOT NULL AND {same}"
    for table in APPEND_ONLY:
        unless = f" WHEN NOT ({given_once})" if table == "event" else ""
        refuse = f"BEGIN SELECT RAISE(ABORT, '{table} is append-only'); END"
        yield f"CREATE TRIGGER {table}_is_not_updated BEFORE UPDATE ON {table}{unless} {refuse}"
        yield f"CREATE TRIGGER {table}_is_not_deleted BEFORE DELETE ON {table} {refuse}"
    for table, column, referred in SHARED:
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


def _triggers_of_postgresql() -> Iterator[str]:
    yield """
        CREATE FUNCTION refuse_change_of_the_past() RETURNS trigger LANGUAGE plpgsql AS $$
        BEGIN
            RAISE EXCEPTION '% is append-only', TG_TABLE_NAME;
        END $$
    """
    same = " AND ".join(f"NEW.{column} IS NOT DISTINCT FROM OLD.{column}" for column in EVENT)
    yield f"""
        CREATE FUNCTION refuse_change_of_an_event() RETURNS trigger LANGUAGE plpgsql AS $$
        BEGIN
            IF OLD.feed_no IS NULL AND NEW.feed_no IS NOT NULL AND {same} THEN
                RETURN NEW;
            END IF;
            RAISE EXCEPTION 'event is append-only';
        END $$
    """
    yield """
        CREATE FUNCTION refuse_reference_across_sites() RETURNS trigger LANGUAGE plpgsql AS $$
        DECLARE
            referring text := to_jsonb(NEW) ->> TG_ARGV[0];
            owner text;
        BEGIN
            IF referring IS NOT NULL THEN
                EXECUTE format('SELECT site_id FROM %I WHERE id = $1', TG_ARGV[1])
                    INTO owner USING referring;
                IF owner IS NOT NULL AND owner IS DISTINCT FROM NEW.site_id THEN
                    RAISE EXCEPTION '%.% refers to another site', TG_TABLE_NAME, TG_ARGV[0];
                END IF;
            END IF;
            RETURN NEW;
        END $$
    """
    for table in APPEND_ONLY:
        function = "refuse_change_of_an_event" if table == "event" else "refuse_change_of_the_past"
        yield (
            f"CREATE TRIGGER {table}_is_not_updated BEFORE UPDATE ON {table}"
            f" FOR EACH ROW EXECUTE FUNCTION {function}()"
        )
        for when, done, each in (
            ("DELETE", "deleted", "ROW"),
            ("TRUNCATE", "truncated", "STATEMENT"),
        ):
            yield (
                f"CREATE TRIGGER {table}_is_not_{done} BEFORE {when} ON {table}"
                f" FOR EACH {each} EXECUTE FUNCTION refuse_change_of_the_past()"
            )
    for table, column, referred in SHARED:
        yield (
            f"CREATE TRIGGER {table}_{column}_of_its_site BEFORE INSERT OR UPDATE OF"
            f" {column}, site_id ON {table} FOR EACH ROW"
            f" EXECUTE FUNCTION refuse_reference_across_sites('{column}', '{referred}')"
        )


def _create_records() -> None:
    """Create the tables of records."""
    op.create_table(
        "basis",
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
        sa.Column("site_id", Text),
        sa.Column("derived_from_id", Text),
        sa.Column("derived_from", Text),
        sa.Column("values", Document, nullable=False),
        sa.Column("sources", Document, nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_basis")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f("uq_basis_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f("uq_basis_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f("uq_basis_site_id_tag_folded")),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_basis_revision_from_one")),
        sa.ForeignKeyConstraint(
            ["derived_from_id"], ["basis.id"], name=op.f("fk_basis_derived_from_id")
        ),
        *_later_on_postgresql(
            sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_basis_site_id"))
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_basis_derived_from_id"), "basis", ["derived_from_id"])
    op.create_index(
        op.f("ix_basis_shared_tag"),
        "basis",
        ["tag_folded"],
        unique=True,
        sqlite_where=sa.text("site_id IS NULL"),
        postgresql_where=sa.text("site_id IS NULL"),
    )
    op.create_table(
        "site",
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
        sa.Column("elevation_m", Number),
        sa.Column("station_pressure_kpa_abs", Number),
        sa.Column("basis_id", Text, nullable=False),
        sa.Column("basis", Text, nullable=False),
        sa.Column("time_zone", Text, nullable=False),
        sa.Column("contact", Text),
        sa.Column("demo", Flag, nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_site")),
        sa.UniqueConstraint("external_id", name=op.f("uq_site_external_id")),
        sa.UniqueConstraint("tag_folded", name=op.f("uq_site_tag_folded")),
        sa.CheckConstraint("site_id = id", name=op.f("ck_site_its_own_site")),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_site_revision_from_one")),
        sa.CheckConstraint(
            "station_pressure_kpa_abs > 0", name=op.f("ck_site_station_pressure_kpa_abs_above_zero")
        ),
        sa.ForeignKeyConstraint(["basis_id"], ["basis.id"], name=op.f("fk_site_basis_id")),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_site_basis_id"), "site", ["basis_id"])
    if not _on_sqlite():
        op.create_foreign_key(op.f("fk_basis_site_id"), "basis", "site", ["site_id"], ["id"])
    op.create_table(
        "fluid",
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
        sa.Column("site_id", Text),
        sa.Column("molar_mass_g_mol", Number, nullable=False),
        sa.Column("boiling_k", Number, nullable=False),
        sa.Column("condensed_density_kg_m3", Number, nullable=False),
        sa.Column("oxygen_fraction", Number, nullable=False),
        sa.Column("solid", Flag, nullable=False),
        sa.Column("hazards", Document, nullable=False),
        sa.Column("settles", Text, nullable=False),
        sa.Column("sources", Document, nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_fluid")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f("uq_fluid_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f("uq_fluid_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f("uq_fluid_site_id_tag_folded")),
        sa.CheckConstraint(
            "molar_mass_g_mol > 0", name=op.f("ck_fluid_molar_mass_g_mol_above_zero")
        ),
        sa.CheckConstraint("boiling_k > 0", name=op.f("ck_fluid_boiling_k_above_zero")),
        sa.CheckConstraint(
            "condensed_density_kg_m3 > 0", name=op.f("ck_fluid_condensed_density_kg_m3_above_zero")
        ),
        sa.CheckConstraint(
            "oxygen_fraction >= 0 AND oxygen_fraction <= 1",
            name=op.f("ck_fluid_oxygen_fraction_in_range"),
        ),
        sa.CheckConstraint(
            "settles IN ('low', 'high', 'methane')", name=op.f("ck_fluid_settles_known")
        ),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_fluid_revision_from_one")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_fluid_site_id")),
        sqlite_strict=True,
    )
    op.create_index(
        op.f("ix_fluid_shared_tag"),
        "fluid",
        ["tag_folded"],
        unique=True,
        sqlite_where=sa.text("site_id IS NULL"),
        postgresql_where=sa.text("site_id IS NULL"),
    )
    op.create_table(
        "room",
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
        sa.Column("kind", Text, nullable=False),
        sa.Column("state", Text, nullable=False),
        sa.Column("building", Text),
        sa.Column("floor", Text),
        sa.Column("floor_area_m2", Number),
        sa.Column("height_m", Number),
        sa.Column("volume_m3", Number, nullable=False),
        sa.Column("volume_derived", Flag, nullable=False),
        sa.Column("occupied_fraction", Number),
        sa.Column("temperature_c", Number),
        sa.Column("below_ground", Flag),
        sa.Column("purge_flow_m3_h", Number),
        sa.Column("purge_fluid_id", Text),
        sa.Column("purge_fluid", Text),
        sa.Column("people", Document),
        sa.Column("unaccompanied", Flag),
        sa.Column("egress_m", Number),
        sa.Column("contact", Text),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_room")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f("uq_room_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f("uq_room_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f("uq_room_site_id_tag_folded")),
        sa.CheckConstraint(
            "kind IN ('room', 'corridor', 'walk-in', 'pit', 'lift', 'vehicle')",
            name=op.f("ck_room_kind_known"),
        ),
        sa.CheckConstraint(
            "state IN ('planned', 'in-service', 'out-of-service')", name=op.f("ck_room_state_known")
        ),
        sa.CheckConstraint("floor_area_m2 > 0", name=op.f("ck_room_floor_area_m2_above_zero")),
        sa.CheckConstraint("height_m > 0", name=op.f("ck_room_height_m_above_zero")),
        sa.CheckConstraint("volume_m3 > 0", name=op.f("ck_room_volume_above_zero")),
        sa.CheckConstraint(
            "occupied_fraction >= 0 AND occupied_fraction <= 0.95",
            name=op.f("ck_room_occupied_fraction_in_range"),
        ),
        sa.CheckConstraint(
            "temperature_c >= -200 AND temperature_c <= 60",
            name=op.f("ck_room_temperature_c_in_range"),
        ),
        sa.CheckConstraint(
            "purge_flow_m3_h >= 0", name=op.f("ck_room_purge_flow_m3_h_not_negative")
        ),
        sa.CheckConstraint("egress_m >= 0", name=op.f("ck_room_egress_m_not_negative")),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_room_revision_from_one")),
        sa.ForeignKeyConstraint(
            ["purge_fluid_id"], ["fluid.id"], name=op.f("fk_room_purge_fluid_id")
        ),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_room_site_id")),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_room_purge_fluid_id"), "room", ["purge_fluid_id"])
    op.create_table(
        "ventilation_unit",
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
        sa.Column("arrangement", Text),
        sa.Column("design_flow_m3_h", Number),
        sa.Column("measured_flow_m3_h", Number),
        sa.Column("measured_on", Text),
        sa.Column("measure_every_days", Whole),
        sa.Column("outdoor_air_fraction", Number),
        sa.Column("mixing_factor", Number),
        sa.Column("mixing_tested_on", Text),
        sa.Column("state", Text, nullable=False),
        sa.Column("standby_power", Flag),
        sa.Column("flow_proved", Flag),
        sa.Column("fail_alarm", Flag),
        sa.Column("serves", Document, nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_ventilation_unit")),
        sa.UniqueConstraint(
            "site_id", "external_id", name=op.f("uq_ventilation_unit_site_id_external_id")
        ),
        sa.UniqueConstraint("site_id", "id", name=op.f("uq_ventilation_unit_site_id_id")),
        sa.UniqueConstraint(
            "site_id", "tag_folded", name=op.f("uq_ventilation_unit_site_id_tag_folded")
        ),
        sa.CheckConstraint(
            "arrangement IN ('supply', 'exhaust', 'balanced')",
            name=op.f("ck_ventilation_unit_arrangement_known"),
        ),
        sa.CheckConstraint(
            "state IN ('running', 'stopped', 'failed')",
            name=op.f("ck_ventilation_unit_state_known"),
        ),
        sa.CheckConstraint(
            "design_flow_m3_h >= 0", name=op.f("ck_ventilation_unit_design_flow_m3_h_not_negative")
        ),
        sa.CheckConstraint(
            "measured_flow_m3_h >= 0",
            name=op.f("ck_ventilation_unit_measured_flow_m3_h_not_negative"),
        ),
        sa.CheckConstraint(
            "measure_every_days > 0", name=op.f("ck_ventilation_unit_measure_every_days_above_zero")
        ),
        sa.CheckConstraint(
            "outdoor_air_fraction >= 0 AND outdoor_air_fraction <= 1",
            name=op.f("ck_ventilation_unit_outdoor_air_fraction_in_range"),
        ),
        sa.CheckConstraint(
            "mixing_factor >= 1 AND mixing_factor <= 10",
            name=op.f("ck_ventilation_unit_mixing_factor_in_range"),
        ),
        sa.CheckConstraint(
            "length(measured_on) = 10", name=op.f("ck_ventilation_unit_measured_on_a_day")
        ),
        sa.CheckConstraint(
            "length(mixing_tested_on) = 10", name=op.f("ck_ventilation_unit_mixing_tested_on_a_day")
        ),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_ventilation_unit_revision_from_one")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_ventilation_unit_site_id")),
        sqlite_strict=True,
    )
    op.create_table(
        "ventilation_unit_room",
        sa.Column("site_id", Text, nullable=False),
        sa.Column("unit_id", Text, nullable=False),
        sa.Column("room_id", Text, nullable=False),
        sa.Column("share", Number, nullable=False),
        sa.PrimaryKeyConstraint("unit_id", "room_id", name=op.f("pk_ventilation_unit_room")),
        sa.CheckConstraint(
            "share >= 0 AND share <= 1", name=op.f("ck_ventilation_unit_room_share_in_range")
        ),
        sa.ForeignKeyConstraint(
            ["site_id", "room_id"],
            ["room.site_id", "room.id"],
            name=op.f("fk_ventilation_unit_room_site_id_room_id"),
        ),
        sa.ForeignKeyConstraint(
            ["site_id", "unit_id"],
            ["ventilation_unit.site_id", "ventilation_unit.id"],
            name=op.f("fk_ventilation_unit_room_site_id_unit_id"),
            ondelete="CASCADE",
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_ventilation_unit_room_room_id"), "ventilation_unit_room", ["room_id"])
    op.create_table(
        "vessel",
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
        sa.Column("room_id", Text),
        sa.Column("fluid_id", Text, nullable=False),
        sa.Column("fluid", Text, nullable=False),
        sa.Column("kind", Text, nullable=False),
        sa.Column("capacity_l", Number),
        sa.Column("capacity_kg", Number),
        sa.Column("gross_l", Number),
        sa.Column("contents_l", Number),
        sa.Column("contents_kg", Number),
        sa.Column("counted_at", Instant),
        sa.Column("rated_evaporation_l_day", Number),
        sa.Column("measured_evaporation_l_day", Number),
        sa.Column("measured_loss_kg_day", Number),
        sa.Column("use_l_day", Number),
        sa.Column("insulation", Text),
        sa.Column("vent_to", Text),
        sa.Column("filling", Document),
        sa.Column("manifold", Text),
        sa.Column("mobile", Flag),
        sa.Column("state", Text, nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_vessel")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f("uq_vessel_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f("uq_vessel_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f("uq_vessel_site_id_tag_folded")),
        sa.CheckConstraint(
            "kind IN ('open-dewar', 'pressurised-dewar', 'freezer', 'tank', 'cryostat', 'magnet', "
            "'dry-ice-box', 'cylinder')",
            name=op.f("ck_vessel_kind_known"),
        ),
        sa.CheckConstraint(
            "insulation IN ('vacuum-multilayer', 'vacuum-powder', 'foam', 'none')",
            name=op.f("ck_vessel_insulation_known"),
        ),
        sa.CheckConstraint("vent_to IN ('room', 'outdoors')", name=op.f("ck_vessel_vent_to_known")),
        sa.CheckConstraint(
            "state IN ('in-service', 'empty', 'withdrawn')", name=op.f("ck_vessel_state_known")
        ),
        sa.CheckConstraint("capacity_l > 0", name=op.f("ck_vessel_capacity_l_above_zero")),
        sa.CheckConstraint("capacity_kg > 0", name=op.f("ck_vessel_capacity_kg_above_zero")),
        sa.CheckConstraint("gross_l > 0", name=op.f("ck_vessel_gross_l_above_zero")),
        sa.CheckConstraint(
            "(capacity_l IS NULL) <> (capacity_kg IS NULL)", name=op.f("ck_vessel_one_capacity")
        ),
        sa.CheckConstraint(
            "contents_l IS NULL OR capacity_l IS NOT NULL", name=op.f("ck_vessel_contents_l_fits")
        ),
        sa.CheckConstraint(
            "contents_kg IS NULL OR capacity_kg IS NOT NULL",
            name=op.f("ck_vessel_contents_kg_fits"),
        ),
        sa.CheckConstraint("contents_l >= 0", name=op.f("ck_vessel_contents_l_not_negative")),
        sa.CheckConstraint("contents_kg >= 0", name=op.f("ck_vessel_contents_kg_not_negative")),
        sa.CheckConstraint(
            "rated_evaporation_l_day >= 0",
            name=op.f("ck_vessel_rated_evaporation_l_day_not_negative"),
        ),
        sa.CheckConstraint(
            "measured_evaporation_l_day >= 0",
            name=op.f("ck_vessel_measured_evaporation_l_day_not_negative"),
        ),
        sa.CheckConstraint(
            "measured_loss_kg_day >= 0", name=op.f("ck_vessel_measured_loss_kg_day_not_negative")
        ),
        sa.CheckConstraint("use_l_day >= 0", name=op.f("ck_vessel_use_l_day_not_negative")),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_vessel_revision_from_one")),
        sa.ForeignKeyConstraint(["fluid_id"], ["fluid.id"], name=op.f("fk_vessel_fluid_id")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_vessel_site_id")),
        sa.ForeignKeyConstraint(
            ["site_id", "room_id"],
            ["room.site_id", "room.id"],
            name=op.f("fk_vessel_site_id_room_id"),
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_vessel_fluid_id"), "vessel", ["fluid_id"])
    op.create_index(op.f("ix_vessel_room_id"), "vessel", ["room_id"])
    op.create_table(
        "detector",
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
        sa.Column("room_id", Text, nullable=False),
        sa.Column("gas", Text, nullable=False),
        sa.Column("height_m", Number),
        sa.Column("placed", Text),
        sa.Column("t90_s", Number),
        sa.Column("delay_s", Number),
        sa.Column("alarms_pct", Document),
        sa.Column("calibrated_on", Text),
        sa.Column("calibrate_every_days", Whole),
        sa.Column("state", Text, nullable=False),
        sa.Column("silenced_since", Instant),
        sa.Column("heard_outside", Flag),
        sa.Column("display_outside", Flag),
        sa.Column("power_backed", Flag),
        sa.Column("monitored", Flag),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_detector")),
        sa.UniqueConstraint("site_id", "external_id", name=op.f("uq_detector_site_id_external_id")),
        sa.UniqueConstraint("site_id", "id", name=op.f("uq_detector_site_id_id")),
        sa.UniqueConstraint("site_id", "tag_folded", name=op.f("uq_detector_site_id_tag_folded")),
        sa.CheckConstraint(
            "placed IN ('inside', 'entrance')", name=op.f("ck_detector_placed_known")
        ),
        sa.CheckConstraint(
            "state IN ('in-service', 'fault', 'off')", name=op.f("ck_detector_state_known")
        ),
        sa.CheckConstraint("height_m >= 0", name=op.f("ck_detector_height_m_not_negative")),
        sa.CheckConstraint("t90_s >= 0", name=op.f("ck_detector_t90_s_not_negative")),
        sa.CheckConstraint("delay_s >= 0", name=op.f("ck_detector_delay_s_not_negative")),
        sa.CheckConstraint(
            "calibrate_every_days > 0", name=op.f("ck_detector_calibrate_every_days_above_zero")
        ),
        sa.CheckConstraint(
            "length(calibrated_on) = 10", name=op.f("ck_detector_calibrated_on_a_day")
        ),
        sa.CheckConstraint("revision >= 1", name=op.f("ck_detector_revision_from_one")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_detector_site_id")),
        sa.ForeignKeyConstraint(
            ["site_id", "room_id"],
            ["room.site_id", "room.id"],
            name=op.f("fk_detector_site_id_room_id"),
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_detector_room_id"), "detector", ["room_id"])


def _create_history() -> None:
    """Create the tables of the past, and those of the newest of it."""
    op.create_table(
        "head",
        sa.Column("site_id", Text, nullable=False),
        sa.Column("position", Whole, nullable=False),
        sa.Column("recorded_at", Instant, nullable=False),
        sa.Column("chain_hash", Text, nullable=False),
        sa.Column("wanted_position", Whole, nullable=False),
        sa.PrimaryKeyConstraint("site_id", name=op.f("pk_head")),
        sqlite_strict=True,
    )
    op.create_table(
        "change",
        sa.Column("site_id", Text, nullable=False),
        sa.Column("position", Whole, nullable=False),
        sa.Column("recorded_at", Instant, nullable=False),
        sa.Column("stated_at", Instant),
        sa.Column("key_id", Text),
        sa.Column("request_id", Text),
        sa.Column("operation", Text, nullable=False),
        sa.Column("reason", Text),
        sa.Column("wants", Flag, nullable=False),
        sa.Column("entry", Bytes, nullable=False),
        sa.Column("chain_hash", Text, nullable=False),
        sa.PrimaryKeyConstraint("site_id", "position", name=op.f("pk_change")),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_change_site_id_recorded_at"), "change", ["site_id", "recorded_at"])
    op.create_index(
        op.f("ix_change_wanted"),
        "change",
        ["site_id", "position"],
        sqlite_where=sa.text("wants = 1"),
        postgresql_where=sa.text("wants = true"),
    )
    op.create_table(
        "record_version",
        sa.Column("record_id", Text, nullable=False),
        sa.Column("revision", Whole, nullable=False),
        sa.Column("kind", Text, nullable=False),
        sa.Column("site_id", Text),
        sa.Column("from_position", Whole, nullable=False),
        sa.Column("schema", Whole, nullable=False),
        sa.Column("body", Bytes),
        sa.PrimaryKeyConstraint("record_id", "revision", name=op.f("pk_record_version")),
        sqlite_strict=True,
    )
    op.create_index(
        op.f("ix_record_version_by_position"), "record_version", ["site_id", "from_position"]
    )
    op.create_index(
        op.f("ix_record_version_of_site"),
        "record_version",
        ["site_id", "kind", "record_id", "from_position"],
    )
    op.create_table(
        "assessment_version",
        sa.Column("room_id", Text, nullable=False),
        sa.Column("from_position", Whole, nullable=False),
        sa.Column("site_id", Text, nullable=False),
        sa.Column("assessed_at", Instant, nullable=False),
        sa.Column("basis_id", Text, nullable=False),
        sa.Column("basis_revision", Whole, nullable=False),
        sa.Column("method_version", Text, nullable=False),
        sa.Column("inputs", Bytes, nullable=False),
        sa.Column("results", Bytes, nullable=False),
        sa.Column("status", Bytes, nullable=False),
        sa.Column("turns_at", Instant),
        sa.Column("cause", Text, nullable=False),
        sa.Column("failed", Flag, nullable=False),
        sa.PrimaryKeyConstraint("room_id", "from_position", name=op.f("pk_assessment_version")),
        sqlite_strict=True,
    )
    op.create_index(
        op.f("ix_assessment_version_by_position"),
        "assessment_version",
        ["site_id", "from_position"],
    )
    op.create_table(
        "room_state",
        sa.Column("room_id", Text, nullable=False),
        sa.Column("site_id", Text, nullable=False),
        sa.Column("position", Whole, nullable=False),
        sa.Column("turns_at", Instant),
        sa.Column("method_version", Text, nullable=False),
        sa.Column("failed", Flag, nullable=False),
        sa.Column("standing", Text),
        sa.Column("worst_oxygen_pct", Number),
        sa.Column("basis_id", Text, nullable=False),
        sa.Column("basis_revision", Whole, nullable=False),
        sa.PrimaryKeyConstraint("room_id", name=op.f("pk_room_state")),
        sa.ForeignKeyConstraint(
            ["site_id", "room_id"],
            ["room.site_id", "room.id"],
            name=op.f("fk_room_state_site_id_room_id"),
            ondelete="CASCADE",
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_room_state_site_id"), "room_state", ["site_id"])
    op.create_index(op.f("ix_room_state_turns_at"), "room_state", ["turns_at"])
    op.create_table(
        "finding",
        sa.Column("id", Text, nullable=False),
        sa.Column("number", Whole, nullable=False),
        sa.Column("site_id", Text, nullable=False),
        sa.Column("room_id", Text, nullable=False),
        sa.Column("rule", Text, nullable=False),
        sa.Column("family", Text, nullable=False),
        sa.Column("subject_kind", Text, nullable=False),
        sa.Column("subject_id", Text, nullable=False),
        sa.Column("subject_tag", Text),
        sa.Column("gas", Text),
        sa.Column("position", Whole, nullable=False),
        sa.Column("state", Text, nullable=False),
        sa.Column("severity", Text, nullable=False),
        sa.Column("measure", Number),
        sa.Column("limit", Number),
        sa.Column("worse_is", Text, nullable=False),
        sa.Column("statement", Text, nullable=False),
        sa.Column("evidence", Document, nullable=False),
        sa.Column("remedy", Text),
        sa.Column("method", Text, nullable=False),
        sa.Column("source", Text, nullable=False),
        sa.Column("opened_at", Instant, nullable=False),
        sa.Column("changed_at", Instant, nullable=False),
        sa.Column("cleared_at", Instant),
        sa.Column("owner", Text),
        sa.Column("due_on", Text),
        sa.Column("expires_at", Instant),
        sa.Column("reason", Text),
        sa.Column("key_id", Text),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_finding")),
        sa.CheckConstraint(
            "state IN ('open', 'acknowledged', 'accepted', 'cleared')",
            name=op.f("ck_finding_state_known"),
        ),
        sa.CheckConstraint(
            "severity IN ('critical', 'major', 'minor', 'observation')",
            name=op.f("ck_finding_severity_known"),
        ),
        sa.CheckConstraint(
            "worse_is IN ('lower', 'higher')", name=op.f("ck_finding_worse_is_known")
        ),
        sqlite_strict=True,
    )
    op.create_index(
        op.f("ix_finding_identity"), "finding", ["room_id", "rule", "subject_id", "gas"]
    )
    op.create_index(op.f("ix_finding_of_site"), "finding", ["site_id", "state", "severity"])
    op.create_table(
        "finding_version",
        sa.Column("id", Text, nullable=False),
        sa.Column("number", Whole, nullable=False),
        sa.Column("site_id", Text, nullable=False),
        sa.Column("room_id", Text, nullable=False),
        sa.Column("rule", Text, nullable=False),
        sa.Column("family", Text, nullable=False),
        sa.Column("subject_kind", Text, nullable=False),
        sa.Column("subject_id", Text, nullable=False),
        sa.Column("subject_tag", Text),
        sa.Column("gas", Text),
        sa.Column("position", Whole, nullable=False),
        sa.Column("state", Text, nullable=False),
        sa.Column("severity", Text, nullable=False),
        sa.Column("measure", Number),
        sa.Column("limit", Number),
        sa.Column("worse_is", Text, nullable=False),
        sa.Column("statement", Text, nullable=False),
        sa.Column("evidence", Document, nullable=False),
        sa.Column("remedy", Text),
        sa.Column("method", Text, nullable=False),
        sa.Column("source", Text, nullable=False),
        sa.Column("opened_at", Instant, nullable=False),
        sa.Column("changed_at", Instant, nullable=False),
        sa.Column("cleared_at", Instant),
        sa.Column("owner", Text),
        sa.Column("due_on", Text),
        sa.Column("expires_at", Instant),
        sa.Column("reason", Text),
        sa.Column("key_id", Text),
        sa.PrimaryKeyConstraint("id", "number", name=op.f("pk_finding_version")),
        sa.CheckConstraint(
            "state IN ('open', 'acknowledged', 'accepted', 'cleared')",
            name=op.f("ck_finding_version_state_known"),
        ),
        sa.CheckConstraint(
            "severity IN ('critical', 'major', 'minor', 'observation')",
            name=op.f("ck_finding_version_severity_known"),
        ),
        sa.CheckConstraint(
            "worse_is IN ('lower', 'higher')", name=op.f("ck_finding_version_worse_is_known")
        ),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_finding_version_of_room"), "finding_version", ["room_id", "position"])
    op.create_index(op.f("ix_finding_version_of_site"), "finding_version", ["site_id", "position"])
    op.create_table(
        "event",
        sa.Column("id", Text, nullable=False),
        sa.Column("site_id", Text, nullable=False),
        sa.Column("position", Whole, nullable=False),
        sa.Column("number", Whole, nullable=False),
        sa.Column("subject", Text, nullable=False),
        sa.Column("type", Text, nullable=False),
        sa.Column("body", Bytes, nullable=False),
        sa.Column("feed_no", Whole),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_event")),
        sa.UniqueConstraint("feed_no", name=op.f("uq_event_feed_no")),
        sa.UniqueConstraint(
            "site_id", "position", "number", name=op.f("uq_event_site_id_position_number")
        ),
        sqlite_strict=True,
    )
    op.create_index(
        op.f("ix_event_waiting"),
        "event",
        ["site_id"],
        sqlite_where=sa.text("feed_no IS NULL"),
        postgresql_where=sa.text("feed_no IS NULL"),
    )


def _create_access() -> None:
    """Create the tables of keys, kept answers and the installation."""
    op.create_table(
        "key",
        sa.Column("id", Text, nullable=False),
        sa.Column("prefix", Text, nullable=False),
        sa.Column("digest", Text, nullable=False),
        sa.Column("holder", Text, nullable=False),
        sa.Column("role", Text, nullable=False),
        sa.Column("sites", Document),
        sa.Column("created_at", Instant, nullable=False),
        sa.Column("expires_at", Instant),
        sa.Column("revoked_at", Instant),
        sa.Column("last_used_at", Instant),
        sa.Column("replaced_by", Text),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_key")),
        sa.UniqueConstraint("digest", name=op.f("uq_key_digest")),
        sa.UniqueConstraint("prefix", name=op.f("uq_key_prefix")),
        sa.CheckConstraint(
            "role IN ('reader', 'recorder', 'auditor', 'administrator')",
            name=op.f("ck_key_role_known"),
        ),
        sqlite_strict=True,
    )
    op.create_table(
        "answer",
        sa.Column("key_id", Text, nullable=False),
        sa.Column("path", Text, nullable=False),
        sa.Column("token", Text, nullable=False),
        sa.Column("fingerprint", Text, nullable=False),
        sa.Column("status", Whole, nullable=False),
        sa.Column("headers", Document, nullable=False),
        sa.Column("body", Bytes),
        sa.Column("kept_at", Instant, nullable=False),
        sa.PrimaryKeyConstraint("key_id", "path", "token", name=op.f("pk_answer")),
        sqlite_strict=True,
    )
    op.create_index(op.f("ix_answer_kept_at"), "answer", ["kept_at"])
    op.create_table(
        "installation",
        sa.Column("id", Text, nullable=False),
        sa.Column("singleton", Whole, nullable=False),
        sa.Column("lineage", Text, nullable=False),
        sa.Column("secret", Bytes, nullable=False),
        sa.Column("method_version", Text, nullable=False),
        sa.Column("created_at", Instant, nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_installation")),
        sa.UniqueConstraint("singleton", name=op.f("uq_installation_singleton")),
        sa.CheckConstraint("singleton = 1", name=op.f("ck_installation_one_row")),
        sqlite_strict=True,
    )
