"""Comma separated text: one header line, then one line a sample; an empty cell is a missing sample.

Numbers are parsed by pyarrow. Only when that fails, or finds something infinite, is the text gone through again line by line, to tell
the site the first line that is wrong.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from flows.errors import InputError
from flows.sources.reader import Reader
from flows.study.names import did_you_mean
from metrics.arrays import FloatArray

_MISSING = ("", "NaN", "nan", "NAN")
_MOST_COLUMNS = 2000
_LONGEST_HEADER_BYTES = 256 * 1024
_LARGEST_BYTES = 1024**3
_LINE_END = re.compile(rb"\r\n|\n|\r")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_COMMA_NUMBER = re.compile(r"[+-]?\d*,\d+([eE][+-]?\d+)?")
_PLAIN_REMEDY = "Write columns separated by commas and numbers with a decimal point."


def read_columns(path: Path, file: str, wanted: Sequence[str], optional: Sequence[str] = ()) -> dict[str, FloatArray]:
    """Return the ``wanted`` columns, and the ``optional`` ones that are there, by name.

    All have one length, 1 or more, with NaN where a cell is empty.

    Lines at the end in which every wanted cell is empty are no samples. Raises InputError, naming line and column, for an empty
    file, one without samples, a column that is not there, lines of the wrong length, text, decimal commas and infinite numbers.
    """
    content = _content(path, file)
    header = _header(content, file)
    for column in wanted:
        if column not in header:
            raise _unknown_column(column, header, file)
    wanted = [*wanted, *(column for column in optional if column in header)]
    columns = _parsed(content, header, wanted)
    if columns is None:
        columns = _read_slowly(content, header, wanted, file)
    return _without_empty_end(columns, file)


READER = Reader(name="csv", suffixes=(".csv",), columns=read_columns)


def _content(path: Path, file: str) -> bytes:
    """Return the bytes of the file without a byte order mark and without line ends at its end."""
    if path.stat().st_size > _LARGEST_BYTES:
        problem = "is larger than 1 GB"
        raise InputError(problem, file=file, remedy="Send one run a file.")
    content = path.read_bytes().removeprefix(b"\xef\xbb\xbf").rstrip(b"\r\n")
    if not content.strip():
        problem = "is empty"
        raise InputError(problem, file=file, remedy="Send the recording again.")
    return content


def _header(content: bytes, file: str) -> list[str]:
    """Return the column names of the first line, blanks around them taken off."""
    line = _LINE_END.split(content[:_LONGEST_HEADER_BYTES], maxsplit=1)[0]
    if len(line) == _LONGEST_HEADER_BYTES or line.count(b",") >= _MOST_COLUMNS:
        problem = f"line 1: the header is longer than {_MOST_COLUMNS} columns or {_LONGEST_HEADER_BYTES // 1024} kB"
        raise InputError(problem, file=file, remedy="Send the columns of one run.")
    try:
        text = line.decode()
        names = [name.strip() for name in next(csv.reader([text], strict=True))]
    except UnicodeDecodeError:
        problem = "line 1: the header is not UTF-8"
        raise InputError(problem, file=file, value=line[:20], remedy="Save the file as UTF-8.") from None
    except csv.Error:
        problem = "line 1: the header is not a line of column names"
        raise InputError(problem, file=file, value=text[:80], remedy=_PLAIN_REMEDY) from None
    twins = sorted({name for name in names if name and names.count(name) > 1})
    if twins:
        problem = "line 1: two columns have this name"
        raise InputError(problem, file=file, field=twins[0], remedy="Give each column its own name.")
    return names


def _unknown_column(column: str, header: list[str], file: str) -> InputError:
    if len(header) == 1 and re.search(r"[;\t]", header[0]):
        problem, remedy = "line 1: the columns are not separated by commas", _PLAIN_REMEDY
        return InputError(problem, file=file, value=header[0], remedy=remedy)
    if all(_NUMBER.fullmatch(name) for name in header):
        problem = "line 1: there is no header, numbers begin at once"
        return InputError(problem, file=file, value=",".join(header), remedy="Add a first line with the names of the columns.")
    remedy = did_you_mean(column, filter(None, header)) or "The first line names no column at all."
    return InputError("there is no such column", file=file, field=column, remedy=remedy)


def _parsed(content: bytes, header: list[str], wanted: Sequence[str]) -> dict[str, FloatArray] | None:
    """Return the wanted columns, or None when something in the text is not as it should be."""
    import pyarrow  # noqa: ICN001, PLC0415  (0.15 s that only a command which reads signals has to pay)
    from pyarrow import csv as arrow_csv  # noqa: PLC0415

    names = [f"{number}:{name}" for number, name in enumerate(header)]
    places = {column: names[header.index(column)] for column in wanted}
    try:
        table = arrow_csv.read_csv(
            pyarrow.BufferReader(content),
            read_options=arrow_csv.ReadOptions(use_threads=False, column_names=names, skip_rows=1),
            parse_options=arrow_csv.ParseOptions(newlines_in_values=False, ignore_empty_lines=False),
            convert_options=arrow_csv.ConvertOptions(
                column_types=dict.fromkeys(places.values(), pyarrow.float64()),
                include_columns=list(places.values()),
                null_values=list(_MISSING),
            ),
        )
    except pyarrow.ArrowInvalid:
        return None
    columns = {
        column: np.concatenate([_samples(chunk) for chunk in table.column(place).chunks] or [np.empty(0)])
        for column, place in places.items()
    }
    return None if any(np.isinf(samples).any() for samples in columns.values()) else columns


def _samples(chunk: Any) -> FloatArray:  # noqa: ANN401  (pyarrow ships no types)
    """Return a chunk's doubles, NaN where null; pyarrow's own conversion would import pandas, a second of every command's time."""
    if len(chunk) == 0:
        return np.empty(0)
    validity, data = chunk.buffers()
    values = np.frombuffer(data, np.float64, len(chunk), 8 * chunk.offset).copy()
    if chunk.null_count:
        valid = np.unpackbits(np.frombuffer(validity, np.uint8), bitorder="little")
        values[valid[chunk.offset : chunk.offset + len(chunk)] == 0] = np.nan
    return values


