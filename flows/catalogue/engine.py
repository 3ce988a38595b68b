"""The catalogue's database: opened, brought up to date, and written by one transaction at a time.

SQLite runs with a rollback journal, not a write-ahead log: versions before 3.51.3 can lose a committed transaction of the log when two
connections write and checkpoint at once (sqlite.org, "WAL-reset bug"; [M]), and current systems still ship those. Every commit is flushed.
"""

from __future__ import annotations

from contextlib import contextmanager
from typing import TYPE_CHECKING

from alembic import command
from alembic.config import Config
from sqlalchemy import Connection, Engine, create_engine, event
from sqlalchemy.engine import make_url
from sqlalchemy.exc import ArgumentError, NoSuchModuleError
from sqlalchemy.orm import Session

from flows.errors import InputError
from flows.intake.durable import make_folder

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterator
    from pathlib import Path

    from sqlalchemy.pool import ConnectionPoolEntry

FILE_NAME = "catalogue.db"
_WAIT_MS = 30_000


def open_catalogue(store: Path, database_url: str | None = None) -> Engine:
    """Return an engine for the catalogue of ``store``: its own SQLite file, or the database of ``database_url``.

    Raises InputError for a URL that names no database this installation can open.
    """
    make_folder(store)
    try:
        url = make_url(database_url or f"sqlite:///{store.absolute() / FILE_NAME}")
        engine = create_engine(url, pool_pre_ping=url.get_backend_name() != "sqlite")
    except (ArgumentError, NoSuchModuleError, ModuleNotFoundError) as failure:
        problem = "does not name a database that can be opened"
        remedy = f"Use a URL like postgresql+psycopg://host/name, with its driver installed ({type(failure).__name__})."
        raise InputError(problem, file="BEATGATE_DATABASE_URL", remedy=remedy) from None
    if engine.dialect.name == "sqlite":
        event.listen(engine, "connect", _set_up_sqlite)
        event.listen(engine, "begin", _begin_sqlite)
    return engine


def migrate(engine: Engine) -> None:
    """Bring the catalogue's tables to this software's newest revision, all or nothing."""
    with engine.connect() as connection:
        command.upgrade(alembic_config(connection), "head")
        connection.commit()


def alembic_config(connection: Connection) -> Config:
    """Return the settings Alembic's commands need for the migrations shipped in this package."""
    config = Config()
    config.set_main_option("script_location", "flows.catalogue:migrations")
    config.set_main_option("path_separator", "os")
    config.attributes["connection"] = connection
    return config


@contextmanager
def writing(engine: Engine) -> Iterator[Session]:
    """Yield a session whose changes are committed together when the block ends, or not at all."""
    with Session(engine) as session, session.begin():
        yield session


@contextmanager
def reading(engine: Engine) -> Iterator[Session]:
    """Yield a session that sees one state of the catalogue and takes no writer's lock."""
    with Session(engine.execution_options(only_reads=True)) as session:
        yield session


def _set_up_sqlite(connection: sqlite3.Connection, _entry: ConnectionPoolEntry) -> None:
    connection.isolation_level = None  # BEGIN is ours, below
    for pragma in (f"busy_timeout={_WAIT_MS}", "journal_mode=TRUNCATE", "synchronous=FULL", "foreign_keys=ON"):
        connection.execute(f"PRAGMA {pragma}")


def _begin_sqlite(connection: Connection) -> None:
    # A writer takes the lock at once and waits for it; taken later, in the middle of a transaction, it could only fail.
    connection.exec_driver_sql("BEGIN" if connection.get_execution_options().get("only_reads") else "BEGIN IMMEDIATE")
