"""Tables as bytes: the same bytes for the same table, CSV and Parquet alike, and no text that a spreadsheet would run."""

import csv
import io
from datetime import UTC, datetime, timedelta, timezone

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from flows.publish.files import csv_bytes, instant_text, parquet_bytes, plain_rows
from tests.flows.made_rows import built, package_row, published_rows

FORMULAS = ["=1+1", "+1", "-1", "@SUM(A1)", "\tx", "\rx", "=cmd|' /C calc'!A0"]
HARMLESS = ["H-014", "a=b", "1", "'quoted'", "mm[Hg]", "µ, ; \" '", "'", "first\nsecond", "NaN", "null", "0x1", "TRUE"]


def read_back(text):
    """What a careful reader takes from a CSV cell."""
    rest = text.lstrip("'")
    return text[1:] if text.startswith("'") and rest.startswith(("=", "+", "-", "@", "\t", "\r")) else text


def cells(table):
    return list(csv.reader(io.StringIO(csv_bytes(table).decode(), newline="")))


def with_reasons(reasons):
    return built(published_rows(packages=[package_row(package=f"p{n:03}", reason=reason) for n, reason in enumerate(reasons)]))["packages"]


@pytest.mark.parametrize("reasons", [FORMULAS, HARMLESS, [f"'{text}" for text in FORMULAS], [f"''{text}" for text in FORMULAS + HARMLESS]])
def test_no_cell_starts_a_formula_and_every_text_comes_back(reasons):
    table = with_reasons(reasons)
    found = [row[table.columns.get_loc("reason")] for row in cells(table)[1:]]
    assert not any(text.startswith(("=", "+", "-", "@", "\t", "\r")) for text in found)
    assert [read_back(text) for text in found] == reasons
    assert pq.read_table(pa.BufferReader(parquet_bytes("packages", table)))["reason"].to_pylist() == reasons


def test_harmless_text_and_negative_numbers_are_left_alone():
    assert [row[5] for row in cells(with_reasons(HARMLESS))[1:]] == HARMLESS
    beats = built(published_rows())["beats"]
    assert {row[beats.columns.get_loc("edp_mmhg")] for row in cells(beats)[1:]} == {"-1.5"}


def test_numbers_flags_instants_and_what_is_missing():
    beats = built(published_rows())["beats"]
    header, first, *_ = cells(beats)
    found = dict(zip(header, first, strict=True))
    assert (found["ef"], found["beat"], found["in_window"], found["tau_ms"], found["reasons"]) == (
        "0.30000000000000004",
        "1",
        "false",
        "",
        "",
    )
    assert csv_bytes(beats).count(b"\r") == 0
    assert csv_bytes(beats).endswith(b"\n")


@pytest.mark.parametrize(
    ("instant", "text"),
    [
        (datetime(2026, 3, 4, 9, 12, tzinfo=timezone(timedelta(hours=1))), "2026-03-04T08:12:00Z"),
        (datetime(2026, 3, 4, 8, 12, 0, 250000, tzinfo=UTC), "2026-03-04T08:12:00.250000Z"),
        (datetime(1969, 12, 31, 23, 59, 59, tzinfo=UTC), "1969-12-31T23:59:59Z"),
    ],
)
def test_instants_are_utc(instant, text):
    assert instant_text(instant) == text


def test_parquet_holds_the_contract_and_nothing_of_this_machine():
    for name, table in built(published_rows()).items():
        content = parquet_bytes(name, table)
        assert content == parquet_bytes(name, table.copy())
        schema = pq.read_schema(pa.BufferReader(content))
        assert schema.metadata == {b"contract": b"1", b"table": name.encode()}
        assert schema.names == list(table.columns)
        assert pq.ParquetFile(pa.BufferReader(content)).metadata.num_rows == len(table)


def test_an_empty_table_keeps_its_columns_and_types():
    empty = built({table: [] for table in published_rows()})["beats"]
    assert cells(empty) == [list(empty.columns)]
    schema = pq.read_schema(pa.BufferReader(parquet_bytes("beats", empty)))
    types = {name: schema.field(name).type for name in ("beat", "in_window", "tau_ms")}
    assert types == {"beat": pa.int64(), "in_window": pa.bool_(), "tau_ms": pa.float64()}


def test_plain_rows_are_pythons_own_types():
    (row,) = plain_rows(built(published_rows())["packages"])
    assert row == package_row()
    assert type(row["version"]) is int
    assert type(row["received_at"]) is datetime
    beat = plain_rows(built(published_rows())["beats"])[0]
    assert (beat["tau_ms"], beat["in_window"], type(beat["edv_ml"])) == (None, False, float)
    assert plain_rows(pd.DataFrame({"a": pd.Series([], dtype="float64")})) == []
