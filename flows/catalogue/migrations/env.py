"""Alembic's entry: it runs the migrations on the connection that `flows.catalogue.engine` hands over."""

from __future__ import annotations

from typing import Any, Literal

from alembic import context
from sqlalchemy import Connection

from flows.catalogue import models, results  # noqa: F401  (they register their tables)
from flows.catalogue.types import Base, UtcInstant


def _as_plain_type(kind: str, value: Any, _context: Any) -> str | Literal[False]:  # noqa: ANN401  (Alembic's own signature)
    """Write our instants into migrations as the plain type beneath, so that a migration outlives our code."""
    return "sa.DateTime(timezone=True)" if kind == "type" and isinstance(value, UtcInstant) else False


def _run() -> None:
    connection = context.config.attributes["connection"]
    assert isinstance(connection, Connection)
    context.configure(
        connection=connection,
        target_metadata=Base.metadata,
        render_as_batch=True,
        compare_type=True,
        compare_server_default=True,
        transactional_ddl=True,
        render_item=_as_plain_type,
    )
    with context.begin_transaction():
        context.run_migrations()


_run()
