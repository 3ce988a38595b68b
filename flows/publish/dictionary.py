"""The data dictionary of a release, read from the schemas the tables were held against."""

from __future__ import annotations

import json
from typing import Any

from checks.tables.kinds import CONTRACT
from flows.publish.tables import foreign_keys, primary_key, schemas

_TYPES = {
    "string[pyarrow]": "text",
    "str": "text",
    "int64": "whole number",
    "Int64": "whole number",
    "float64": "number",
    "bool": "true or false",
    "boolean": "true or false",
    "datetime64[us, UTC]": "instant in UTC",
}


def dictionary() -> dict[str, Any]:
    """Return, for every table: files, meaning, keys, and each column's type, unit (UCUM), meaning and permitted values."""
    return {
        "contract": CONTRACT,
        "missing": {"parquet": "null", "csv": "an empty cell"},
        "text_in_csv": "a leading apostrophe stands before text that a spreadsheet would take for a formula; take it away on reading",
        "tables": [_table(name) for name in schemas()],
    }


def dictionary_text() -> str:
    """Return the dictionary as JSON, the same text for the same schemas."""
    return json.dumps(dictionary(), indent=2, ensure_ascii=False) + "\n"


def _table(name: str) -> dict[str, Any]:
    schema = schemas()[name].to_schema()
    return {
        "name": name,
        "files": [f"{name}.parquet", f"{name}.csv"],
        "one_row": schema.description,
        "primary_key": primary_key(name),
        "foreign_keys": foreign_keys(name),
        "columns": [_column(column_name, column) for column_name, column in schema.columns.items()],
    }


def _column(name: str, column: Any) -> dict[str, Any]:  # noqa: ANN401  (pandera's Column)
    metadata = column.metadata or {}
    entry = {
        "name": name,
        "type": _TYPES[str(column.dtype)],
        "unit": metadata.get("unit"),
        "meaning": column.description,
        "may_be_missing": bool(column.nullable),
    }
    return entry | ({"among": metadata["among"]} if metadata.get("among") else {})
