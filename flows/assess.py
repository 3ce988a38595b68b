"""The order of the steps for one acquisition: read, calibrate, cut into beats, judge, compute the indices, write down what was seen.

Plain functions: no orchestration, no clock, no writing. Given the same files, manifest and protocol the answer is the same.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from checks import ALL as CHECKS
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import Rules, doubted, judge_acquisition, judge_run
from flows.assessed_rows import acquisition_row, beat_rows, measure_rows, rejection_rows, run_row
from flows.channel_sums import channel_rows
from flows.corrections import calibrated_run, whole_of, with_reference_gain, without_estimated_delay
from flows.errors import InputError
from flows.evidence import evidence_of
from flows.facts import acquisition_facts, run_facts
from flows.sources.read import read_run
from flows.stage_changes import ValuedStage, change_rows
from flows.stage_indices import stage_v0_ml, stage_values, stages_of
from flows.study.manifest import MANIFEST_NAME, Manifest, ManifestRun
from flows.study.protocol import Protocol

Row = dict[str, object]


@dataclass(frozen=True)
class Assessment:
    """All that was found of one acquisition, as rows of the published tables (columns of the contract, missing = None).

    ``measures`` holds every evaluated value, passes too; ``evidence`` is JSON-able and holds what pages draw; ``channels`` holds the sums
    by which the same recording is known in another acquisition.
    """

    acquisition: Row
    runs: list[Row]
    beats: list[Row]
    rejections: list[Row]
    indices: list[Row]
    changes: list[Row] = field(default_factory=list)
    measures: list[Row] = field(default_factory=list)
    evidence: dict[str, object] = field(default_factory=dict)
    channels: list[Row] = field(default_factory=list)


def assess(files: Mapping[str, Path], manifest: Manifest, protocol: Protocol) -> Assessment:
    """Return the assessment of one acquisition; ``files`` maps payload paths to where their bytes lie.

    A run that cannot be read becomes unusable with the reason; the others go on. Raises InputError when no run can be read.
    """
    rules = rules_of(protocol)
    subjects = [prepared_run(files, manifest, run) for run in manifest.runs]
    if all(subject.recording is None for subject in subjects):
        problem = "no run can be read: " + "; ".join(str(subject.trouble).rstrip(".") for subject in subjects)
        raise InputError(problem, file=MANIFEST_NAME, field="runs", remedy="Correct the files and send the package again.")
    runs = [judge_run(subject, CHECKS, rules) for subject in subjects]
    if protocol.policy.correct_estimated_delay:
        runs = [without_estimated_delay(run, rules) for run in runs]
    facts = acquisition_facts(manifest, protocol)
    whole = whole_of(AcquisitionSubject(facts), runs)
    judged, told = judge_acquisition(whole, CHECKS, rules)
    if protocol.policy.alpha_from_reference:
        runs, whole, judged, told = with_reference_gain((runs, whole, judged, told), rules)
    runs = [doubted(run, told) for run in runs]
    findings = tuple(finding for finding in told if finding.run is None)
    failed = tuple(finding.check for finding in findings if finding.decisive)
    reasons = {finding.check.name: finding.reason for finding in findings}
    stages = stages_of(runs, failed, reasons, facts.bsa_m2)
    key: Row = {"site": manifest.site, "subject": manifest.subject, "visit": manifest.visit, "acquisition": manifest.acquisition}
    valued = [ValuedStage(stage, stage_values(stage)) for stage in stages]
    indices: list[Row] = [
        {**key, "chamber": manifest.chamber, "stage": one.stage.name, **value.row} for one in valued for value in one.values
    ]
    v0_by_stage = {stage.name: stage_v0_ml(stage) for stage in stages}
    beats = [row for run in runs for row in beat_rows(run, manifest, v0_by_stage.get(run.subject.facts.stage))]
    rejections = rejection_rows(findings, runs, manifest)
    acquisition = acquisition_row(manifest, runs, findings, indices)
    run_rows = [run_row(run, manifest) for run in runs]
    return Assessment(
        acquisition=acquisition,
        runs=run_rows,
        beats=beats,
        rejections=rejections,
        indices=indices,
        changes=[{**key, **row} for row in change_rows(valued, facts.reference_stage)],
        measures=measure_rows(judged, runs, manifest),
        evidence=evidence_of(manifest, runs, findings, run_rows, beats, indices),
        channels=channel_rows(subjects, manifest.site, manifest.acquisition),
    )


def rules_of(protocol: Protocol) -> Rules:
    """Return what a protocol says about judging."""
    return Rules(protocol.limits, protocol.policy.suspect == "reject", frozenset(protocol.policy.required_checks))


def prepared_run(files: Mapping[str, Path], manifest: Manifest, run: ManifestRun) -> RunSubject:
    """Return one run read, calibrated and cut into beats; what stopped it stands in ``trouble``."""
    facts = run_facts(manifest, run)
    try:
        recording = read_run(files, manifest, run)
    except InputError as error:
        return RunSubject(facts, None, trouble=str(error))
    return calibrated_run(recording, facts)
