"""By which index SQLite finds what a function asks for; PostgreSQL plans by its rows."""

import pytest
import sqlalchemy as sa

ON_SQLITE = pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)


def plan_of(connection, ask):
    """Give each step of the queries that a function sends."""
    sent = []

    def note(_connection, _cursor, statement, parameters, _context, _many):
        if statement.startswith("SELECT"):
            sent.append((statement, parameters))

    sa.event.listen(connection, "before_cursor_execute", note)
    ask()
    sa.event.remove(connection, "before_cursor_execute", note)
    assert sent
    return [
        row[3]
        for statement, values in sent
        for row in connection.exec_driver_sql(f"EXPLAIN QUERY PLAN {statement}", values)
    ]
