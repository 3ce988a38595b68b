"""The seven published tables, built from plain rows and held against their schemas."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pandas as pd
from pandera.errors import SchemaErrors

from checks.tables import ALL
from flows.publish.refusal import GateRefused

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import pandera.pandas as pa

    Schema = type[pa.DataFrameModel]
    Columns = Mapping[str, Sequence[Any]]

_SHOWN = 10


def schemas() -> dict[str, Schema]:
    """Return the schemas of the published tables by name, in the contract's order."""
    return {str(schema.Config.name): schema for schema in ALL}


def primary_key(table: str) -> list[str]:
    """Return the columns that tell a table's rows apart."""
    return list(_keys(table)["primary_key"])


def foreign_keys(table: str) -> list[dict[str, Any]]:
    """Return a table's references: ``fields`` name rows of ``table`` by its columns ``references``."""
    return list(_keys(table)["foreign_keys"])


def build(columns: Mapping[str, Columns]) -> dict[str, pd.DataFrame]:
    """Return the seven tables in the contract's order, columns and types, rows sorted by site and primary key.

    ``columns`` maps each table's name to its columns: name -> values, missing = None. Raises GateRefused where cells break the schema.
    """
    tables = {name: _table(name, columns[name]) for name in schemas()}
    problems = [problem for name, table in tables.items() for problem in _problems(name, table)]
    if problems:
        raise GateRefused(problems)
    return tables


def _table(name: str, columns: Columns) -> pd.DataFrame:
    filled = {}
    for column, kind in schemas()[name].empty().dtypes.items():
        values = columns[str(column)]
        filled[str(column)] = pd.array(values, dtype=_holder(kind) if None in values else kind)
    order = ["site", *(column for column in primary_key(name) if column != "site")]
    return pd.DataFrame(filled).sort_values(order, kind="stable", na_position="first", ignore_index=True)


def _holder(kind: Any) -> Any:  # noqa: ANN401  (pandas' own types)
    """Return the type that holds missing values beside ``kind``: one where none may be is named by the schema, with its row."""
    return {"int64": "Int64", "bool": "boolean"}.get(str(kind), kind)


def _problems(name: str, table: pd.DataFrame) -> list[str]:
    try:
        schemas()[name].validate(table, lazy=True)
    except SchemaErrors as errors:
        cases = errors.failure_cases.drop_duplicates(["column", "check", "index"]).head(_SHOWN)
        key = primary_key(name)
        return [
            f"{name}: {case.column} breaks {case.check} with {str(case.failure_case)[:60]!r}{_row(table, key, case.index)}"
            for case in cases.astype(object).itertuples(index=False)
        ]
    return []


def _row(table: pd.DataFrame, key: Sequence[str], position: object) -> str:
    if not isinstance(position, int):
        return ""
    return f" in {', '.join(f'{column} {table[column].iloc[position]!s}' for column in key)}"


def _keys(table: str) -> dict[str, Any]:
    keys: dict[str, Any] = schemas()[table].get_metadata()[table]["dataframe"]
    return keys
