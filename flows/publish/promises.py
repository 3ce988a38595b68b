"""What a release promises across its tables: each promise is a view of the tables and what must hold in every row of the view.

Column by column the tables were held against their schemas before; here are keys, parents, sums and what the status of an index demands.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import pandas as pd

from flows.publish.tables import foreign_keys, primary_key, schemas

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping


@dataclass(frozen=True)
class Promise:
    """One promise. ``view`` holds the rows it speaks of, ``broken`` marks those that break it, ``key`` the columns that name a row.

    ``expectation`` and ``arguments`` say the same to the validation engine: two readings of one promise must agree.
    """

    table: str
    sentence: str
    view: pd.DataFrame
    key: tuple[str, ...]
    broken: pd.Series
    expectation: str
    arguments: Mapping[str, Any] = field(default_factory=dict)


def promises(tables: Mapping[str, pd.DataFrame]) -> Iterator[Promise]:
    """Yield every promise about the seven ``tables``."""
    for name in schemas():
        yield _unique(name, tables[name])
        yield from _parents(name, tables)
    yield from _counts(tables)
    yield from _statuses("indices", "value", ("ci_low", "ci_high", "fit_ci_low", "fit_ci_high"), tables["indices"])
    yield from _statuses("changes", "difference", ("ci_low", "ci_high"), tables["changes"])
    yield _one_primary(tables["indices"])
    rejected = tables["beats"][tables["beats"]["verdict"] == "rejected"]
    yield _present("beats", "a rejected beat names a reason", rejected, "reasons")


def _unique(name: str, table: pd.DataFrame) -> Promise:
    key = primary_key(name)
    broken = table.duplicated(key, keep=False)
    sentence = f"{', '.join(key)} name one row"
    if len(key) == 1:
        return Promise(name, sentence, table, tuple(key), broken, "ExpectColumnValuesToBeUnique", {"column": key[0]})
    arguments = {"column_list": key, "ignore_row_if": "never"}
    return Promise(name, sentence, table, tuple(key), broken, "ExpectCompoundColumnsToBeUnique", arguments)


def _parents(name: str, tables: Mapping[str, pd.DataFrame]) -> Iterator[Promise]:
    for reference in foreign_keys(name):
        fields, parent, columns = reference["fields"], reference["table"], reference["references"]
        parents = tables[parent][columns].drop_duplicates().set_axis(fields, axis="columns").assign(parents=1)
        children = tables[name].dropna(subset=fields)
        view = children.merge(parents, on=fields, how="left", validate="many_to_one").fillna({"parents": 0})
        sentence = f"{', '.join(fields)} stand in {parent}"
        yield _among(name, sentence, view, "parents", [1])


def _counts(tables: Mapping[str, pd.DataFrame]) -> Iterator[Promise]:
    packages, acquisitions, runs, beats = (tables[name] for name in ("packages", "acquisitions", "runs", "beats"))
    by_run = ["acquisition", "run"]
    accepted = beats[beats["verdict"] == "accepted"]
    rejected = beats[beats["verdict"] == "rejected"]
    seen = _counted(_counted(runs, accepted, by_run, "accepted"), rejected, by_run, "rejected")
    seen["accepted_and_rejected"] = seen["accepted"] + seen["rejected"]
    yield _equal("runs", "beats are the accepted and the rejected rows of beats", seen, "beats", "accepted_and_rejected")
    yield _equal("runs", "beats_accepted are the accepted rows of beats", seen, "beats_accepted", "accepted")
    totals = runs.groupby("acquisition", as_index=False).agg(sum_of_beats=("beats", "sum"), sum_of_accepted=("beats_accepted", "sum"))
    view = acquisitions.merge(totals, on="acquisition", how="left").fillna({"sum_of_beats": 0, "sum_of_accepted": 0})
    yield _equal("acquisitions", "beats are the sum over its runs", view, "beats", "sum_of_beats")
    yield _equal("acquisitions", "beats_accepted are the sum over its runs", view, "beats_accepted", "sum_of_accepted")
    yield _equal("acquisitions", "runs are its rows of runs", _counted(acquisitions, runs, ["acquisition"], "counted"), "runs", "counted")
    in_force = packages[packages["status"].isin(["accepted", "queried", "rejected"])]
    view = in_force.merge(acquisitions[["package_sha256", "verdict"]], on="package_sha256", how="outer")
    yield _equal("packages", "status is the verdict of the acquisition, and each has one", view, "status", "verdict")
    yield _contents(packages)


def _contents(packages: pd.DataFrame) -> Promise:
    """Distinct contents received = accepted + queried + rejected + quarantined + waiting + superseded; each stands there once."""
    own = packages[packages["status"] != "seen again"]
    counted = own.groupby("package_sha256", as_index=False).size().rename(columns={"size": "times"})
    sums = packages[["package_sha256"]].dropna().drop_duplicates()
    view = sums.merge(counted, on="package_sha256", how="left").fillna({"times": 0})
    return _among("packages", "every content stands once outside seen again", view, "times", [1], ("package_sha256",))


def _statuses(name: str, value: str, intervals: tuple[str, ...], table: pd.DataFrame) -> Iterator[Promise]:
    published, withheld = (table[table["status"] == status] for status in ("published", "withheld"))
    for column in (value, "unit"):
        yield _present(name, f"a published {value} has a {column}", published, column)
    for column in (value, *intervals):
        sentence = f"a withheld {value} has no {column}"
        yield Promise(name, sentence, withheld, _key(name), withheld[column].notna(), "ExpectColumnValuesToBeNull", {"column": column})
    yield _present(name, f"a withheld {value} has a reason", withheld, "reason")
    for low, high in zip(intervals[::2], intervals[1::2], strict=True):
        for smaller, larger in ((low, value), (value, high)):
            both = published.dropna(subset=[smaller, larger])
            arguments = {"column_A": larger, "column_B": smaller, "or_equal": True}
            broken = both[larger] < both[smaller]
            sentence = f"{smaller} is not above {larger}"
            yield Promise(name, sentence, both, _key(name), broken, "ExpectColumnPairValuesAToBeGreaterThanB", arguments)


def _one_primary(indices: pd.DataFrame) -> Promise:
    key = ["acquisition", "stage", "index"]
    view = indices.groupby(key, dropna=False, as_index=False).agg(primaries=("primary", "sum"))
    return _among("indices", "one row of an acquisition, stage and index is primary", view, "primaries", [1], tuple(key))


def _present(name: str, sentence: str, view: pd.DataFrame, column: str) -> Promise:
    return Promise(name, sentence, view, _key(name), view[column].isna(), "ExpectColumnValuesToNotBeNull", {"column": column})


def _among(
    name: str,
    sentence: str,
    view: pd.DataFrame,
    column: str,
    allowed: list[int],
    key: tuple[str, ...] | None = None,
) -> Promise:
    broken = ~view[column].isin(allowed)
    arguments = {"column": column, "value_set": allowed}
    return Promise(name, sentence, view, key or _key(name), broken, "ExpectColumnValuesToBeInSet", arguments)


def _equal(name: str, sentence: str, view: pd.DataFrame, left: str, right: str) -> Promise:
    broken = ~((view[left] == view[right]) | (view[left].isna() & view[right].isna()))
    arguments = {"column_A": left, "column_B": right, "ignore_row_if": "both_values_are_missing"}
    return Promise(name, sentence, view, _key(name), broken, "ExpectColumnPairValuesToBeEqual", arguments)


def _counted(table: pd.DataFrame, rows: pd.DataFrame, by: list[str], column: str) -> pd.DataFrame:
    counts = rows.groupby(by, as_index=False).size().rename(columns={"size": column})
    return table.merge(counts, on=by, how="left").fillna({column: 0})


def _key(name: str) -> tuple[str, ...]:
    return tuple(primary_key(name))
