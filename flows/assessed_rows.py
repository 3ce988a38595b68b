"""What was found, as rows of the published tables: columns of the contract, missing = None."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from checks.check import Judged, Level
from checks.verdicts import ACCEPTED, QUERIED, REJECTED, UNUSABLE, USABLE, Finding, RunVerdict
from flows.study.manifest import Manifest
from metrics.indices.end_systole import end_systole
from metrics.signals.falls import tau_ms

Row = dict[str, object]

BEAT_COLUMNS = (
    "rr_s",
    "edv_ml",
    "esv_ml",
    "sv_ml",
    "ef",
    "edp_mmhg",
    "esp_mmhg",
    "pmax_mmhg",
    "sw_mmhg_ml",
    "ea_mmhg_per_ml",
    "dpdt_max_mmhg_per_s",
    "dpdt_min_mmhg_per_s",
    "tau_ms",
)


def joined(names: Sequence[str]) -> str | None:
    """Return check names sorted and joined by semicolons, None for none."""
    return ";".join(sorted(set(names))) or None


def acquisition_row(manifest: Manifest, runs: Sequence[RunVerdict], findings: Sequence[Finding], indices: Sequence[Row]) -> Row:
    """Return the acquisition's row, without what only the night knows (versions, hashes, when it came).

    Rejected when no index is published; queried when a run or acquisition check failed; else accepted. A rejected acquisition also
    names the checks that rejected its beats.
    """
    failed = [finding.check.name for finding in findings if finding.decisive]
    failed += [check.name for run in runs for check in run.failed]
    published = any(row["status"] == "published" for row in indices)
    if not published:
        failed += [name for run in runs for names in run.rejected_by for name in names]
    verdict = REJECTED if not published else QUERIED if failed else ACCEPTED
    return {
        "site": manifest.site,
        "subject": manifest.subject,
        "visit": manifest.visit,
        "acquisition": manifest.acquisition,
        "chamber": manifest.chamber,
        "recorded_at": manifest.recorded_at,
        "verdict": verdict,
        "machine_verdict": verdict,
        "decided_by": None,
        "reasons": joined(failed),
        "runs": len(runs),
        "beats": sum(len(run.rejected_by) for run in runs),
        "beats_accepted": sum(int(run.accepted.sum()) for run in runs),
    }


def run_row(run: RunVerdict, manifest: Manifest) -> Row:
    """Return one run's row."""
    facts, signals = run.subject.facts, run.subject.signals
    verdict = USABLE if run.is_usable else UNUSABLE
    rate_hz = facts.sampling_rate_hz if signals is None else signals.sampling_rate_hz
    return {
        "site": manifest.site,
        "acquisition": manifest.acquisition,
        "run": facts.run,
        "kind": facts.kind,
        "stage": facts.stage,
        "manoeuvre": facts.manoeuvre,
        "sampling_rate_hz": rate_hz,
        "duration_s": None if signals is None else signals.pressure_mmhg.size / rate_hz,
        "verdict": verdict,
        "machine_verdict": verdict,
        "decided_by": None,
        "reasons": joined([check.name for check in run.failed]),
        "beats": len(run.rejected_by),
        "beats_accepted": int(run.accepted.sum()),
    }


def beat_rows(run: RunVerdict, manifest: Manifest, v0_ml: float | None) -> list[Row]:
    """Return the rows of a run's beats, end-systole found with V0 of the stage's line."""
    subject = run.subject
    if subject.beats is None or subject.signals is None:
        return []
    beats, rate_hz = subject.beats, subject.signals.sampling_rate_hz
    points = end_systole(subject.signals, beats, v0_ml)
    values = {name: getattr(beats, name) for name in BEAT_COLUMNS if hasattr(beats, name)}
    values |= {"esp_mmhg": points.esp_mmhg, "ea_mmhg_per_ml": points.esp_mmhg / np.where(beats.sv_ml > 0.0, beats.sv_ml, np.nan)}
    values["tau_ms"] = tau_ms(subject.signals, beats)
    nothing = np.full(len(beats), np.nan)
    columns = {name: _numbers(values.get(name, nothing)) for name in BEAT_COLUMNS}
    starts, ends = _numbers(beats.start / rate_hz), _numbers(beats.end / rate_hz)
    end_systoles = _numbers(np.where(points.at >= 0, points.at / rate_hz, np.nan))
    is_preload = subject.facts.kind == "preload-reduction"
    return [
        {
            "site": manifest.site,
            "acquisition": manifest.acquisition,
            "run": subject.facts.run,
            "beat": place + 1,
            "start_s": starts[place],
            "end_systole_s": end_systoles[place],
            "end_s": ends[place],
            "verdict": REJECTED if run.rejected_by[place] else ACCEPTED,
            "machine_verdict": REJECTED if run.rejected_by[place] else ACCEPTED,
            "decided_by": None,
            "reasons": joined(run.rejected_by[place]),
            "in_window": bool(subject.in_window[place]) if is_preload else None,
            **{name: columns[name][place] for name in BEAT_COLUMNS},
        }
        for place in range(len(beats))
    ]


def _numbers(values: np.ndarray[tuple[int], np.dtype[np.float64]]) -> list[float | None]:
    return [float(value) if np.isfinite(value) else None for value in values.tolist()]


def rejection_rows(findings: Sequence[Finding], runs: Sequence[RunVerdict], manifest: Manifest) -> list[Row]:
    """Return the rejection log: the acquisition's own findings, then each run's."""
    every = [*findings, *(finding for run in runs for finding in run.findings)]
    return [
        {
            "site": manifest.site,
            "acquisition": manifest.acquisition,
            "run": finding.run,
            "beat": finding.beat,
            "at_s": finding.at_s,
            "check": finding.check.name,
            "verdict": str(finding.verdict),
            "decisive": finding.decisive,
            "value": finding.value,
            "limit": finding.limit,
            "unit": finding.check.unit if finding.value is not None else None,
            "reason": finding.reason,
            "action": finding.action,
        }
        for finding in every
    ]


def measure_rows(judged: Sequence[Judged], runs: Sequence[RunVerdict], manifest: Manifest) -> list[Row]:
    """Return every value any check evaluated, passes too."""
    told: list[tuple[str | None, Judged]] = [(None, one) for one in judged]
    told += [(run.subject.facts.run, one) for run in runs for one in run.judged]
    return [
        {
            "site": manifest.site,
            "acquisition": manifest.acquisition,
            "run": one.runs[place] if one.runs else run,
            "beat": place + 1 if one.check.level is Level.BEAT else None,
            "check": one.check.name,
            "level": str(one.check.level),
            "value": float(value) if np.isfinite(value) else None,
            "verdict": str(one.verdict[place]),
            "limit": float(one.limit[place]) if np.isfinite(one.limit[place]) else None,
            "unit": one.check.unit,
            "revision": one.check.revision,
        }
        for run, one in told
        for place, value in enumerate(one.value.tolist())
    ]
