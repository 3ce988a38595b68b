"""Jumps across a subject's visits: found at the end of a night, told of the later acquisition as a question to its site.

Nothing is withheld by them. As with copies, what is found depends on the acquisitions in force, not on the order they came in.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from checks.acquisition.visits_agree import ALL
from checks.check import Verdict
from checks.subject import AcquisitionSubject
from checks.verdicts import ACCEPTED, QUERIED, Finding, Rules, judge_acquisition
from flows.assessed_rows import joined
from flows.evidence import grouped
from flows.stage_indices import PUBLISHED
from metrics.signals.facts import AcquisitionFacts

if TYPE_CHECKING:
    from collections.abc import Mapping

    from flows.catalogue.lookups import Columns

Rested = dict[tuple[str, str | None], float]
NAMES = frozenset(check.name for check in ALL)


def jumps(columns: Mapping[str, Columns], rules: Rules) -> dict[str, list[Finding]]:
    """Return what the checks across visits found, pass aside, for each acquisition that has an earlier one of its subject and chamber.

    ``columns`` are those of the published tables.
    """
    rested = _rested(columns["indices"])
    table = columns["acquisitions"]
    rows = zip(*(table[name] for name in ("site", "subject", "chamber", "recorded_at", "acquisition")), strict=True)
    before: dict[tuple[str, str, str], list[Rested]] = {}
    found: dict[str, list[Finding]] = {}
    for site, subject, chamber, _, acquisition in sorted(rows):
        earlier = before.setdefault((site, subject, chamber), [])
        own = rested.get(acquisition, {})
        if earlier:
            known = AcquisitionSubject(AcquisitionFacts(chamber=chamber), rested=own, earlier=tuple(earlier))
            _, findings = judge_acquisition(known, ALL, rules)
            found[acquisition] = [finding for finding in findings if finding.verdict is not Verdict.NOT_EVALUATED]
        earlier.append(own)
    return found


def _rested(indices: Columns) -> dict[str, Rested]:
    """Return each acquisition's published primary indices by index and stage."""
    found: dict[str, Rested] = {}
    names = ("acquisition", "index", "stage", "primary", "status", "value")
    for acquisition, index, stage, primary, status, value in zip(*(indices[name] for name in names), strict=True):
        if primary and status == PUBLISHED and value is not None:
            found.setdefault(acquisition, {})[index, stage] = float(value)
    return found


def with_jumps_told(columns: Mapping[str, Columns], found: Mapping[str, list[Finding]]) -> dict[str, Columns]:
    """Return the tables' columns with what was found in the log, and those that failed queried where they stood accepted."""
    if not found:
        return dict(columns)
    tables = {name: {column: list(values) for column, values in table.items()} for name, table in columns.items()}
    failed = {name: [one.check.name for one in findings if one.decisive] for name, findings in found.items()}
    _query(tables, {name: names for name, names in failed.items() if names})
    log, acquisitions = tables["rejections"], tables["acquisitions"]
    kept = [place for place, (name, check) in enumerate(zip(log["acquisition"], log["check"], strict=True)) if _stays(name, check, found)]
    for column, values in log.items():
        log[column] = [values[place] for place in kept]
    sites = dict(zip(acquisitions["acquisition"], acquisitions["site"], strict=True))
    for name in sorted(found):
        for finding in found[name]:
            row = {**dict.fromkeys(log), "site": sites[name], "acquisition": name, "check": finding.check.name, "unit": finding.check.unit}
            row |= {"verdict": str(finding.verdict), "decisive": finding.decisive, "value": finding.value, "limit": finding.limit}
            row |= {"reason": finding.reason, "action": finding.action}
            for column, values in log.items():
                values.append(row[column])
    return tables


def _stays(acquisition: str, check: str, found: Mapping[str, list[Finding]]) -> bool:
    """Return whether a row of the log stands: an assessment alone could say nothing of what was found now."""
    return check not in NAMES or acquisition not in found


def _query(tables: Mapping[str, Columns], failed: Mapping[str, list[str]]) -> None:
    acquisitions, packages = tables["acquisitions"], tables["packages"]
    contents = set()
    for place, name in enumerate(acquisitions["acquisition"]):
        if name in failed:
            acquisitions["reasons"][place] = joined([*filter(None, (acquisitions["reasons"][place] or "").split(";")), *failed[name]])
            for column in ("verdict", "machine_verdict"):
                is_decided = column == "verdict" and acquisitions["decided_by"][place] is not None
                if acquisitions[column][place] == ACCEPTED and not is_decided:
                    acquisitions[column][place] = QUERIED
                    contents.add((acquisitions["package_sha256"][place], acquisitions["site"][place]))
    for place, content in enumerate(zip(packages["package_sha256"], packages["site"], strict=True)):
        if content in contents and packages["status"][place] == ACCEPTED:
            packages["status"][place] = QUERIED


def with_jumps_shown(evidence: Mapping[str, Any], found: list[Finding]) -> Mapping[str, Any]:
    """Return the evidence of an acquisition with what was found across visits among its findings, the gravest first."""
    if not found:
        return evidence
    return {**evidence, "findings": [*grouped(found), *evidence.get("findings", ())]}
