"""What every table of records has, and the names of constraints."""

from collections.abc import Iterable
from datetime import datetime
from typing import Annotated, Any, ClassVar, TypeAlias

from sqlalchemy import CheckConstraint, LargeBinary, MetaData, UniqueConstraint
from sqlalchemy.orm import DeclarativeBase, Mapped, mapped_column

from service.store.types import Document, Flag, Instant, Number, Text, Whole

# Without a name SQLite cannot drop a constraint, so each has one from the first migration on.
NAMES = {
    "pk": "pk_%(table_name)s",
    "fk": "fk_%(table_name)s_%(column_0_N_name)s",
    "uq": "uq_%(table_name)s_%(column_0_N_name)s",
    "ix": "ix_%(table_name)s_%(column_0_N_name)s",
    "ck": "ck_%(table_name)s_%(constraint_name)s",
}

RecordId: TypeAlias = str
"""A UUIDv7 as text; the edge alone knows its form."""
Json = Annotated[Any, mapped_column(Document)]


class Base(DeclarativeBase):
    """The tables: their metadata and which column type a Python type becomes."""

    metadata = MetaData(naming_convention=NAMES)
    type_annotation_map: ClassVar[dict[Any, Any]] = {
        str: Text,
        int: Whole,
        float: Number,
        bool: Flag,
        bytes: LargeBinary,
        datetime: Instant,
    }


class Row(Base):
    """A table of records of one kind."""

    __abstract__ = True

    # The columns of a base class come last otherwise.
    id: Mapped[RecordId] = mapped_column(primary_key=True, sort_order=-10)
    revision: Mapped[int] = mapped_column(sort_order=-9)
    created_at: Mapped[datetime] = mapped_column(sort_order=-8)
    updated_at: Mapped[datetime] = mapped_column(sort_order=-7)
    tag: Mapped[str] = mapped_column(sort_order=-6)
    tag_folded: Mapped[str] = mapped_column(sort_order=-5)
    external_id: Mapped[str | None] = mapped_column(sort_order=-4)
    name: Mapped[str | None] = mapped_column(sort_order=-3)
    notes: Mapped[str | None] = mapped_column(sort_order=-2)
    labels: Mapped[Json] = mapped_column(Document, sort_order=-1)


def record_table(*own: Any) -> tuple[Any, ...]:
    """Return the table arguments of a record: strict on SQLite, and one tag a site and kind.

    The pair of site and id is unique so that a foreign key can name both and never cross sites.
    """
    return (
        UniqueConstraint("site_id", "id"),
        UniqueConstraint("site_id", "tag_folded"),
        UniqueConstraint("site_id", "external_id"),
        CheckConstraint("revision >= 1", name="revision_from_one"),
        *own,
        {"sqlite_strict": True},
    )


def one_of(column: str, allowed: Iterable[str]) -> CheckConstraint:
    """Return the check that a column has one of some words, or nothing."""
    words = ", ".join(f"'{word}'" for word in allowed)
    return CheckConstraint(f"{column} IN ({words})", name=f"{column}_known")


def between(column: str, least: float, most: float) -> CheckConstraint:
    """Return the check that a column lies in a range, ends included, or has nothing."""
    return CheckConstraint(f"{column} >= {least} AND {column} <= {most}", name=f"{column}_in_range")


def not_negative(*columns: str) -> tuple[CheckConstraint, ...]:
    """Return the checks that columns are zero or more, or have nothing."""
    return tuple(
        CheckConstraint(f"{column} >= 0", name=f"{column}_not_negative") for column in columns
    )


def above_zero(*columns: str) -> tuple[CheckConstraint, ...]:
    """Return the checks that columns are above zero, or have nothing."""
    return tuple(
        CheckConstraint(f"{column} > 0", name=f"{column}_above_zero") for column in columns
    )


def a_day(*columns: str) -> tuple[CheckConstraint, ...]:
    """Return the checks that columns have the length of a date, or have nothing."""
    return tuple(
        CheckConstraint(f"length({column}) = 10", name=f"{column}_a_day") for column in columns
    )
