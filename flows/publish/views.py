"""What the pages show, gathered from the tables of a release: plain counts and rows, judged nowhere in here."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from flows.publish.files import plain_rows
from flows.reports.views import (
    AcquisitionRow,
    AcquisitionView,
    ExpectedRow,
    GateRow,
    NightView,
    PackageRow,
    ReasonRow,
    SiteCount,
)

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence

    import pandas as pd

    from checks.check import Check
    from flows.publish.gate import Answer
    from flows.study.protocol import Protocol

Rows = list[dict[str, Any]]

_OUTSIDE = "(outside)"
"""The site shown for what lies in the inbox but in no site's folder."""

_ANY_VISIT = "any visit"


@dataclass(frozen=True)
class Material:
    """All a night's pages are made of: the tables as plain rows, the protocol, the cards of all checks, and the gate's answers."""

    rows: Mapping[str, Rows]
    protocol: Protocol
    checks: Sequence[Check]
    gate: Sequence[Answer]
    software_version: str


def material(
    tables: Mapping[str, pd.DataFrame],
    protocol: Protocol,
    checks: Sequence[Check],
    gate: Sequence[Answer],
    software_version: str,
) -> Material:
    """Return the material of a night, its tables as plain rows; of the beats, which are many, only what is counted."""
    shown = {name: table[["verdict", "reasons"]] if name == "beats" else table for name, table in tables.items()}
    return Material({name: plain_rows(table) for name, table in shown.items()}, protocol, checks, gate, software_version)


def night_view(material: Material, release: str) -> NightView:
    """Return what the night's page shows."""
    packages = material.rows["packages"]
    sums = {row["package_sha256"] for row in packages} - {None}
    return NightView(
        release=release,
        study=material.protocol.study.name,
        protocol_version=material.protocol.study.version,
        protocol_sha256=material.protocol.sha256,
        software_version=material.software_version,
        received=len(sums) + sum(row["package_sha256"] is None for row in packages),
        sites=site_counts(packages, material.protocol),
        packages=[_package_row(row) for row in packages],
        expected=expected_rows(material.rows["acquisitions"], material.protocol),
        reasons=_reason_rows(material),
        acquisitions=_acquisition_rows(material),
        gate=[GateRow(one.table, one.promise, one.kept, one.rows, one.failing) for one in material.gate],
    )


def acquisition_views(material: Material, evidence: Callable[[str], Mapping[str, Any]]) -> Iterator[AcquisitionView]:
    """Yield what each acquisition's page shows; ``evidence`` gives the evidence of an acquisition by its name, one at a time."""
    grouped = {name: _by_acquisition(material.rows[name]) for name in ("runs", "rejections", "indices", "changes")}
    for row in material.rows["acquisitions"]:
        name = row["acquisition"]
        yield AcquisitionView(evidence=evidence(name), row=row, **{table: tuple(rows.get(name, ())) for table, rows in grouped.items()})


def site_counts(packages: Rows, protocol: Protocol) -> list[SiteCount]:
    """Return the counts of each site by status, sites of the protocol first even where nothing came."""
    counts = {site: Counter[str]() for site in protocol.sites}
    for row in packages:
        counts.setdefault(row["site"] or _OUTSIDE, Counter())[row["status"].replace(" ", "_")] += 1
    return [SiteCount(site, **count) for site, count in counts.items()]


def expected_rows(acquisitions: Rows, protocol: Protocol) -> list[ExpectedRow]:
    """Return what the protocol leads to expect, subject by subject and visit by visit: of the subjects it lists, else of those seen."""
    visits = [visit.name for visit in protocol.visits]
    expected = protocol.subjects.expected
    if not visits and not expected:
        return []
    came: dict[tuple[str, str, str], list[str]] = {}
    seen: dict[str, set[str]] = {}
    for row in acquisitions:
        seen.setdefault(row["site"], set()).add(row["subject"])
        for visit in (row["visit"], _ANY_VISIT):
            came.setdefault((row["site"], row["subject"], visit), []).append(row["verdict"])
    rows = []
    for site in protocol.sites:
        for subject in expected.get(site) or sorted(seen.get(site, ())):
            for visit in visits or [_ANY_VISIT]:
                verdicts = came.get((site, subject, visit), [])
                rows.append(ExpectedRow(site, subject, visit, bool(verdicts), ", ".join(sorted(verdicts)) or "nothing"))
    return rows


def _package_row(row: Mapping[str, Any]) -> PackageRow:
    site, package = row["site"] or _OUTSIDE, row["package"] or ""
    return PackageRow(site, package, row["acquisition"], row["version"], row["status"], row["reason"], row["received_at"])


def _acquisition_rows(material: Material) -> list[AcquisitionRow]:
    indices = _by_acquisition([row for row in material.rows["indices"] if row["primary"]])
    return [
        AcquisitionRow(
            site=row["site"],
            subject=row["subject"],
            visit=row["visit"],
            acquisition=row["acquisition"],
            verdict=row["verdict"],
            reasons=_names(row),
            beats=row["beats"],
            beats_accepted=row["beats_accepted"],
            chamber=row["chamber"],
            indices_published=sum(index["status"] == "published" for index in indices.get(row["acquisition"], ())),
            indices_withheld=sum(index["status"] == "withheld" for index in indices.get(row["acquisition"], ())),
            decided_by=row["decided_by"],
        )
        for row in material.rows["acquisitions"]
    ]


def _reason_rows(material: Material) -> list[ReasonRow]:
    """Return what each check cost, in the order of the list of checks; checks that cost nothing are left out."""
    decisive: dict[str, Rows] = {}
    for row in material.rows["rejections"]:
        if row["decisive"]:
            decisive.setdefault(row["check"], []).append(row)
    beats = Counter(name for row in material.rows["beats"] if row["verdict"] == "rejected" for name in _names(row))
    withheld = _by_acquisition([row for row in material.rows["indices"] if row["primary"] and row["status"] == "withheld"])
    rows = []
    for check in material.checks:
        found = decisive.get(check.name, [])
        names = {row["acquisition"] for row in found}
        runs = {(row["acquisition"], row["run"]) for row in found if row["run"] is not None}
        lost = sum(index["index"] in check.spoils for name in names for index in withheld.get(name, ()))
        if found or beats[check.name]:
            rows.append(ReasonRow(check.name, check.title, check.level.value, len(names), len(runs), beats[check.name], lost))
    return rows


def _by_acquisition(rows: Rows) -> dict[str, Rows]:
    grouped: dict[str, Rows] = {}
    for row in rows:
        grouped.setdefault(row["acquisition"], []).append(row)
    return grouped


def _names(row: Mapping[str, Any]) -> tuple[str, ...]:
    return tuple(row["reasons"].split(";")) if row["reasons"] else ()
