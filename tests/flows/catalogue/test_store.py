"""What the catalogue is told, twice or once, is the same; what it answers is what is in force."""

from datetime import UTC, datetime, timedelta

import numpy as np
import pytest
import sqlalchemy as sa

from flows.catalogue import lookups, store
from flows.catalogue.basis import Basis, revisions_sha256
from flows.catalogue.engine import migrate, open_catalogue, reading, writing
from flows.catalogue.models import AuditRow, NightRow
from flows.catalogue.outcome import Found, Refused, Trouble
from flows.catalogue.types import Base
from flows.intake.register import Entry
from tests.flows.made_rows import found_rows

NOW = datetime(2026, 3, 5, 4, 15, tzinfo=UTC)
BASIS = Basis("1", "b" * 64, revisions_sha256({"flat-line": 1}), "0.1.0")


@pytest.fixture
def engine(tmp_path):
    engine = open_catalogue(tmp_path)
    migrate(engine)
    return engine


def entry(package, letter, version=1, status="new", **values):
    row = {
        "site": "harbour",
        "package": package,
        "acquisition": "H-1-baseline",
        "version": version,
        "status": status,
        "reason": "",
        "received_at": NOW + timedelta(days=version or 0),
        "package_sha256": letter * 64 if letter else None,
    }
    return Entry(**row | values)


def found(**values):
    rows = found_rows(**values)
    acquisition = rows.pop("acquisition")
    return Found(acquisition, rows, b"", "2026-03-04T09:12:00+01:00")


def dump(engine):
    """Every row of every table but the trail and the nights, without what the machine's clock says."""
    clocks = {"first_seen_at", "assessed_at", "published_at", "id"}
    with engine.connect() as connection:
        return {
            name: sorted(
                str({column: value for column, value in row._mapping.items() if column not in clocks})
                for row in connection.execute(table.select())
            )
            for name, table in Base.metadata.tables.items()
            if name not in {"audit", "nights"}
        }


def trail_of(engine, what):
    with reading(engine) as session:
        rows = session.scalars(sa.select(AuditRow).where(AuditRow.what == what).order_by(AuditRow.id))
        return [(row.old, row.new, row.why) for row in rows]


def put(engine, *entries, outcome=None, basis=BASIS, at=NOW):
    with writing(engine) as session:
        store.put_entries(session, entries, at=at)
        for one in entries:
            if one.version and outcome is not None:
                store.put_assessment(session, one.site, one.package_sha256, basis, outcome, at=at)


def test_the_same_told_twice_is_told_once(engine):
    put(engine, entry("up-1", "a"), outcome=found())
    once, lines = dump(engine), trail_of(engine, "package")
    put(engine, entry("up-1", "a"), outcome=found(), at=NOW + timedelta(days=1))
    assert dump(engine) == once
    assert trail_of(engine, "package") == lines == [(None, "new", None)]


def test_a_current_version_has_the_status_its_assessment_gave_it(engine):
    put(engine, entry("up-1", "a"), outcome=found(verdict="queried"))
    with reading(engine) as session:
        packages = lookups.columns(session, BASIS, "packages")
        acquisitions = lookups.columns(session, BASIS, "acquisitions")
        beats = lookups.columns(session, BASIS, "beats")
    assert packages["status"] == ["queried"]
    assert acquisitions["version"] == [1]
    assert acquisitions["received_at"] == [NOW + timedelta(days=1)]
    assert acquisitions["protocol_sha256"] == ["b" * 64]
    assert len(beats["beat"]) == 8


def test_tables_hold_the_newest_version_only(engine):
    put(engine, entry("up-1", "a"), outcome=found())
    put(engine, entry("up-1", "a", 1, "superseded", reason="version 2 came after it"), entry("up-2", "c", 2), outcome=found(rejected=()))
    with reading(engine) as session:
        packages = lookups.columns(session, BASIS, "packages")
        acquisitions = lookups.columns(session, BASIS, "acquisitions")
        rejections = lookups.columns(session, BASIS, "rejections")
    assert sorted(zip(packages["package"], packages["status"], strict=True)) == [("up-1", "superseded"), ("up-2", "accepted")]
    assert (acquisitions["version"], acquisitions["package_sha256"]) == ([2], ["c" * 64])
    assert rejections["check"] == []


def test_another_basis_is_another_assessment_and_the_old_one_stays(engine):
    put(engine, entry("up-1", "a"), outcome=found())
    newer = Basis("2", "d" * 64, BASIS.revisions_sha256, BASIS.software_version)
    put(engine, entry("up-1", "a"), outcome=found(verdict="rejected"), basis=newer, at=NOW + timedelta(days=1))
    with reading(engine) as session:
        verdicts = [lookups.columns(session, basis, "acquisitions")["verdict"] for basis in (BASIS, newer)]
    assert verdicts == [["accepted"], ["rejected"]]
    assert trail_of(engine, "assessment") == [(None, "accepted", None), ("accepted", "rejected", None)]


