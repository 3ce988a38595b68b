"""The demo: the invented study Tarn, one night over it, and what was put in beside what was found."""

from __future__ import annotations

import sys
import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from flows.sources.simulated.cases import PutIn
from flows.sources.simulated.faults import Expected
from flows.sources.simulated.study import make_study

if TYPE_CHECKING:
    import pandas as pd

TABLES = ("packages", "acquisitions", "runs", "beats", "rejections", "indices", "changes")
FATES = ("waiting", "quarantined", "superseded", "seen again")
"""What a package can become without being assessed; everything else that is put in is found by a check."""

CLEAN_REJECTED_SHARE = 0.005
"""More rejected beats than this in a clean acquisition are a false alarm."""

SHOWN = ("EDV", "SV", "EDP", "SW", "Ea", "Ees", "V0")
"""Indices shown beside their truth."""


class DemoError(Exception):
    """Something put in was not found, or something that must hold does not."""


@dataclass(frozen=True)
class Outcome:
    """One package: what was put in, what was found in words, and what was missed (empty when nothing was)."""

    put_in: PutIn
    found: str
    missed: tuple[str, ...]


def run_demo(folder: Path) -> None:
    """Make the study Tarn in ``folder``, run one night over it, and print what was put in beside what was found.

    Raises InputError for a folder that holds anything else, and DemoError when something put in was not found, a clean acquisition was
    not accepted, or the counts of the published tables do not add up.
    """
    from flows.nightly import run_night  # noqa: PLC0415  (starts the orchestration)

    began, folder = time.monotonic(), folder.resolve()
    sys.stderr.write(f"making the study Tarn in {folder}: simulated hearts, about 10 s\n")
    put_in = make_study(folder)
    sys.stderr.write("running the night: starting the orchestration takes about 20 s\n")
    run_night(folder)
    latest = folder / "published" / "latest"
    tables = published_tables(latest)
    outcomes = compared(put_in, tables)
    identities = contract_identities(tables, packages_sent(folder))
    _say(_table_lines(outcomes))
    _say(_clean_lines(outcomes, tables))
    _say([f"{'holds' if holds else 'BROKEN':7} {words}" for words, holds in identities])
    _say([f"elapsed {time.monotonic() - began:.0f} s", f"report  {latest / 'report' / 'index.html'}"])
    _say(["For research and quality assurance only; not for diagnosis or treatment. Nothing in this study is or was a patient."])
    missed = [f"{one.put_in.package}: {what}" for one in outcomes for what in one.missed]
    missed += [f"does not hold: {words}" for words, holds in identities if not holds]
    if missed:
        raise DemoError("\n".join(missed))


def published_tables(latest: Path) -> dict[str, pd.DataFrame]:
    """Return the tables of a release by name."""
    import pandas as pd  # noqa: PLC0415  (half a second that the other commands need not wait)

    return {name: pd.read_parquet(latest / f"{name}.parquet") for name in TABLES}


def packages_sent(folder: Path) -> int:
    """Return how many packages lie in the inbox of the study."""
    return sum(1 for package in (folder / "inbox").glob("*/*") if package.is_dir())


def compared(put_in: Iterable[PutIn], tables: Mapping[str, pd.DataFrame]) -> list[Outcome]:
    """Return what became of each package, in the order given."""
    return [_outcome(one, tables) for one in put_in]


def _outcome(put_in: PutIn, tables: Mapping[str, pd.DataFrame]) -> Outcome:
    packages = tables["packages"]
    rows = packages[(packages["site"] == put_in.site) & (packages["package"] == put_in.package)]
    if len(rows) != 1:
        return Outcome(put_in, f"{len(rows)} rows in packages", (f"expected one row in packages, found {len(rows)}",))
    status = str(rows["status"].iloc[0])
    if put_in.found in FATES:
        return Outcome(put_in, status, () if status == put_in.found else (f"expected {put_in.found}, found {status}",))
    missed = [*_index_misses(put_in, tables["indices"])]
    if not put_in.found:
        missed += [] if status == "accepted" else [f"clean, but {status}"]
        share = rejected_share(put_in.acquisition, tables["runs"])
        missed += [] if share <= CLEAN_REJECTED_SHARE else [f"clean, but {share:.0%} of its beats were rejected"]
        return Outcome(put_in, status, tuple(missed))
    words = []
    for expected in put_in.expected or (Expected(put_in.found),):
        said, is_found = _sought(put_in.acquisition, expected, tables)
        words.append(said)
        missed += [] if is_found else [said]
    return Outcome(put_in, f"{status}: {'; '.join(words)}", tuple(missed))


def _sought(acquisition: str, expected: Expected, tables: Mapping[str, pd.DataFrame]) -> tuple[str, bool]:
    """Return in words what the check expected came to, and whether that is what was put in.

    Where beats are touched, each must be rejected and at least one by the check expected: a fault that reaches only the rim of a
    beat may cost it another way.
    """
    where = expected.check if expected.run is None else f"{expected.check} in {expected.run}"
    fails = _fails(acquisition, expected, tables["rejections"])
    if not expected.instants_s:
        return (where, True) if len(fails) else (f"{where} not found", False)
    beats = tables["beats"]
    rejected = beats[(beats["acquisition"] == acquisition) & (beats["run"] == expected.run) & (beats["verdict"] == "rejected")]
    gone = _held(expected.instants_s, rejected)
    named = _held(expected.instants_s, rejected[rejected["beat"].isin(fails["beat"])])
    otherwise = f", {gone - named} rejected otherwise" if gone > named else ""
    return f"{where}, {named} of {len(expected.instants_s)}{otherwise}", gone == len(expected.instants_s) and named > 0


