"""What all tables share: names of constraints, times in UTC, references that restrict."""

from collections.abc import Iterable
from datetime import UTC, datetime
from typing import Any

from sqlalchemy import (
    JSON,
    CheckConstraint,
    DateTime,
    Dialect,
    Double,
    ForeignKey,
    MetaData,
    TypeDecorator,
    UniqueConstraint,
)
from sqlalchemy.orm import DeclarativeBase, MappedColumn, mapped_column
from sqlalchemy.schema import Index

from calib.errors import StoreError

NAMES_OF_CONSTRAINTS = {
    "pk": "pk_%(table_name)s",
    "uq": "uq_%(table_name)s_%(column_0_N_name)s",
    "ck": "ck_%(table_name)s_%(constraint_name)s",
    "ix": "ix_%(table_name)s_%(column_0_N_name)s",
    "fk": "fk_%(table_name)s_%(column_0_N_name)s",
}


class UtcDateTime(TypeDecorator[datetime]):
    """A moment in UTC; a time without an offset is refused, never guessed."""

    impl = DateTime(timezone=True)
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Turn an aware time into UTC."""
        if value is None:
            return None
        if value.tzinfo is None:
            raise StoreError(f"the time {value.isoformat()} has no offset from UTC; state its time zone")
        return value.astimezone(UTC)

    def process_result_value(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Say of a stored time that it is UTC (SQLite keeps no offset)."""
        if value is None:
            return None
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


# None in a JSON column is a missing value like any other, not the word "null".
_FINITE_JSON = JSON(none_as_null=True)


class Base(DeclarativeBase):
    """Base of all tables of the store."""

    metadata = MetaData(naming_convention=NAMES_OF_CONSTRAINTS)
    type_annotation_map = {  # noqa: RUF012 - SQLAlchemy's own name, read once per class
        datetime: UtcDateTime,
        float: Double,
        dict[str, Any]: _FINITE_JSON,
        list[Any]: _FINITE_JSON,
    }


def evidence(*constraints: CheckConstraint | UniqueConstraint | Index) -> tuple[Any, ...]:
    """Arguments of an evidence table; SQLite never hands out a number twice."""
    return (*constraints, {"sqlite_autoincrement": True})


def one_of(column: str, words: Iterable[str]) -> CheckConstraint:
    """Constrain a column to a closed set of words."""
    listed = ", ".join(f"'{word}'" for word in words)
    return CheckConstraint(f'"{column}" IN ({listed})', name=column)


def refers_to(table: str) -> MappedColumn[Any]:
    """Column that names a row of another table, which then cannot go away."""
    return mapped_column(ForeignKey(f"{table}.id", ondelete="RESTRICT"), index=True)


def superseded_row(table: str) -> MappedColumn[Any]:
    """Column that names the row of the same table this one replaces; each is replaced once."""
    return mapped_column(ForeignKey(f"{table}.id", ondelete="RESTRICT"), unique=True)
