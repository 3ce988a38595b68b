"""The kinds of columns a published table is made of: each carries its unit and its meaning beside its rules.

The schemas are written with these; the data dictionary is read from the schemas, so the two cannot drift apart. Every kind returns
what ``pandera.pandas.Field`` returns: the annotation beside it in the schema gives the type.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pandera.pandas as pa

if TYPE_CHECKING:
    from collections.abc import Sequence

CONTRACT = 1
"""The number of the contract these tables keep; it rises when a column changes its meaning."""


def text(description: str, *, optional: bool = False, among: Sequence[str] | None = None) -> Any:  # noqa: ANN401
    """Return a column of text; missing is null, so that an empty cell of a CSV file has one meaning only."""
    return pa.Field(
        nullable=optional,
        description=description,
        isin=None if among is None else list(among),
        str_length={"min_value": 1},
        metadata={"unit": None, "among": None if among is None else list(among)},
    )


def sha256(description: str, *, optional: bool = False) -> Any:  # noqa: ANN401
    """Return a column of SHA-256 sums, 64 hexadecimal digits in lower case."""
    return pa.Field(nullable=optional, description=description, str_matches="^[0-9a-f]{64}$", metadata={"unit": None})


def count(description: str, *, optional: bool = False, at_least: int = 0) -> Any:  # noqa: ANN401
    """Return a column of whole numbers from ``at_least`` up."""
    return pa.Field(nullable=optional, description=description, ge=at_least, metadata={"unit": None})


def quantity(description: str, unit: str | None, *, optional: bool = True, at_least: float | None = None) -> Any:  # noqa: ANN401
    """Return a column of finite numbers in one UCUM unit; ``unit`` None where the row itself names the unit."""
    return pa.Field(
        nullable=optional,
        description=description,
        ge=at_least,
        gt=None if at_least is not None else float("-inf"),
        lt=float("inf"),
        metadata={"unit": unit},
    )


def flag(description: str, *, optional: bool = False) -> Any:  # noqa: ANN401
    """Return a column of true and false."""
    return pa.Field(nullable=optional, description=description, metadata={"unit": None})


def instant(description: str, *, optional: bool = False) -> Any:  # noqa: ANN401
    """Return a column of instants in UTC, to the microsecond."""
    return pa.Field(nullable=optional, description=description, dtype_kwargs={"unit": "us", "tz": "UTC"}, metadata={"unit": None})
