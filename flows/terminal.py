"""An assessment as lines for a terminal: the verdict first, then why, then what is left of the numbers."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping, Sequence
from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from flows.assess import Assessment

CAUTION = "For research and quality assurance only; not for diagnosis or treatment. Licensed clinicians and local rules decide."
TABLES = ("acquisition", "runs", "beats", "rejections", "indices", "changes")

Row = Mapping[str, Any]


def verdict_lines(assessment: Assessment) -> list[str]:
    """Return what `check` prints: verdict, findings worst first with what to do, runs, indices by stage, withheld indices, caution."""
    acquisition = assessment.acquisition
    who = f"{acquisition['acquisition']} ({acquisition['site']}, subject {acquisition['subject']}, {acquisition['visit']})"
    counts = f"{acquisition['beats_accepted']} of {acquisition['beats']} beats accepted"
    return [
        f"{str(acquisition['verdict']).upper()}  {who}, {acquisition['chamber']}, {counts}",
        *_section("Why", _finding_lines(assessment)),
        *_section("Runs", [_run_line(run) for run in assessment.runs]),
        *_section("Rejected beats", _rejected_lines(assessment.beats)),
        *_section("Indices (95 % interval)", _index_lines(assessment.indices)),
        *_section("Changes between stages (95 % interval)", _change_lines(assessment.changes)),
        *_section("Withheld", _withheld_lines(assessment.indices)),
        "",
        CAUTION,
    ]


def tables_json(assessment: Assessment) -> str:
    """Return the assessment's tables as one JSON object, in the contract's columns; instants in UTC, what is missing null."""
    tables = {name: getattr(assessment, name) for name in TABLES}
    return json.dumps(tables, indent=1, ensure_ascii=False, allow_nan=False, default=_instant)


def _instant(value: object) -> str:
    if isinstance(value, datetime):
        return value.astimezone(UTC).isoformat().replace("+00:00", "Z")
    message = f"{type(value).__name__} has no place in a table"
    raise TypeError(message)


def _section(title: str, lines: Sequence[str]) -> list[str]:
    return ["", title, *(f"  {line}" for line in lines)] if lines else []


def _finding_lines(assessment: Assessment) -> list[str]:
    """Return each check that failed, or is suspect, once a run: its sentence, its reach, and the remedy below it."""
    findings = assessment.evidence.get("findings", [])
    lines: list[str] = []
    for finding in findings if isinstance(findings, list) else []:
        if finding["verdict"] not in {"fail", "suspect"}:
            continue
        where = "" if finding["run"] is None else f" in {finding['run']}"
        count = f", {_counted(finding['count'], 'beat')}" if finding["beats"] else ""
        lines.append(f"{finding['verdict']:7}  {finding['check']}{where}{count}: {finding['reason']}")
        if finding["verdict"] == "fail" and finding["remedy"]:
            lines.append(f"{'':9}to do: {finding['remedy']}")
    return lines


def _run_line(run: Row) -> str:
    rate = f"{run['sampling_rate_hz']:g} Hz"
    what = " ".join(str(run[key]) for key in ("kind", "stage", "manoeuvre") if run[key] is not None)
    reasons = f" ({str(run['reasons']).replace(';', ', ')})" if run["reasons"] else ""
    length = "" if run["duration_s"] is None else f", {run['duration_s']:.1f} s"
    return f"{run['verdict']:8}  {run['run']}: {what}{length} at {rate}, {run['beats_accepted']} of {run['beats']} beats accepted{reasons}"


def _rejected_lines(beats: Iterable[Row]) -> list[str]:
    """Return, for each run and set of reasons, the numbers of the beats rejected for it."""
    groups: dict[tuple[str, str], list[int]] = {}
    for beat in beats:
        if beat["verdict"] == "rejected":
            groups.setdefault((str(beat["run"]), str(beat["reasons"]).replace(";", ", ")), []).append(int(beat["beat"]))
    return [f"{run}: {number_ranges(numbers)} for {reasons}" for (run, reasons), numbers in groups.items()]


def number_ranges(numbers: Iterable[int]) -> str:
    """Return numbers in short form.

    >>> number_ranges([1, 2, 3, 7, 9, 10])
    '1-3, 7, 9-10'
    """
    spans: list[list[int]] = []
    for number in sorted(numbers):
        if spans and number == spans[-1][1] + 1:
            spans[-1][1] = number
        else:
            spans.append([number, number])
    return ", ".join(f"{first}" if first == last else f"{first}-{last}" for first, last in spans)


def _index_lines(indices: Sequence[Row]) -> list[str]:
    return _aligned(
        (row["stage"] or "no stage", row["index"], _value(row["value"], row), _interval(row), row["estimator"])
        for row in indices
        if row["primary"] and row["status"] == "published"
    )


def _change_lines(changes: Sequence[Row]) -> list[str]:
    return _aligned(
        (f"{row['from_stage']} to {row['to_stage']}", f"{row['index']} {row['part']}", _value(row["difference"], row), _interval(row))
        for row in changes
        if row["status"] == "published"
    )


def _aligned(rows: Iterable[tuple[str, ...]]) -> list[str]:
    table = list(rows)
    widths = [max(map(len, column)) for column in zip(*table, strict=True)]
    return ["  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in table]


def _value(value: float, row: Row) -> str:
    return f"{value:.4g} {row['unit']}".removesuffix(" 1")


def _interval(row: Row) -> str:
    if row["ci_low"] is not None and row["ci_high"] is not None:
        return f"{row['ci_low']:.4g} to {row['ci_high']:.4g}"
    if row.get("fit_ci_low") is not None and row.get("fit_ci_high") is not None:
        return f"{row['fit_ci_low']:.4g} to {row['fit_ci_high']:.4g}, fit alone"
    return ""


def _withheld_lines(indices: Iterable[Row]) -> list[str]:
    """Return the withheld indices of each stage, those with one reason together."""
    groups: dict[tuple[str, str], list[str]] = {}
    for row in indices:
        if row["primary"] and row["status"] == "withheld":
            groups.setdefault((str(row["stage"] or "no stage"), str(row["reason"])), []).append(str(row["index"]))
    return [f"{stage}  {', '.join(names)}: {reason}" for (stage, reason), names in groups.items()]


def _counted(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"