def _fails(acquisition: str, expected: Expected, rejections: pd.DataFrame) -> pd.DataFrame:
    """Return the failed rows of the check expected, in the run expected."""
    mine = (rejections["acquisition"] == acquisition) & (rejections["check"] == expected.check) & (rejections["verdict"] == "fail")
    return rejections[mine & (rejections["run"].isna() if expected.run is None else rejections["run"] == expected.run)]


def _held(instants_s: Sequence[float], beats: pd.DataFrame) -> int:
    """Return how many of the instants lie in one of the beats."""
    return sum(bool(((beats["start_s"] <= at_s) & (at_s < beats["end_s"])).any()) for at_s in instants_s)


def _index_misses(put_in: PutIn, indices: pd.DataFrame) -> list[str]:
    """Return where an index that the fault reaches was published, or one it cannot touch was not."""
    primary = indices[(indices["acquisition"] == put_in.acquisition) & indices["primary"].astype(bool)]
    misses = []
    for names, wanted in ((put_in.withheld, "withheld"), (put_in.published, "published")):
        for name in names:
            statuses = set(primary.loc[primary["index"] == name, "status"])
            misses += [] if statuses == {wanted} else [f"{name} should be {wanted}, is {' and '.join(sorted(statuses)) or 'not there'}"]
    return misses


def rejected_share(acquisition: str, runs: pd.DataFrame) -> float:
    """Return the share of an acquisition's detected beats that was rejected; 1 when no beat was detected."""
    mine = runs[runs["acquisition"] == acquisition]
    detected = int(mine["beats"].sum())
    return 1.0 - int(mine["beats_accepted"].sum()) / detected if detected else 1.0


def contract_identities(tables: Mapping[str, pd.DataFrame], sent: int) -> list[tuple[str, bool]]:
    """Return what must always hold of the published tables, in words, and whether it does; ``sent`` counts the packages in the inbox."""
    packages, acquisitions, runs, beats, indices = (tables[name] for name in ("packages", "acquisitions", "runs", "beats", "indices"))
    statuses = packages["status"].value_counts()
    accepted, rejected = (int((beats["verdict"] == verdict).sum()) for verdict in ("accepted", "rejected"))
    assessed = sum(int(statuses.get(status, 0)) for status in ("accepted", "queried", "rejected"))
    primary = indices[indices["primary"].astype(bool)].groupby(["acquisition", "stage", "index"]).size()
    rows = indices.groupby(["acquisition", "stage", "index"]).ngroups
    unexplained = beats[(beats["verdict"] == "rejected") & (beats["reasons"].isna() | (beats["reasons"] == ""))]
    withheld = indices[indices["status"] == "withheld"]
    return [
        (f"{len(beats)} beats detected = {accepted} accepted + {rejected} rejected", len(beats) == accepted + rejected > 0),
        ("every run's counts are those of its beats", _counts_agree(runs, beats)),
        (f"{sent} packages sent, each with one row", sent == len(packages) == len(packages.drop_duplicates(["site", "package"]))),
        (f"{assessed} packages assessed = {len(acquisitions)} acquisitions", assessed == len(acquisitions)),
        ("every acquisition, stage and index has exactly one primary row", rows == len(primary) > 0 and bool((primary == 1).all())),
        ("every rejected beat says why", unexplained.empty),
        ("what is withheld holds no value and says why", bool(withheld["value"].isna().all() and withheld["reason"].notna().all())),
    ]


def _counts_agree(runs: pd.DataFrame, beats: pd.DataFrame) -> bool:
    key = ["acquisition", "run"]
    declared = runs.set_index(key)[["beats", "beats_accepted"]]
    counted = (beats.groupby(key).size(), beats[beats["verdict"] == "accepted"].groupby(key).size())
    return all(
        declared[column].astype("int64").equals(count.reindex(declared.index, fill_value=0).astype("int64").rename(column))
        for column, count in zip(declared.columns, counted, strict=True)
    )


def _table_lines(outcomes: Sequence[Outcome]) -> list[str]:
    header = ("", "package", "put in", "should be found", "found")
    rows = [
        ("ok" if not one.missed else "MISS", one.put_in.package, one.put_in.trouble, one.put_in.found or "nothing", one.found)
        for one in outcomes
    ]
    widths = [max(len(row[column]) for row in (header, *rows)) for column in range(len(header))]
    return ["  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in (header, *rows)]


def _clean_lines(outcomes: Sequence[Outcome], tables: Mapping[str, pd.DataFrame]) -> list[str]:
    """Return, for each clean acquisition, its rejected share and some indices beside their truth."""
    lines = ["clean acquisitions: share of beats rejected, and indices found (true)"]
    indices = tables["indices"]
    primary = indices[indices["primary"].astype(bool) & (indices["status"] == "published")]
    for put_in in (one.put_in for one in outcomes if not one.put_in.found):
        share = rejected_share(put_in.acquisition, tables["runs"])
        for stage in dict.fromkeys(truth.stage for truth in put_in.truths):
            mine = primary[(primary["acquisition"] == put_in.acquisition) & (primary["stage"] == stage)]
            found = dict(zip(mine["index"], mine["value"], strict=True))
            shown = [
                f"{one.index} {found.get(one.index, float('nan')):.4g} ({one.value:.4g})"
                for one in put_in.truths
                if one.stage == stage and one.index in SHOWN
            ]
            lines.append(f"  {put_in.acquisition} {stage:9} {share:4.0%}  " + "  ".join(shown))
    return lines


def _say(lines: Iterable[str]) -> None:
    sys.stdout.write("\n".join([*lines, "", ""]))
