"""Numbers come back as they were written; anything else is named by file, line and column with a remedy."""

import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from flows.errors import InputError
from flows.sources.csv_file import read_columns


@pytest.fixture
def written(tmp_path):
    def write(content):
        path = tmp_path / "rest-1.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write


def read(path, *wanted, optional=()):
    return read_columns(path, "rest-1.csv", wanted, optional)


def refusal(path, *wanted):
    with pytest.raises(InputError) as caught:
        read(path, *wanted)
    assert caught.value.file == "rest-1.csv"
    assert caught.value.remedy
    return caught.value


@pytest.mark.parametrize(
    "content",
    [
        pytest.param("t,p\n0,1.5\n0.1,-2e1\n", id="plain"),
        pytest.param("t,p\r\n0,1.5\r\n0.1,-2e1\r\n", id="crlf"),
        pytest.param("t,p\r0,1.5\r0.1,-2e1\r", id="cr"),
        pytest.param("t,p\n0,1.5\n0.1,-2e1", id="no-last-line-end"),
        pytest.param("t,p\n0,1.5\n0.1,-2e1\n\n\r\n\n", id="empty-lines-at-the-end"),
        pytest.param("t,p\n0,1.5\n0.1,-2e1\n,\n,\n", id="empty-cells-at-the-end"),
        pytest.param("\ufefft,p\n0,1.5\n0.1,-2e1\n", id="byte-order-mark"),
        pytest.param('"t","p"\n"0","1.5"\n"0.1","-2e1"\n', id="quoted"),
        pytest.param(" t , p \n 0 , 1.5 \n 0.1 , -2e1 \n", id="blanks"),
        pytest.param("x,t,p\nsome text,0,+1.5\n,0.1,-20\n", id="text-in-another-column"),
        pytest.param("t,p,\n0,1.5,\n0.1,-20.,\n", id="nameless-column"),
        pytest.param("p,t\n1.5,0\n-20,.1\n", id="other-order"),
    ],
)
def test_numbers_are_read_however_csv_is_written(written, content):
    found = read(written(content), "t", "p")
    np.testing.assert_array_equal(found["t"], [0.0, 0.1])
    np.testing.assert_array_equal(found["p"], [1.5, -20.0])
    assert found["p"].dtype == np.float64


def test_an_empty_cell_and_nan_are_missing_samples(written):
    found = read(written("t,p\n0,\n1,NaN\n2,nan\n3,4\n"), "p", "t")
    np.testing.assert_array_equal(found["p"], [np.nan, np.nan, np.nan, 4.0])


def test_an_empty_line_between_samples_is_a_missing_sample_not_a_shorter_recording(written):
    np.testing.assert_array_equal(read(written("p\n1\n\n3\n"), "p")["p"], [1.0, np.nan, 3.0])
    np.testing.assert_array_equal(read(written("t,p\n0,1\n\n2,3\n"), "p")["p"], [1.0, np.nan, 3.0])


def test_both_ways_of_reading_agree_on_missing_lines(written):
    np.testing.assert_array_equal(read(written("p\n+1e0\n\n3\n"), "p")["p"], [1.0, np.nan, 3.0])


def test_an_optional_column_is_read_where_it_is(written):
    path = written("t,p\n0,1\n")
    assert set(read(path, "p", optional=("t", "q"))) == {"p", "t"}


