"""How Alembic runs the migrations: on the connection it is given, one transaction each."""

from typing import Any

from alembic import context


def _refuse_dangling(*, ctx: Any, **_: Any) -> None:
    # Foreign keys are off while SQLite copies tables. What does not fit then fails the migration.
    connection = ctx.connection
    if connection.dialect.name == "sqlite":
        dangling = connection.exec_driver_sql("PRAGMA foreign_key_check").fetchall()
        if dangling:
            raise RuntimeError(f"Rows refer to what is not there: {dangling[:10]}")


connection = context.config.attributes.get("connection")
if connection is None:
    raise SystemExit("Migrations run on a connection: use `rimeward migrate`.")
context.configure(
    connection=connection,
    target_metadata=None,
    render_as_batch=True,
    transaction_per_migration=True,
    # Alembic takes SQLite for a database that cannot roll DDL back. It can, given a BEGIN.
    transactional_ddl=True,
    on_version_apply=_refuse_dangling,  # type: ignore[arg-type]  # it is called by keyword
)
with context.begin_transaction():
    context.run_migrations()
