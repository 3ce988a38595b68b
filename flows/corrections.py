"""What the study's policy lets evidence put right: a gain from the reference stroke volume, a delay from the onset of ejection.

Both are off unless the protocol says otherwise. A correction calibrates the runs anew and has them judged again, so that what it undoes
is no longer withheld and what it does not undo still is. Each stands in the rejection log as a row with the action ``correct``.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from checks import ALL as CHECKS
from checks.acquisition.reference import STROKE_VOLUME, flow_is_forward_only, stroke_ml
from checks.acquisition.volume_calibration import GAIN_KNOWN
from checks.check import Check, Judged, Verdict
from checks.run.channel_delay import CHECK as CHANNEL_DELAY
from checks.run.channel_delay import volume_late_ms
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import Finding, Rules, RunVerdict, judge_acquisition, judge_run
from metrics.signals.calibrate import calibrated
from metrics.signals.facts import RunFacts
from metrics.signals.landmarks import beats_of
from metrics.signals.recording import Recording

Judgement = tuple[list[RunVerdict], AcquisitionSubject, tuple[Judged, ...], tuple[Finding, ...]]
"""Verdicts on the runs, the acquisition as the checks saw it, what its checks found, and their rows of the rejection log."""


def calibrated_run(recording: Recording, facts: RunFacts) -> RunSubject:
    """Return a recording calibrated and cut into beats; what stopped it stands in ``trouble``.

    Saline runs are not cut: they carry no pressure, and calibrate volumes instead of being judged.
    """
    if facts.kind == "saline":
        return RunSubject(facts, recording)
    try:
        signals = calibrated(recording, facts)
    except ValueError as error:
        return RunSubject(facts, recording, trouble=f"run {facts.run}: {error}")
    return RunSubject(facts, recording, signals, beats_of(signals, facts.chamber))


def without_estimated_delay(run: RunVerdict, rules: Rules) -> RunVerdict:
    """Return the verdict on a left ventricle's run with the delay taken out that its own check finds, and a row that says so.

    The run as it was, where the check found nothing or where it would still find something afterwards.
    """
    recording = run.subject.recording
    if _verdict(run.judged, CHANNEL_DELAY) not in {Verdict.SUSPECT, Verdict.FAIL} or run.subject.facts.chamber != "LV" or recording is None:
        return run
    late_ms = volume_late_ms(run.subject)
    moved = {
        name: replace(channel, delay_s=channel.delay_s + late_ms / 1000.0) if name == "volume" or name.startswith("segment-") else channel
        for name, channel in recording.channels.items()
    }
    again = judge_run(calibrated_run(replace(recording, channels=moved), run.subject.facts), CHECKS, rules)
    if _verdict(again.judged, CHANNEL_DELAY) is not Verdict.PASS:
        return run
    told = f"volume was found {abs(late_ms):.0f} ms {'late' if late_ms > 0.0 else 'early'} and moved by as much, as the protocol allows"
    return replace(again, findings=(*again.findings, _corrected(CHANNEL_DELAY, run.subject.facts.run, late_ms, told)))


def with_reference_gain(judgement: Judgement, rules: Rules) -> Judgement:
    """Return the judgement with alpha set to raw over reference stroke volume where it is missing or the reference contradicts it.

    Baan 1984, Circulation 70:812 (read in abstract). The judgement as it was, where there is nothing to set it by or no raw volume.
    """
    runs, whole, judged, _ = judgement
    reference = whole.facts.reference
    guilty = next((check for check in (GAIN_KNOWN, STROKE_VOLUME) if _verdict(judged, check) in {Verdict.SUSPECT, Verdict.FAIL}), None)
    raw = [run.subject.facts.volume for run in runs if not run.subject.facts.volume.calibrated]
    expected_ml = None if reference is None or flow_is_forward_only(whole) else stroke_ml(reference)
    ratio = whole.steady_medians()["sv_ml"] / expected_ml if expected_ml else float("nan")
    if guilty is None or not raw or not (np.isfinite(ratio) and ratio > 0.0):
        return judgement
    was = "missing" if raw[0].alpha is None else f"{raw[0].alpha:.3g}"
    alpha = (1.0 if raw[0].alpha is None else raw[0].alpha) * ratio
    again = [_with_gain(run, ratio, rules) for run in runs]
    seen = whole_of(replace(whole, facts=replace(whole.facts, volume=again[0].subject.facts.volume)), again)
    judged, findings = judge_acquisition(seen, CHECKS, rules)
    told = f"alpha was {was} and is set to {alpha:.3g}, raw over reference stroke volume, as the protocol allows"
    return again, seen, judged, (*findings, _corrected(guilty, None, alpha, told))


def whole_of(whole: AcquisitionSubject, runs: Sequence[RunVerdict]) -> AcquisitionSubject:
    """Return an acquisition with these judged runs for its own."""
    spoiled = {run.subject.facts.run: run.spoiled for run in runs}
    return replace(whole, runs=tuple(run.subject for run in runs), spoiled=spoiled)


def _with_gain(run: RunVerdict, ratio: float, rules: Rules) -> RunVerdict:
    facts, recording = run.subject.facts, run.subject.recording
    if facts.volume.calibrated or recording is None:
        return run
    alpha = (1.0 if facts.volume.alpha is None else facts.volume.alpha) * ratio
    again = judge_run(calibrated_run(recording, replace(facts, volume=replace(facts.volume, alpha=alpha))), CHECKS, rules)
    return replace(again, findings=(*again.findings, *(finding for finding in run.findings if finding.action == "correct")))


def _verdict(judged: Sequence[Judged], check: Check) -> Verdict:
    return next((one.worst() for one in judged if one.check.name == check.name), Verdict.NOT_EVALUATED)


def _corrected(check: Check, run: str | None, value: float, reason: str) -> Finding:
    return Finding(check, run, None, None, Verdict.SUSPECT, decisive=False, value=value, limit=None, reason=reason, action="correct")
