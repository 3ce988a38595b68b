"""A table as the bytes of a Parquet and of a CSV file: the same table, the same bytes, on any machine in any place.

Text that a spreadsheet would take for a formula is defused in the CSV by a leading apostrophe; numbers stay numbers. Text of which the
apostrophes are followed by such a sign gains one too, so that taking one away always gives the text back.
"""

from __future__ import annotations

import io
import math
from datetime import UTC, datetime
from typing import Any

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from checks.tables.kinds import CONTRACT

_FORMULA = ("=", "+", "-", "@", "\t", "\r")
_TYPES = {
    "str": pa.string(),
    "string": pa.string(),
    "int64": pa.int64(),
    "Int64": pa.int64(),
    "bool": pa.bool_(),
    "boolean": pa.bool_(),
    "float64": pa.float64(),
    "datetime64[us, UTC]": pa.timestamp("us", tz="UTC"),
}
_ROW_GROUP = 100_000
_QUOTE = '"'


def parquet_bytes(name: str, table: pd.DataFrame) -> bytes:
    """Return the table as a Parquet file whose metadata hold the contract's number."""
    fields = [pa.field(str(column), _TYPES[str(kind)]) for column, kind in table.dtypes.items()]
    schema = pa.schema(fields, metadata={"contract": str(CONTRACT), "table": name})
    columns = [pa.array(_plain_values(table[field.name]), type=field.type) for field in schema]
    sink = io.BytesIO()
    pq.write_table(
        pa.Table.from_arrays(columns, schema=schema),
        sink,
        row_group_size=_ROW_GROUP,
        version="2.6",
        data_page_version="1.0",
        compression="snappy",
        use_dictionary=True,
        write_statistics=True,
    )
    return sink.getvalue()


def csv_bytes(table: pd.DataFrame) -> bytes:
    """Return the table as UTF-8 CSV: a header, line ends of one sign, missing cells empty, floats by their shortest form."""
    columns = [[_cell(value) for value in _plain_values(table[column])] for column in table.columns]
    lines = [",".join(map(_quoted, map(str, table.columns))), *(",".join(row) for row in zip(*columns, strict=True))]
    return "".join(f"{line}\n" for line in lines).encode()


def plain_rows(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the table's rows as plain dictionaries of Python's own types, missing = None."""
    columns = [_plain_values(table[column]) for column in table.columns]
    return [dict(zip(table.columns, row, strict=True)) for row in zip(*columns, strict=True)]


def instant_text(instant: datetime) -> str:
    """Return an instant as text in UTC, like 2026-03-04T08:12:00Z; parts of a second stand only where there are any."""
    return instant.astimezone(UTC).replace(tzinfo=None).isoformat() + "Z"


def _plain_values(column: pd.Series) -> list[object]:
    """Return a column's values as Python's own types, missing = None."""
    plain = column.astype(object)
    values = plain.where(column.notna(), None).tolist()
    return [value.to_pydatetime() if isinstance(value, pd.Timestamp) else value for value in values]


def _cell(value: object) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        assert math.isfinite(value)
        return repr(value)
    if isinstance(value, datetime):
        return instant_text(value)
    if isinstance(value, int):
        return str(value)
    text = str(value)
    return _quoted(f"'{text}" if text.lstrip("'").startswith(_FORMULA) else text)


def _quoted(text: str) -> str:
    """Return the text in quotes where it needs them: the standard library's writer leaves a lone carriage return bare."""
    return f'"{text.replace(_QUOTE, _QUOTE * 2)}"' if any(sign in text for sign in (_QUOTE, ",", "\n", "\r")) else text