@pytest.mark.parametrize("part", ["protocol_sha256", "revisions_sha256", "software_version"])
def test_each_part_of_the_basis_makes_another_key(part):
    other = Basis(**{name: getattr(BASIS, name) for name in BASIS.__slots__} | {part: "e" * 64})
    assert other.key("harbour", "a" * 64) != BASIS.key("harbour", "a" * 64)
    assert BASIS.key("mill", "a" * 64) != BASIS.key("harbour", "a" * 64)
    assert BASIS.key("harbour", "c" * 64) != BASIS.key("harbour", "a" * 64)


def test_the_sum_of_revisions_does_not_depend_on_order():
    assert revisions_sha256({"a": 1, "b": 2}) == revisions_sha256({"b": 2, "a": 1}) != revisions_sha256({"a": 2, "b": 1})


def test_a_package_the_program_could_not_assess_is_quarantined_with_the_reason_and_supersedes(engine):
    outcome = Refused(Trouble.TIME_OUT, "the program could not assess this package within 2 s")
    put(engine, entry("up-1", "a"), outcome=outcome)
    with reading(engine) as session:
        packages = lookups.columns(session, BASIS, "packages")
        assert lookups.columns(session, BASIS, "acquisitions")["acquisition"] == []
        assert lookups.known_entries(session) == [entry("up-1", "a")]
    assert (packages["status"], packages["reason"], packages["version"]) == (["quarantined"], [outcome.reason], [1])


def test_what_an_assessment_refused_is_known_as_new_and_what_the_intake_refused_is_not(engine):
    put(engine, entry("up-1", "a"), outcome=Refused(Trouble.INPUT, "rest-1.csv: is empty."))
    refused = entry("up-1", "a", None, "quarantined", reason="rest-1.csv: is empty.")
    taken = entry("up-2", "c", None, "quarantined", reason="the name is taken")
    with writing(engine) as session:
        store.put_entries(session, [refused, taken], at=NOW)
    with reading(engine) as session:
        known = {one.package: (one.status, one.reason) for one in lookups.known_entries(session)}
    assert known == {"up-1": ("new", ""), "up-2": ("quarantined", "the name is taken")}


def test_an_entry_without_content_goes_when_the_inbox_changes(engine):
    waiting = entry("up-1", "", None, "waiting", acquisition=None, received_at=None)
    put(engine, waiting)
    put(engine)
    with reading(engine) as session:
        assert lookups.known_entries(session) == []
    assert trail_of(engine, "package") == [(None, "waiting", None), ("waiting", None, "left the inbox")]


def test_cells_lose_their_kinds_of_missing_and_their_array_types(engine):
    outcome = found()
    outcome.rows["beats"][0] |= {"tau_ms": np.float64("nan"), "edv_ml": np.float64(121.5), "beat": np.int64(1), "reasons": ""}
    put(engine, entry("up-1", "a"), outcome=outcome)
    with reading(engine) as session:
        beats = lookups.columns(session, BASIS, "beats")
    (place,) = [n for n, run in enumerate(beats["run"]) if run == "rest-1" and beats["beat"][n] == 1]
    assert (beats["tau_ms"][place], beats["edv_ml"][place], beats["reasons"][place]) == (None, 121.5, None)


@pytest.mark.parametrize("sabotage", ["lost", "added", "table"])
def test_rows_of_the_wrong_shape_are_refused_and_nothing_is_kept(engine, sabotage):
    outcome = found()
    if sabotage == "lost":
        del outcome.rows["beats"][3]["tau_ms"]
    elif sabotage == "added":
        outcome.acquisition["mood"] = "good"
    else:
        outcome.rows["loops"] = []
    with pytest.raises(ValueError, match=r"tau_ms|mood|loops"):
        put(engine, entry("up-1", "a"), outcome=outcome)
    assert not any(dump(engine).values())


def test_the_basis_enters_the_trail_once_and_each_change_of_it(engine):
    newer = Basis("2", "d" * 64, BASIS.revisions_sha256, "0.2.0")
    for basis in (BASIS, BASIS, newer, BASIS):
        with writing(engine) as session:
            store.put_basis(session, basis, at=NOW)
    assert [(old, new) for old, new, _ in trail_of(engine, "software")] == [(None, "0.1.0"), ("0.1.0", "0.2.0"), ("0.2.0", "0.1.0")]
    assert len(trail_of(engine, "protocol")) == 3
    assert len(trail_of(engine, "revisions of checks and indices")) == 1


def test_a_release_is_recorded_when_it_is_not_the_newest_one(engine):
    for name in ("one", "one", "two", "one"):
        with writing(engine) as session:
            store.put_release(session, name, "f" * 64, at=NOW)
    assert [(old, new) for old, new, _ in trail_of(engine, "published/latest")] == [(None, "one"), ("one", "two"), ("two", "one")]


def test_a_night_that_never_ended_is_closed_by_the_next(engine):
    with writing(engine) as session:
        dead = store.begin_night(session, 11, at=NOW)
    with writing(engine) as session:
        alive = store.begin_night(session, 12, at=NOW)
        store.end_night(session, alive, "finished", at=NOW, release="one")
    with reading(engine) as session:
        assert {row.id: row.status for row in session.scalars(sa.select(NightRow))} == {dead: "crashed", alive: "finished"}