def _read_slowly(content: bytes, header: list[str], wanted: Sequence[str], file: str) -> dict[str, FloatArray]:
    """Return the wanted columns read line by line; raises InputError at the first line that is wrong."""
    places = {column: header.index(column) for column in wanted}
    values: dict[str, list[float]] = {column: [] for column in wanted}
    for number, cells in _lines(content, file):
        if cells and len(cells) != len(header):
            raise _wrong_length(number, cells, header, file)
        for column, place in places.items():
            values[column].append(_number(cells[place].strip(), number, column, file) if cells else np.nan)
    return {column: np.array(samples, dtype=np.float64) for column, samples in values.items()}


def _lines(content: bytes, file: str) -> Iterator[tuple[int, list[str]]]:
    """Yield (line number, cells) below the header."""
    text = io.TextIOWrapper(io.BytesIO(content), encoding="utf-8", errors="replace", newline="")
    rows = csv.reader(text, strict=True)
    next(rows)
    while True:
        try:
            cells = next(rows)
        except StopIteration:
            return
        except csv.Error as failure:
            problem = f"line {rows.line_num}: {failure}"
            raise InputError(problem, file=file, remedy=_PLAIN_REMEDY) from None
        yield rows.line_num, cells


def _wrong_length(number: int, cells: list[str], header: list[str], file: str) -> InputError:
    problem = f"line {number} has {len(cells)} cells where the header has {len(header)}"
    if len(cells) > len(header):
        remedy = "Write numbers with a decimal point, not a comma."
    else:
        remedy = "The file may be cut or its columns may end early; leave a missing sample empty, but keep its commas."
    return InputError(problem, file=file, value=",".join(cells), remedy=remedy)


def _number(text: str, number: int, column: str, file: str) -> float:
    if text in _MISSING:
        return np.nan
    remedy = "Leave the cell of a missing sample empty."
    if _NUMBER.fullmatch(text):
        if np.isfinite(float(text)):
            return float(text)
        problem = f"line {number} holds a number beyond the range of a double"
    elif _COMMA_NUMBER.fullmatch(text):
        problem, remedy = f"line {number} holds a decimal comma", _PLAIN_REMEDY
    elif text.lstrip("+-").casefold() in {"inf", "infinity"}:
        problem = f"line {number} holds an infinite number"
    else:
        problem = f"line {number} holds something that is no number"
    raise InputError(problem, file=file, field=column, value=text, remedy=remedy)


def _without_empty_end(columns: dict[str, FloatArray], file: str) -> dict[str, FloatArray]:
    filled = np.zeros(max((samples.size for samples in columns.values()), default=0), dtype=bool)
    for samples in columns.values():
        filled |= ~np.isnan(samples)
    if filled.size == 0:
        problem = "holds a header and no samples"
        raise InputError(problem, file=file, remedy="Send the recording again.")
    if not filled.any():
        problem = f"holds no sample in {', '.join(columns)}"
        raise InputError(problem, file=file, remedy="Look whether the right columns are named.")
    end = int(np.flatnonzero(filled)[-1]) + 1
    return {column: samples[:end] for column, samples in columns.items()}
