"""The trail only grows, and shows every line that was changed, lost, put in or swapped."""

from datetime import UTC, datetime, timedelta

import pytest
import sqlalchemy as sa

from flows.catalogue import trail
from flows.catalogue.engine import migrate, open_catalogue, reading, writing
from flows.catalogue.models import AuditRow

START = datetime(2026, 3, 5, 4, 15, tzinfo=UTC)


@pytest.fixture
def engine(tmp_path):
    engine = open_catalogue(tmp_path)
    migrate(engine)
    with writing(engine) as session:
        for number in range(6):
            line = trail.Line("package", None, f"new-{number}", "arrived", "a" * 64)
            trail.append(session, line, at=START + timedelta(seconds=number))
    return engine


def broken(engine):
    with reading(engine) as session:
        return trail.broken_lines(session)


def tamper(engine, *statements):
    """Do what someone with a shell can do: take the triggers away and write."""
    with writing(engine) as session:
        session.execute(sa.text("DROP TRIGGER audit_refuses_update"))
        session.execute(sa.text("DROP TRIGGER audit_refuses_delete"))
        for statement in statements:
            session.execute(sa.text(statement))


def test_a_sound_trail_has_no_broken_line(engine):
    assert broken(engine) == []
    with reading(engine) as session:
        assert trail.newest(session, "package") == "new-5"
        assert trail.newest(session, "software") is None


@pytest.mark.parametrize("statement", ["UPDATE audit SET new = 'x' WHERE id = 3", "DELETE FROM audit WHERE id = 6"])
def test_the_database_itself_refuses_to_change_it(engine, statement):
    with pytest.raises(sa.exc.IntegrityError, match="the trail only grows"), writing(engine) as session:
        session.execute(sa.text(statement))


@pytest.mark.parametrize(
    ("statement", "lines"),
    [
        ("UPDATE audit SET new = 'other' WHERE id = 3", [3]),
        ("UPDATE audit SET why = NULL WHERE id = 6", [6]),
        ("UPDATE audit SET at = '2026-03-05 04:15:09.000000' WHERE id = 2", [2]),
        ("DELETE FROM audit WHERE id = 4", [5]),
        ("DELETE FROM audit WHERE id = 1", [2]),
        ("UPDATE audit SET id = CASE id WHEN 3 THEN 30 WHEN 4 THEN 3 ELSE id END WHERE id IN (3, 4)", [3, 30]),
    ],
)
def test_what_was_done_behind_its_back_shows(engine, statement, lines):
    tamper(engine, statement)
    assert broken(engine) == lines


def test_a_line_put_in_with_a_sum_of_its_own_shows(engine):
    with writing(engine) as session:
        trail.append(session, trail.Line("package", new="forged"), at=START)
    tamper(engine, "UPDATE audit SET id = 99 WHERE id = 3", "UPDATE audit SET id = 3 WHERE id = 7")
    assert 3 in broken(engine)


def test_a_line_goes_with_the_transaction_it_tells_of(engine):
    def stopped():
        with writing(engine) as session:
            trail.append(session, trail.Line("package", new="never"), at=START)
            session.execute(sa.text("DELETE FROM audit"))

    with pytest.raises(sa.exc.IntegrityError):
        stopped()
    with reading(engine) as session:
        assert session.scalar(sa.select(sa.func.count()).select_from(AuditRow)) == 6
