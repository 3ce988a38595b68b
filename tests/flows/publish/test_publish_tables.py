"""Tables from plain rows: order, types, and what a broken cell is called."""

import pytest

from flows.publish.dictionary import dictionary, dictionary_text
from flows.publish.refusal import GateRefused
from flows.publish.tables import foreign_keys, primary_key, schemas
from tests.flows.made_rows import built, found_rows, published_rows


def test_the_order_of_rows_does_not_matter():
    rows = published_rows()
    shuffled = {table: [*some[1::2], *reversed(some[::2])] for table, some in rows.items()}
    for name, table in built(rows).items():
        assert table.equals(built(shuffled)[name])
        keys = [tuple(map(str, key)) for key in table[primary_key(name)].astype(object).fillna("").itertuples(index=False)]
        assert keys == sorted(keys)


def test_rows_without_a_run_come_before_those_with_one():
    indices = built(published_rows())["indices"]
    assert indices["run"].astype(object).where(indices["run"].notna(), None).tolist() == [None, None, "rest-1"]


@pytest.mark.parametrize(
    ("table", "values", "words"),
    [
        ("beats", {"beat": None}, "beats: beat breaks"),
        ("acquisitions", {"verdict": "maybe"}, "acquisitions: verdict breaks isin(['accepted', 'queried', 'rejected']) with 'maybe'"),
        ("rejections", {"decisive": None}, "rejections: decisive breaks"),
        ("indices", {"value": float("inf")}, "indices: value breaks less_than(inf) with 'inf' in acquisition H-1-baseline, stage rest"),
        ("runs", {"sampling_rate_hz": -1.0}, "runs: sampling_rate_hz breaks greater_than_or_equal_to(0.0) with '-1.0'"),
    ],
)
def test_a_broken_cell_is_named_with_its_row(table, values, words):
    rows = published_rows()
    rows[table] = [rows[table][0] | values, *rows[table][1:]]
    with pytest.raises(GateRefused) as caught:
        built(rows)
    assert any(problem.startswith(words) for problem in caught.value.problems), caught.value.problems


def test_many_broken_cells_are_cut_short():
    found = found_rows()
    for beat in found["beats"]:
        beat["verdict"] = "maybe"
    for beat in found["beats"] * 3:
        found["beats"].append(beat | {"beat": beat["beat"] + 100})
    with pytest.raises(GateRefused) as caught:
        built(published_rows(found))
    assert len(caught.value.problems) == 10


def test_the_dictionary_says_of_every_column_what_the_schema_says():
    tables = {table["name"]: table for table in dictionary()["tables"]}
    assert list(tables) == list(schemas())
    for name, table in tables.items():
        assert [column["name"] for column in table["columns"]] == list(schemas()[name].to_schema().columns)
        assert table["primary_key"] == primary_key(name)
        assert table["foreign_keys"] == foreign_keys(name)
        assert all(column["meaning"] for column in table["columns"])
    beats = {column["name"]: column for column in tables["beats"]["columns"]}
    assert beats["sw_mmhg_ml"]["unit"] == "mm[Hg].mL"
    assert beats["beat"] == {
        "name": "beat",
        "type": "whole number",
        "unit": None,
        "meaning": "counts the beats of a run from 1",
        "may_be_missing": False,
    }
    assert beats["verdict"]["among"] == ["accepted", "rejected"]
    assert dictionary_text() == dictionary_text()
