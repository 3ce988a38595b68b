"""The catalogue's tables: migrations go up and down and end at the models; SQLite is set up to keep what it is told."""

from datetime import UTC, datetime, timedelta, timezone

import pytest
import sqlalchemy as sa
from alembic import command
from alembic.util import CommandError

from checks.tables import ALL
from flows.catalogue.engine import alembic_config, migrate, open_catalogue, reading, writing
from flows.catalogue.models import EntryRow
from flows.catalogue.results import LISTED, AcquisitionRow
from flows.catalogue.types import Base
from flows.errors import InputError


def table_names(engine):
    return set(sa.inspect(engine).get_table_names())


def test_up_ends_at_the_models_and_down_leaves_nothing(tmp_path):
    engine = open_catalogue(tmp_path)
    migrate(engine)
    assert table_names(engine) == {*Base.metadata.tables, "alembic_version"}
    with engine.connect() as connection:
        command.check(alembic_config(connection))
        command.downgrade(alembic_config(connection), "base")
        connection.commit()
    assert table_names(engine) == {"alembic_version"}
    migrate(engine)
    migrate(engine)
    assert table_names(engine) == {*Base.metadata.tables, "alembic_version"}


def test_a_table_that_strays_from_the_models_is_noticed(tmp_path):
    engine = open_catalogue(tmp_path)
    migrate(engine)
    with engine.connect() as connection:
        connection.execute(sa.text("ALTER TABLE runs ADD COLUMN note TEXT"))
        with pytest.raises(CommandError, match="note"):
            command.check(alembic_config(connection))


def test_an_upgrade_that_fails_half_way_leaves_nothing(tmp_path):
    engine = open_catalogue(tmp_path)
    with writing(engine) as session:
        session.execute(sa.text("CREATE TABLE runs (x INTEGER)"))
    with pytest.raises(sa.exc.OperationalError, match="already exists"):
        migrate(engine)
    assert table_names(engine) == {"runs"}


def test_the_result_tables_hold_the_published_columns():
    models = {model.__tablename__: model for model in (AcquisitionRow, *LISTED)}
    elsewhere = {"version", "received_at", "package_sha256", "protocol_version", "protocol_sha256", "software_version"}
    for schema in ALL:
        if schema.Config.name == "packages":
            continue
        published = set(schema.to_schema().columns) - (elsewhere if schema.Config.name == "acquisitions" else set())
        held = {column.name for column in models[schema.Config.name].__table__.columns} - {"assessment_key", "position"}
        assert held == published, schema.Config.name


def test_sqlite_flushes_every_commit_and_keeps_no_write_ahead_log(tmp_path):
    engine = open_catalogue(tmp_path)
    with engine.connect() as connection:
        found = {name: connection.exec_driver_sql(f"PRAGMA {name}").scalar() for name in ("journal_mode", "synchronous", "foreign_keys")}
    assert found == {"journal_mode": "truncate", "synchronous": 2, "foreign_keys": 1}


def test_instants_come_back_in_utc_and_naive_ones_are_refused(tmp_path):
    engine = open_catalogue(tmp_path)
    migrate(engine)
    lisbon = datetime(2026, 7, 4, 9, 12, 0, 123456, tzinfo=timezone(timedelta(hours=1)))
    row = {"site": "harbour", "package": "p", "status": "new", "received_at": lisbon, "first_seen_at": lisbon}
    with writing(engine) as session:
        session.add(EntryRow(**row))
    with reading(engine) as session:
        found = session.scalars(sa.select(EntryRow)).one().received_at
    assert found == lisbon
    assert found.tzinfo is UTC
    with pytest.raises(sa.exc.StatementError, match="without a time zone"), writing(engine) as session:
        session.add(EntryRow(**row | {"received_at": datetime(2026, 7, 4)}))  # noqa: DTZ001  (what is refused)


def test_a_reader_waits_for_no_writer_and_sees_what_was_committed(tmp_path):
    engine = open_catalogue(tmp_path)
    migrate(engine)
    now = datetime.now(UTC)
    with writing(engine) as writer:
        writer.add(EntryRow(site="harbour", package="p", status="new", first_seen_at=now))
        writer.flush()
        with reading(engine) as reader:
            assert reader.scalars(sa.select(EntryRow)).all() == []
    with reading(engine) as reader:
        assert len(reader.scalars(sa.select(EntryRow)).all()) == 1


def test_a_url_of_no_database_is_refused_in_words(tmp_path):
    for url in ("nonsense", "nosuch+driver://host/name"):
        with pytest.raises(InputError, match="BEATGATE_DATABASE_URL: does not name a database"):
            open_catalogue(tmp_path, url)
