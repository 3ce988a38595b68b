"""What every table of the catalogue shares: instants in UTC, one naming rule for constraints, one type for each kind of value."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import TYPE_CHECKING, ClassVar

from sqlalchemy import DateTime, Double, MetaData, Text
from sqlalchemy.orm import DeclarativeBase
from sqlalchemy.types import TypeDecorator

if TYPE_CHECKING:
    from sqlalchemy.engine import Dialect


class UtcInstant(TypeDecorator[datetime]):
    """An instant, aware and in UTC on every database; SQLite, which keeps no zone, holds it as UTC without one."""

    impl = DateTime(timezone=True)
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Return the instant as the database takes it; raises ValueError for one without a zone."""
        if value is None:
            return None
        if value.tzinfo is None:
            message = "an instant without a time zone cannot be stored"
            raise ValueError(message)
        value = value.astimezone(UTC)
        return value.replace(tzinfo=None) if dialect.name == "sqlite" else value

    def process_result_value(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Return the instant in UTC."""
        del dialect
        if value is None:
            return None
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


class Base(DeclarativeBase):
    """The parent of every table: constraints have names that a migration can rely on."""

    metadata = MetaData(
        naming_convention={
            "pk": "pk_%(table_name)s",
            "fk": "fk_%(table_name)s_%(column_0_N_name)s_%(referred_table_name)s",
            "uq": "uq_%(table_name)s_%(column_0_N_name)s",
            "ix": "ix_%(table_name)s_%(column_0_N_name)s",
            "ck": "ck_%(table_name)s_%(constraint_name)s",
        },
    )
    type_annotation_map: ClassVar = {str: Text(), float: Double(), datetime: UtcInstant()}
