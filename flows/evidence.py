"""What the pages of an acquisition draw: small, JSON-able, taken from the signals once so that no page needs them again."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from checks.check import Level, Verdict
from checks.verdicts import Finding, RunVerdict
from flows.study.manifest import Manifest
from metrics.arrays import BoolArray, FloatArray, IntArray
from metrics.indices.card import RunBeats
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals, two_point_line

TRACE_POINTS = 3000
LOOP_POINTS = 48
LOOPS_SHOWN = 160
REJECTED_SHOWN = 80
BEAT_FIELDS = (
    "beat",
    "start_s",
    "end_s",
    "verdict",
    "reasons",
    "in_window",
    "edv_ml",
    "esv_ml",
    "sv_ml",
    "edp_mmhg",
    "esp_mmhg",
    "pmax_mmhg",
    "sw_mmhg_ml",
    "dpdt_max_mmhg_per_s",
    "rr_s",
)
Row = dict[str, object]


def evidence_of(
    manifest: Manifest,
    runs: Sequence[RunVerdict],
    findings: Sequence[Finding],
    run_rows: Sequence[Row],
    beats: Sequence[Row],
    indices: Sequence[Row],
) -> dict[str, object]:
    """Return the evidence of one acquisition: its facts, each run's drawings, the findings worst first, the indices of whole stages."""
    return {
        "acquisition": {
            "site": manifest.site,
            "subject": manifest.subject,
            "visit": manifest.visit,
            "acquisition": manifest.acquisition,
            "chamber": manifest.chamber,
            "recorded_at": manifest.recorded_at.isoformat(),
            "calibration": calibration_facts(manifest, runs),
        },
        "runs": [_run(run, row, beats) for run, row in zip(runs, run_rows, strict=True)],
        "findings": grouped([*findings, *(finding for run in runs for finding in run.findings)]),
        "indices": [row for row in indices if row["run"] is None],
    }


def _run(run: RunVerdict, row: Row, beats: Sequence[Row]) -> Row:
    subject = run.subject
    drawn: Row = {
        **{name: row[name] for name in ("run", "kind", "stage", "manoeuvre", "verdict", "reasons", "sampling_rate_hz", "duration_s")},
        "detector": None,
        "trace": None,
        "beats": [{name: beat[name] for name in BEAT_FIELDS} for beat in beats if beat["run"] == row["run"]],
        "loops": [],
        "template": None,
        "line": None,
        "window_s": None,
    }
    if subject.signals is None or subject.beats is None:
        return drawn
    pressure_mmhg, volume_ml = beat_shapes(subject.signals, subject.beats)
    rate_hz = subject.signals.sampling_rate_hz
    drawn |= {
        "detector": subject.beats.detector,
        "trace": trace(subject.signals),
        "loops": [
            {"beat": int(place) + 1, "pressure_mmhg": _rounded(pressure_mmhg[place]), "volume_ml": _rounded(volume_ml[place])}
            for place in shown_beats(run.accepted)
        ],
        "template": template(pressure_mmhg, volume_ml, run.accepted),
        "line": _line(run),
    }
    if subject.window is not None:
        window = subject.window
        drawn["window_s"] = [float(subject.beats.start[window.onset_at] / rate_hz), float(subject.beats.end[window.last_at] / rate_hz)]
    return drawn


