"""The column types: six of our own, alike on both databases, and LargeBinary for bytes.

A STRICT table of SQLite takes INTEGER, REAL, TEXT and BLOB alone, and most of SQLAlchemy's own
types render another name there. On PostgreSQL text is compared by code point, as SQLite does it,
so that a page begins and ends at the same record on both.
"""

import json
from datetime import UTC, datetime
from math import isfinite
from typing import Any

import sqlalchemy as sa
from sqlalchemy.dialects import postgresql
from sqlalchemy.engine import Dialect
from sqlalchemy.types import TypeDecorator, TypeEngine

from service.clock import moment_of, text_of
from service.store.records import canonical


def _on_sqlite(dialect: Dialect) -> bool:
    return dialect.name == "sqlite"


class Text(TypeDecorator[str]):
    """Text of any length."""

    impl = sa.Text
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Sort by code point on PostgreSQL, whatever the locale of the database."""
        return sa.Text() if _on_sqlite(dialect) else sa.Text(collation="C")


class Number(TypeDecorator[float]):
    """A float of 64 bits; a whole number comes back as a float."""

    impl = sa.Double
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Use the name that a STRICT table takes on SQLite."""
        return sa.REAL() if _on_sqlite(dialect) else sa.Double()

    def process_bind_param(self, value: float | None, dialect: Dialect) -> float | None:
        """Refuse NaN, which SQLite would keep as nothing, and infinity."""
        if value is not None and not isfinite(value):
            raise ValueError("A number that is not finite cannot be kept.")
        return value


class Whole(TypeDecorator[int]):
    """A whole number of 64 bits."""

    impl = sa.BigInteger
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Use the name that a STRICT table takes on SQLite, which has 64 bits there too."""
        return sa.Integer() if _on_sqlite(dialect) else sa.BigInteger()


class Flag(TypeDecorator[bool]):
    """Yes or no."""

    impl = sa.Boolean
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Keep 0 and 1 on SQLite."""
        return sa.Integer() if _on_sqlite(dialect) else sa.Boolean()

    def process_bind_param(self, value: bool | None, dialect: Dialect) -> bool | int | None:
        """Refuse what is no flag: 2 would be true on one database and an error on the other."""
        if value is not None and not isinstance(value, bool):
            raise TypeError(f"A flag is true or false, not {type(value).__name__}.")
        return value if value is None or not _on_sqlite(dialect) else int(value)

    def process_result_value(self, value: Any, dialect: Dialect) -> bool | None:
        """Give the flag back."""
        return None if value is None else bool(value)


class Instant(TypeDecorator[datetime]):
    """A moment in UTC; SQLite keeps it as text of fixed width, which sorts as time does."""

    impl = sa.DateTime(timezone=True)
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Keep text on SQLite, which has no type for time and drops zones."""
        return sa.Text() if _on_sqlite(dialect) else postgresql.TIMESTAMP(timezone=True)

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> str | datetime | None:
        """Refuse a moment without a zone."""
        if value is None:
            return None
        text = text_of(value)
        return text if _on_sqlite(dialect) else value.astimezone(UTC)

    def process_result_value(self, value: Any, dialect: Dialect) -> datetime | None:
        """Give the moment back, aware and in UTC."""
        if value is None:
            return None
        moment: datetime = moment_of(value) if isinstance(value, str) else value
        return moment.astimezone(UTC)


class Document(TypeDecorator[Any]):
    """A JSON value; the order of its keys means nothing."""

    # Text on both: jsonb would read 1e16 back as a whole number and lose the sign of -0.0.
    impl = sa.Text
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Keep text, as for the text type."""
        return sa.Text() if _on_sqlite(dialect) else sa.Text(collation="C")

    def process_bind_param(self, value: Any, dialect: Dialect) -> str | None:
        """Write canonical JSON; nothing stays null."""
        return None if value is None else canonical(value).decode()

    def process_result_value(self, value: str | None, dialect: Dialect) -> Any:
        """Read the JSON back."""
        return None if value is None else json.loads(value)
