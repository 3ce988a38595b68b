"""The gate: which broken promise it finds, and that a crashed test is not mistaken for bad data."""

import dataclasses

import pytest

from flows.publish import gate, promises
from tests.flows.made_rows import built, found_rows, package_row, published_rows


def broken(rows):
    """The (table, promise) pairs that the gate finds broken, with the number of rows it names."""
    return {(one.table, one.promise): one.failing for one in gate.answers(built(rows)) if not one.kept}


def only(monkeypatch, table, sentence):
    """Let the gate test one promise alone: the engine takes some 30 ms for each."""
    every = promises.promises
    monkeypatch.setattr(gate, "promises", lambda tables: [one for one in every(tables) if (one.table, one.sentence) == (table, sentence)])


def changed(rows, table, position, **values):
    """The rows with some values of one row replaced."""
    copy = [dict(row) for row in rows[table]]
    copy[position] |= values
    return rows | {table: copy}


def test_sound_tables_keep_every_promise():
    results = gate.answers(built(published_rows()))
    assert [one.problem() for one in results if not one.kept] == []
    assert {one.table for one in results} == {"packages", "acquisitions", "runs", "beats", "rejections", "indices", "changes"}
    assert sum(one.rows > 0 for one in results) > 20


def test_empty_tables_keep_every_promise():
    empty = {table: [] for table in published_rows()}
    assert broken(empty) == {}


@pytest.mark.parametrize(
    ("table", "position", "values", "promise"),
    [
        ("beats", 1, {"beat": 1}, "acquisition, run, beat name one row"),
        ("indices", 1, {"run": None}, "acquisition, stage, run, index, estimator name one row"),
        ("runs", 0, {"acquisition": "ghost"}, "acquisition stand in acquisitions"),
        ("beats", 0, {"run": "ghost"}, "acquisition, run stand in runs"),
        ("rejections", 0, {"beat": 99}, "acquisition, run, beat stand in beats"),
        ("acquisitions", 0, {"package_sha256": "c" * 64}, "package_sha256 stand in packages"),
        ("runs", 0, {"beats": 5}, "beats are the accepted and the rejected rows of beats"),
        ("runs", 0, {"beats_accepted": 4}, "beats_accepted are the accepted rows of beats"),
        ("acquisitions", 0, {"beats": 9}, "beats are the sum over its runs"),
        ("acquisitions", 0, {"runs": 3}, "runs are its rows of runs"),
        ("packages", 0, {"status": "queried"}, "status is the verdict of the acquisition, and each has one"),
        ("packages", 0, {"status": "seen again"}, "every content stands once outside seen again"),
        ("indices", 1, {"primary": True}, "one row of an acquisition, stage and index is primary"),
        ("indices", 0, {"primary": False}, "one row of an acquisition, stage and index is primary"),
        ("indices", 0, {"value": None}, "a published value has a value"),
        ("indices", 0, {"value": float("nan")}, "a published value has a value"),
        ("indices", 0, {"unit": None}, "a published value has a unit"),
        ("indices", 0, {"ci_low": 121.0}, "ci_low is not above value"),
        ("indices", 0, {"fit_ci_high": 120.0}, "value is not above fit_ci_high"),
        ("indices", 2, {"value": 1.5}, "a withheld value has no value"),
        ("indices", 2, {"ci_low": 1.5}, "a withheld value has no ci_low"),
        ("indices", 2, {"reason": None}, "a withheld value has a reason"),
        ("beats", 2, {"reasons": None}, "a rejected beat names a reason"),
    ],
)
def test_each_broken_promise_is_found_and_its_row_named(monkeypatch, table, position, values, promise):
    only(monkeypatch, table, promise)
    found = broken(changed(published_rows(), table, position, **values))
    assert found[table, promise] >= 1


def test_a_content_counted_twice_is_found_and_one_seen_again_is_not_counted(monkeypatch):
    only(monkeypatch, "packages", "every content stands once outside seen again")
    for status, expected in (("accepted", 1), ("superseded", 1), ("seen again", 0)):
        twice = [package_row(), package_row(package="up-2", status=status)]
        assert sum(broken(published_rows(packages=twice)).values()) == expected


def test_the_problem_names_rows_and_stops_at_ten(monkeypatch):
    only(monkeypatch, "beats", "acquisition, run, beat name one row")
    found = found_rows(rejected=())
    rows = published_rows(found=found)
    rows["beats"] = [row | {"beat": 1} for row in rows["beats"]]
    (problem,) = [one.problem() for one in gate.answers(built(rows))]
    assert problem.startswith("beats: 8 of 8 rows break")
    assert "acquisition H-1-baseline, run rest-1, beat 1" in problem
    long = gate.Answer("beats", "p", 30, 12, tuple("abcdefghij"))
    assert long.problem().endswith("and 2 more")


def test_a_test_that_crashes_is_told_from_data_that_failed(monkeypatch):
    def sabotaged(tables):
        (first, *_) = sound(tables)
        yield dataclasses.replace(first, expectation="ExpectColumnValuesToBeUnique", arguments={"column": "no_such_column"})
        yield dataclasses.replace(first, expectation="NoSuchExpectation")

    sound = promises.promises
    monkeypatch.setattr(gate, "promises", sabotaged)
    for one in gate.answers(built(published_rows())):
        assert not one.kept
        assert one.failing == 0
        assert one.crashed
        assert "did not run" in one.problem()


def test_an_engine_that_disagrees_with_the_mask_lets_nothing_pass(monkeypatch):
    sound = promises.promises
    monkeypatch.setattr(gate, "promises", lambda tables: [dataclasses.replace(one, broken=~one.broken) for one in sound(tables)][:1])
    (one,) = gate.answers(built(published_rows()))
    assert not one.kept
    assert "the engine says kept, the mask marks 1 rows" in one.problem()
