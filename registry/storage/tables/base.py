"""Ground for all tables: constraint names, keys, and moments in UTC."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Annotated, Any, ClassVar

from sqlalchemy import JSON, BigInteger, DateTime, Dialect, Integer, MetaData, String, Text
from sqlalchemy.orm import DeclarativeBase, mapped_column
from sqlalchemy.types import TypeDecorator

# Names are derived, never left to the database, so that the migration, the models
# and both databases call every constraint the same.
NAMES = {
    "ix": "ix_%(table_name)s_%(column_0_N_name)s",
    "uq": "uq_%(table_name)s_%(column_0_N_name)s",
    "ck": "ck_%(table_name)s_%(constraint_name)s",
    "fk": "fk_%(table_name)s_%(column_0_N_name)s",
    "pk": "pk_%(table_name)s",
}


class Moment(TypeDecorator[datetime]):
    """A point in time, always aware and in UTC; SQLite keeps no zone, so it is put back here."""

    impl = DateTime(timezone=True)
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Refuse a moment without a zone: guessing one would move a trial by hours."""
        if value is None:
            return None
        if value.tzinfo is None:
            raise ValueError(f"a moment needs a time zone, {value!r} has none")
        utc = value.astimezone(UTC)
        return utc.replace(tzinfo=None) if dialect.name == "sqlite" else utc

    def process_result_value(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Give the moment back in UTC."""
        if value is None:
            return None
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


# SQLite numbers rows by itself only for a key typed INTEGER, which is 64 bits wide there anyway.
BigKey = BigInteger().with_variant(Integer, "sqlite")

Id = Annotated[int, mapped_column(BigKey, primary_key=True)]
Big = Annotated[int, mapped_column(BigInteger)]
Code = Annotated[str, mapped_column(String(20))]
Hash = Annotated[str, mapped_column(String(64))]
Name = Annotated[str, mapped_column(String(200))]
Decimals = Annotated[str, mapped_column(String(60))]
Long = Annotated[str, mapped_column(Text)]


class Base(DeclarativeBase):
    """Every table of the registry."""

    metadata = MetaData(naming_convention=NAMES)
    type_annotation_map: ClassVar[dict[Any, Any]] = {
        int: BigKey,
        datetime: Moment,
        dict[str, Any]: JSON,
        list[Any]: JSON,
    }


def one_of(column: str, *codes: str) -> str:
    """Write SQL that holds a column to its codes (our own constants, never user text)."""
    return f"{column} IN ({', '.join(repr(code) for code in codes)})"
