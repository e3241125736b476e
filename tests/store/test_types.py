from datetime import UTC, datetime, timedelta, timezone

import pytest
import sqlalchemy as sa
from sqlalchemy.dialects import postgresql, sqlite
from sqlalchemy.schema import CreateTable

from service.store.tables.registry import METADATA
from service.store.types import Document, Flag, Instant, Number, Text, Whole

OURS = (Text, Number, Whole, Flag, Instant, Document, sa.LargeBinary)
# https://www.sqlite.org/stricttables.html: "INT INTEGER REAL TEXT BLOB ANY".
STRICT = {"INT", "INTEGER", "REAL", "TEXT", "BLOB"}


@pytest.mark.parametrize("table", METADATA.sorted_tables, ids=lambda table: table.name)
def test_tables_use_our_column_types_alone(table):
    for column in table.columns:
        assert type(column.type) in OURS, column
        assert column.type.compile(sqlite.dialect()) in STRICT, column


@pytest.mark.parametrize("table", METADATA.sorted_tables, ids=lambda table: table.name)
def test_tables_are_strict_on_sqlite(table):
    assert "STRICT" in str(CreateTable(table).compile(dialect=sqlite.dialect()))


@pytest.mark.parametrize("table", METADATA.sorted_tables, ids=lambda table: table.name)
def test_every_constraint_has_a_name_of_its_own_that_postgresql_does_not_cut(table):
    prepared = postgresql.dialect().identifier_preparer
    named = [prepared.format_constraint(constraint) for constraint in table.constraints]
    named += [prepared.format_index(index) for index in table.indexes]
    assert None not in named
    assert len(set(named)) == len(named)
    assert all(len(name.encode()) <= 63 for name in named)


@pytest.mark.parametrize(
    ("column_type", "name"),
    [
        (Text(), 'TEXT COLLATE "C"'),
        (Number(), "DOUBLE PRECISION"),
        (Whole(), "BIGINT"),
        (Flag(), "BOOLEAN"),
        (Instant(), "TIMESTAMP WITH TIME ZONE"),
        (Document(), 'TEXT COLLATE "C"'),
    ],
)
def test_types_on_postgresql_have_64_bits_a_zone_and_one_order(column_type, name):
    assert column_type.compile(postgresql.dialect()) == name


@pytest.fixture
def kept(database):
    """Write a value into a column of a type and read it back."""
    database_of_values = sa.MetaData()

    def keep(column_type, value):
        name = f"kept_{type(column_type).__name__.lower()}"
        table = sa.Table(
            name, database_of_values, sa.Column("value", column_type),
            sqlite_strict=True, extend_existing=True,
        )  # fmt: skip
        with database.writing() as connection:
            table.create(connection, checkfirst=True)
            connection.execute(table.delete())
            connection.execute(table.insert(), {"value": value})
            return connection.execute(sa.select(table.c.value)).scalar_one()

    return keep


def test_a_moment_comes_back_in_utc(kept):
    zone = timezone(timedelta(hours=2))
    for moment in (
        datetime(2027, 3, 1, 8, tzinfo=UTC),
        datetime(2027, 3, 1, 8, 0, 0, 1, tzinfo=zone),
        datetime(1, 1, 1, tzinfo=UTC),
        datetime(9999, 12, 31, 23, 59, 59, 999999, tzinfo=UTC),
    ):
        found = kept(Instant(), moment)
        assert found == moment
        assert found.tzinfo is UTC


def test_a_naive_moment_is_refused(kept):
    with pytest.raises(sa.exc.StatementError, match="naive"):
        kept(Instant(), datetime(2027, 3, 1))  # noqa: DTZ001


def test_moments_sort_as_text_on_sqlite():
    text = Instant().process_bind_param
    dialect = sqlite.dialect()
    moments = [datetime(2027, 3, 1, 8, 0, s, us, tzinfo=UTC) for s in (0, 9, 10) for us in (0, 5)]
    assert sorted(text(moment, dialect) for moment in moments) == [
        text(moment, dialect) for moment in moments
    ]
    assert {len(text(moment, dialect)) for moment in moments} == {27}


@pytest.mark.parametrize("value", [True, False, None])
def test_a_flag_comes_back(kept, value):
    assert kept(Flag(), value) is value


def test_a_flag_is_no_number(kept):
    with pytest.raises(sa.exc.StatementError, match="true or false"):
        kept(Flag(), 1)


@pytest.mark.parametrize("value", [0.1 + 0.2, 5e-324, -1.5, 1.7976931348623157e308, 7])
def test_a_number_comes_back_to_the_bit(kept, value):
    found = kept(Number(), value)
    assert isinstance(found, float)
    assert found.hex() == float(value).hex()


@pytest.mark.parametrize("value", [2**63 - 1, -(2**63), 0])
def test_a_whole_number_has_64_bits(kept, value):
    assert kept(Whole(), value) == value


@pytest.mark.parametrize(
    "value", [{"b": 1, "a": [None, True, "ü"]}, [], {}, "text", 1e16, 10**16, False]
)
def test_a_document_comes_back_with_its_types(kept, value):
    found = kept(Document(), value)
    assert found == value
    assert type(found) is type(value)