@pytest.mark.parametrize(
    ("content", "words", "field"),
    [
        ("t,p\n0,1\n1,abc\n", "line 3 holds something that is no number", "p"),
        ("t,p\n0,1\n1,1_0\n", "line 3 holds something that is no number", "p"),
        ("t,p\n0,1\n1,0x10\n", "line 3 holds something that is no number", "p"),
        ("t,p\n0,1\n1,1\x00\n", "line 3 holds something that is no number", "p"),
        ("t,p\n0,1\n1,N/A\n", "line 3 holds something that is no number", "p"),
        ("t,p\n0,1\n1,-inf\n", "line 3 holds an infinite number", "p"),
        ("t,p\n0,1\n1,Infinity\n", "line 3 holds an infinite number", "p"),
        ("t,p\n0,1\n1,1e999\n", "line 3 holds a number beyond the range of a double", "p"),
        ('t,p\n0,1\n1,"80,5"\n', "line 3 holds a decimal comma", "p"),
        ("t,p\n0,0,1,5\n", "line 2 has 4 cells where the header has 2", None),
        ("t,p\n0,1\n1\n", "line 3 has 1 cells where the header has 2", None),
        ("t,p\n0,1\n1,2,3\n", "line 3 has 3 cells where the header has 2", None),
        ('t,p\n0,"1\n1,2\n', "line 3", None),
        ("t;p\n0;1\n", "line 1: the columns are not separated by commas", None),
        ("t\tp\n0\t1\n", "line 1: the columns are not separated by commas", None),
        ("0,1\n1,2\n", "line 1: there is no header", None),
        ("t,p,p\n0,1,2\n", "line 1: two columns have this name", "p"),
        ("t,q\n0,1\n", "there is no such column", "p"),
        (",\n0,1\n", "there is no such column", "t"),
        ("t,p", "holds a header and no samples", None),
        ("t,p\n\n\n", "holds a header and no samples", None),
        ("t,p\n,\n,\n", "holds no sample in t, p", None),
        ("", "is empty", None),
        ("\n\n", "is empty", None),
        ("\ufeff", "is empty", None),
        ("t,p\n0,1\n".encode("utf-16"), "line 1: the header is not UTF-8", None),
        (b"t,\xe9p\n0,1\n", "line 1: the header is not UTF-8", None),
        (b"\x89PNG\r\n\x1a\n\x00\x00", "line 1: the header is not UTF-8", None),
        (b"PK\x03\x04\x00\x00", "there is no such column", "t"),
        ('"t,p\n0,1\n', "line 1: the header is not a line of column names", None),
        (b"a" * 300_000, "line 1: the header is longer than", None),
        (",".join(f"c{number}" for number in range(2001)), "line 1: the header is longer than", None),
    ],
)
def test_whatever_is_wrong_is_named(written, content, words, field):
    caught = refusal(written(content), "t", "p")
    assert words in caught.problem
    assert caught.field == field


def test_a_misspelt_column_is_answered(written):
    assert refusal(written("time,p_lv\n0,1\n"), "p_LV").remedy == "Did you mean 'p_lv'?"


def test_a_line_without_end_is_refused_in_time(written):
    started = time.process_time()
    refusal(written(b"t,p\n" + b"1" * 20_000_000), "t", "p")
    assert time.process_time() - started < 5


def test_an_oversized_file_is_refused_unread(written, monkeypatch):
    path = written("t,p\n0,1\n")
    monkeypatch.setattr("flows.sources.csv_file._LARGEST_BYTES", 4)
    assert "larger than" in refusal(path, "t").problem


def test_a_long_recording_is_read_fast(written):
    rows = np.round(np.random.default_rng(3).normal(80, 30, (6_000, 4)), 3)
    rows[::7, 1] = np.nan
    path = written("t,p,v,e\n" + 100 * "".join(",".join(map(repr, row)) + "\n" for row in rows.tolist()).replace("nan", ""))
    started = time.process_time()
    found = read(path, "t", "p", "v", "e")
    assert time.process_time() - started < 3
    np.testing.assert_array_equal(np.column_stack([found[name] for name in "tpve"]), np.tile(rows, (100, 1)))


NUMBERS = st.floats(allow_nan=False, allow_infinity=False)


@settings(deadline=None)
@given(samples=st.lists(st.none() | NUMBERS, min_size=1, max_size=20), style=st.sampled_from([repr, "{:+.17e}".format]))
def test_every_double_survives_the_round_trip(tmp_path_factory, samples, style):
    path = tmp_path_factory.mktemp("csv") / "x.csv"
    path.write_text("k,x\n" + "".join(f"1,{'' if value is None else style(value)}\n" for value in samples))
    expected = np.array([np.nan if value is None else value for value in samples])
    np.testing.assert_array_equal(read_columns(path, "x.csv", ["x", "k"])["x"], expected)


ALPHABET = st.sampled_from([*b"0123456789.,-+eE;\t \r\n\"'natpv", 0x00, 0xFF, 0xEF, 0xBB, 0xBF])


@settings(max_examples=150, deadline=None)
@given(prefix=st.sampled_from([b"", b"t,p\n0,1\n1,2\n", b"t,p\n"]), noise=st.lists(ALPHABET, max_size=40))
def test_any_bytes_end_in_finite_numbers_or_a_refusal(tmp_path_factory, prefix, noise):
    path = tmp_path_factory.mktemp("csv") / "x.csv"
    path.write_bytes(prefix + bytes(noise))
    try:
        found = read_columns(path, "x.csv", ["t", "p"])
    except InputError as refused:
        assert refused.remedy  # noqa: PT017  (either outcome is right, and both are looked at)
        return
    assert found["t"].shape == found["p"].shape
    assert not np.isinf(np.concatenate([found["t"], found["p"]])).any()