def trace(signals: Signals) -> Row:
    """Return pressure and volume over time in at most 3,000 points: each one's smallest and largest of each stretch, so spikes survive."""
    count = signals.pressure_mmhg.size
    kept = np.arange(count)
    if count > TRACE_POINTS:
        stretch = -(-4 * count // TRACE_POINTS)
        edges = np.arange(0, count, stretch)
        channels = (signals.pressure_mmhg, signals.volume_ml)
        extremes = [edges + _arg_in_stretches(values, stretch, choose) for values in channels for choose in (np.argmin, np.argmax)]
        kept = np.unique(np.concatenate(extremes))
    return {
        "time_s": _rounded(kept / signals.sampling_rate_hz, 4),
        "pressure_mmhg": _rounded(signals.pressure_mmhg[kept]),
        "volume_ml": _rounded(signals.volume_ml[kept]),
    }


def _arg_in_stretches(values: FloatArray, stretch: int, choose: Callable[..., IntArray]) -> IntArray:
    padded = np.pad(values, (0, -values.size % stretch), mode="edge").reshape(-1, stretch)
    place = choose(padded, axis=1)
    return np.minimum(place, values.size - 1 - np.arange(padded.shape[0]) * stretch)


def beat_shapes(signals: Signals, beats: Beats) -> tuple[FloatArray, FloatArray]:
    """Return pressure and volume of each beat on 48 instants evenly spread over it, both of shape (n_beats, 48)."""
    share = np.linspace(0.0, 1.0, LOOP_POINTS)
    at = beats.start[:, None] + share[None, :] * (beats.end - beats.start)[:, None]
    grid = np.arange(signals.pressure_mmhg.size)
    return np.interp(at, grid, signals.pressure_mmhg), np.interp(at, grid, signals.volume_ml)


def shown_beats(accepted: BoolArray) -> IntArray:
    """Return the positions of the beats whose loops are kept: all up to 160, else the first 80 rejected and thinned accepted ones."""
    if accepted.size <= LOOPS_SHOWN:
        return np.arange(accepted.size)
    rejected = np.flatnonzero(~accepted)[:REJECTED_SHOWN]
    sound = np.flatnonzero(accepted)
    room = LOOPS_SHOWN - rejected.size
    thinned = sound[np.unique(np.linspace(0, sound.size - 1, min(room, sound.size)).astype(np.int64))] if sound.size else sound
    return np.sort(np.concatenate([rejected, thinned]))


def template(pressure_mmhg: FloatArray, volume_ml: FloatArray, accepted: BoolArray) -> Row | None:
    """Return the median accepted beat on normalised time, None when no beat was accepted."""
    if not accepted.any():
        return None
    return {
        "pressure_mmhg": _rounded(np.median(pressure_mmhg[accepted], axis=0)),
        "volume_ml": _rounded(np.median(volume_ml[accepted], axis=0)),
    }


def _line(run: RunVerdict) -> Row | None:
    """Return the end-systolic points of the window and the line through them, None when there is no line."""
    subject = run.subject
    if subject.window is None or subject.signals is None or subject.beats is None:
        return None
    chosen = run.accepted & subject.in_window
    try:
        fitted = RunBeats(subject.facts.run, subject.signals, subject.beats, chosen).end_systolic_line
    except ValueError:
        return None
    return {
        "ees_mmhg_per_ml": fitted.line.slope,
        "v0_ml": fitted.line.axis_intercept,
        "volume_ml": _rounded(fitted.volume_ml),
        "pressure_mmhg": _rounded(fitted.pressure_mmhg),
        "beat": (np.flatnonzero(chosen) + 1).tolist()[: fitted.volume_ml.size],
    }


def grouped(findings: Sequence[Finding]) -> list[Row]:
    """Return one entry a check and run, fails before suspects, those touching more first; what was not evaluated stays in the log."""
    heaps: dict[tuple[str, str | None, Verdict], list[Finding]] = {}
    for finding in findings:
        if finding.verdict is not Verdict.NOT_EVALUATED or finding.decisive:
            heaps.setdefault((finding.check.name, finding.run, finding.verdict), []).append(finding)
    entries = [_entry(heap) for heap in heaps.values()]
    levels = {str(Level.ACQUISITION): 0, str(Level.RUN): 1, str(Level.BEAT): 2}
    return sorted(
        entries,
        key=lambda e: (e["verdict"] == "suspect", levels[str(e["level"])], -int(str(e["count"])), str(e["check"]), str(e["run"])),
    )


def _entry(heap: list[Finding]) -> Row:
    worst = max(heap, key=lambda finding: abs((finding.value or 0.0) - (finding.limit or 0.0)))
    check = worst.check
    return {
        "check": check.name,
        "title": check.title,
        "level": str(check.level),
        "run": worst.run,
        "beats": [finding.beat for finding in heap if finding.beat is not None],
        "verdict": str(worst.verdict),
        "action": worst.action,
        "value": worst.value,
        "limit": worst.limit,
        "unit": check.unit,
        "reason": worst.reason,
        "remedy": check.remedy,
        "at_s": worst.at_s,
        "count": len(heap),
        "spoils": sorted(check.spoils),
    }


def calibration_facts(manifest: Manifest, runs: Sequence[RunVerdict]) -> list[list[str]]:
    """Return what is known of the calibration, as (label, text) pairs for a reader."""
    if not runs:
        return []
    pressure, volume = runs[0].subject.facts.pressure, runs[0].subject.facts.volume
    k, b = two_point_line(pressure.points)
    zeros = ", ".join(f"{zero.mmhg:g} mmHg" for zero in pressure.zeros) or "none sent"
    told = [
        ["Pressure sensor", manifest.sensors.pressure.kind or "not declared"],
        [
            "Pressure line",
            f"read = {k:.4g} x applied {b:+.3g} mmHg, {len(pressure.points)} points" if pressure.points else "no points sent",
        ],
        ["Pressure zeros", zeros],
        ["Volume sensor", manifest.sensors.volume.kind or "not declared"],
        ["Volume", "taken as mL, already calibrated" if volume.calibrated else "raw, (raw - alpha Vc) / alpha"],
        ["Alpha", "not sent" if volume.alpha is None else f"{volume.alpha:g}"],
        ["Alpha Vc", "not sent" if volume.alpha_vc_ml is None else f"{volume.alpha_vc_ml:g} mL"],
    ]
    reference = manifest.calibration.volume.reference
    if reference is None:
        return [*told, ["Reference", "none sent"]]
    parts = [("EDV", reference.edv_ml), ("ESV", reference.esv_ml), ("SV", reference.sv_ml)]
    return [*told, ["Reference", f"{reference.source}: " + ", ".join(f"{name} {ml:g} mL" for name, ml in parts if ml is not None)]]


def _rounded(values: FloatArray, decimals: int = 2) -> list[float]:
    rounded: list[float] = np.round(values, decimals).tolist()
    return rounded
