"""The same recording under two acquisitions: whose it is cannot be known, so neither is published.

Looked for in every night among the acquisitions in force, whichever came first: what is published depends on what is there, not on the
order it came in. The assessments stay as they are; a corrected version of one sets the other free.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from checks.acquisition.copied_signal import CHECK
from checks.verdicts import REJECTED
from flows.stage_indices import WITHHELD

if TYPE_CHECKING:
    from collections.abc import Mapping

    from flows.catalogue.lookups import Columns

SHOWN = 5
"""Copies a reason names; the rest are counted."""

EMPTIED = {
    "indices": ("value", "ci_low", "ci_high", "fit_ci_low", "fit_ci_high", "beats", "runs"),
    "changes": ("difference", "ci_low", "ci_high"),
}


def copies(channels: Columns) -> dict[str, str]:
    """Return, for each acquisition that shares a channel's content with another, the reason as a sentence.

    ``channels`` has the columns acquisition, run, channel and sha256.
    """
    places = sorted(zip(*(channels[name] for name in ("acquisition", "run", "channel", "sha256")), strict=True))
    holders: dict[str, list[tuple[str, str, str]]] = {}
    for acquisition, run, channel, sha256 in places:
        holders.setdefault(sha256, []).append((acquisition, run, channel))
    told: dict[str, list[str]] = {}
    for acquisition, run, channel, sha256 in places:
        others = [f"{other} (run {its_run})" for other, its_run, _ in holders[sha256] if other != acquisition]
        told.setdefault(acquisition, []).extend(f"{channel} of run {run} is that of acquisition {other}" for other in others)
    return {acquisition: _sentence(parts) for acquisition, parts in told.items() if parts}


def _sentence(parts: list[str]) -> str:
    shown = "; ".join(parts[:SHOWN])
    more = f"; and {len(parts) - SHOWN} more" if len(parts) > SHOWN else ""
    return f"the same recording was sent twice, so it is not known whose it is: {shown}{more}"


def with_copies_rejected(columns: Mapping[str, Columns], found: Mapping[str, str]) -> dict[str, Columns]:
    """Return the tables' columns with the acquisitions of ``found`` rejected and all they would publish withheld, for that reason."""
    if not found:
        return dict(columns)
    tables = {name: {column: list(values) for column, values in table.items()} for name, table in columns.items()}
    _reject(tables, found)
    for name, emptied in EMPTIED.items():
        table = tables[name]
        for place, acquisition in enumerate(table["acquisition"]):
            if acquisition in found:
                _set(table, place, dict.fromkeys(emptied))
                _set(table, place, {column: WITHHELD for column in ("status", "machine_status") if column in table})
                table["reason"][place] = found[acquisition]
    _log(tables["rejections"], tables["acquisitions"], found)
    return tables


def _reject(tables: Mapping[str, Columns], found: Mapping[str, str]) -> None:
    acquisitions, packages = tables["acquisitions"], tables["packages"]
    contents = {}
    for place, name in enumerate(acquisitions["acquisition"]):
        if name in found:
            reasons = sorted({*filter(None, (acquisitions["reasons"][place] or "").split(";")), CHECK.name})
            _set(acquisitions, place, {"verdict": REJECTED, "machine_verdict": REJECTED, "reasons": ";".join(reasons)})
            contents[acquisitions["package_sha256"][place], acquisitions["site"][place]] = name
    for place, content in enumerate(zip(packages["package_sha256"], packages["site"], strict=True)):
        if content in contents and packages["status"][place] in {"accepted", "queried", REJECTED}:
            packages["status"][place] = REJECTED


def _log(rejections: Columns, acquisitions: Columns, found: Mapping[str, str]) -> None:
    """Write the reason into the log: where the check could say nothing of the acquisition by itself, or as a row of its own."""
    rows = zip(rejections["acquisition"], rejections["check"], rejections["run"], strict=True)
    own = {name: place for place, (name, check, run) in enumerate(rows) if check == CHECK.name and run is None}
    sites = dict(zip(acquisitions["acquisition"], acquisitions["site"], strict=True))
    for name, reason in sorted(found.items()):
        told = {"verdict": "fail", "decisive": True, "action": "reject"}
        if name in own:
            place = own[name]
            _set(rejections, place, {**told, "reason": reason})
            continue
        row = {**dict.fromkeys(rejections), "site": sites[name], "acquisition": name, "check": CHECK.name, "reason": reason, **told}
        for column, values in rejections.items():
            values.append(row[column])


def with_copy_told(evidence: Mapping[str, Any], reason: str | None) -> Mapping[str, Any]:
    """Return the evidence of an acquisition with the copy as its first finding, in the place of what the check said by itself."""
    if reason is None:
        return evidence
    others = [one for one in evidence.get("findings", ()) if one["check"] != CHECK.name or one["run"] is not None]
    finding: dict[str, Any] = {
        "check": CHECK.name,
        "title": CHECK.title,
        "level": str(CHECK.level),
        "run": None,
        "beats": [],
        "verdict": "fail",
    }
    finding |= {"action": "reject", "value": None, "limit": None, "unit": CHECK.unit, "reason": reason, "remedy": CHECK.remedy}
    finding |= {"at_s": None, "count": 1, "spoils": sorted(CHECK.spoils)}
    return {**evidence, "findings": [finding, *others]}


def _set(table: Columns, place: int, values: Mapping[str, Any]) -> None:
    for column, value in values.items():
        table[column][place] = value
