"""Every simulated fault, from hardly noticeable to gross: found, never judged milder as it grows, and nothing else cries out."""

import re

import pytest

from checks import ALL
from checks.check import Level, Verdict
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.ladders import ACQUISITION_LADDERS, LADDERS, RUN_LADDERS
from tests.checks.made_acquisitions import judged, sound
from tests.checks.made_subjects import CHECKS, beats_at

GRADE = {Verdict.PASS: 0, Verdict.NOT_EVALUATED: 0, Verdict.SUSPECT: 1, Verdict.FAIL: 2}
RANGES = {check.name for check in ALL if check.name.startswith("range-")}
WIRING = {"pressure-units", "volume-units", "swapped-channels", "pressure-inverted", "volume-inverted", "loop-direction"}
STANDSTILL = {"pressure-flat", "volume-flat", "pressure-dropout", "volume-dropout"}
SHIFTED = {"pressure-shift-elsewhere", "volume-shift-elsewhere"}
VISITS = {"visits-agree-volume", "visits-agree-pressure", "visits-agree-heart-rate"}
COURSE = {"pressure-step", "volume-step", "pressure-drift", "volume-drift"}
COURSE |= {
    "edp-step",
    "esv-step",
    "edp-drift",
    "esv-drift",
    "pressure-shift-elsewhere",
    "volume-shift-elsewhere",
    "edp-steadiness",
    "work-steadiness",
    "segment-swing",
    "channel-delay",
    "channel-delay-gross",
    "damping",
    "damping-peak",
    "pressure-late",
    "damping-gross",
    "steadiness",
    "respiration-as-declared",
    "rhythm-as-declared",
    "segment-phase",
}
QUIET = {check.name for check in ALL if re.search("hum|noise|quantisation|ringing|ecg-leak|beats-accepted", check.name)}
CUT = {check.name for check in ALL if "-clipping-" in check.name}
GROSS = {"samples-scattered": Verdict.SUSPECT, "rate-misdeclared": Verdict.SUSPECT}
"""How the grossest fault of a ladder is judged where that is no fail: a fifth of the samples may go, beat by beat, and a wrong rate may
be declared where time stamps, clock times and heart rate agree."""

ALSO_FOUND = {
    "fluid-filled": {"ringing", "channel-delay", "damping"},
    "samples-scattered": {"missing-samples"},
    "flat-line": {"loop-closure", "held-signal"} | RANGES,
    "premature-beats": {"loop-closure"},
    "pressure-clipped": CUT,
    "volume-gain-wrong": {"reference-volumes"},
    "parallel-volume-wrong": {"reference-stroke-volume"},
    "occlusion-shallow": {"preload-adequacy-work"},
    "volume-clipped": {"reference-stroke-volume", "reference-volumes", "pressure-drift", "channel-delay", "channel-delay-gross", "damping"},
    "pressure-in-kpa": {"preload-beats"},
    "volume-times": {"preload-beats", "reference-stroke-volume", "reference-volumes"},
}
"""What else a fault truly breaks beside the check it is made for."""

ELSEWHERE = {
    "landmarks": "a drawn beat's landmarks are moved, tests/checks/beat/test_landmarks_and_ranges.py",
    "beats-found": "a drawn run has ever fewer beats, tests/checks/run/test_time.py",
    "preload-beats": "ever fewer beats are accepted, tests/checks/run/test_preload.py",
    "preload-adequacy-work": "an ever shallower occlusion, tests/checks/run/test_preload.py",
    "held-signal": "a value is held in ever longer pieces, tests/checks/run/test_standstill.py",
    **dict.fromkeys(VISITS, "visits lie ever further apart, tests/checks/acquisition/test_visits_agree.py"),
    **dict.fromkeys(WIRING, "wired wrongly in some runs, tests/checks/run/test_wiring_and_units.py"),
    **dict.fromkeys(STANDSTILL, "ever more of a run stands still, tests/checks/run/test_standstill.py"),
    **dict.fromkeys(COURSE, "sensors move in the course of a run, tests/checks/run/test_course_ladders.py"),
    **dict.fromkeys(CUT, "ever more is cut off at either end, tests/checks/run/test_clipping.py"),
    **dict.fromkeys(QUIET, "ever louder or coarser, tests/checks/run/test_noise_and_hum.py"),
    **dict.fromkeys(RANGES, "drawn beats run away, tests/checks/beat/test_landmarks_and_ranges.py"),
}
"""Checks whose ladder no simulated fault climbs, and where it stands."""


@pytest.fixture(scope="module", params=LADDERS, ids=lambda ladder: ladder.name)
def climbed(request):
    """A ladder with what was found at each of its severities."""
    found = []
    for severity in request.param.severities:
        injected = request.param.inject(sound(), severity)
        found.append((severity, injected, *judged(injected.acquisition)))
    return request.param, found


def grade(check, run, runs, acquisition):
    """How gravely a check judged what it was made for; a beat it could not judge does not count."""
    pool = acquisition if run is None else runs[run].judged
    one = next(judged for judged in pool if judged.check.name == check)
    return max((GRADE[verdict] for verdict in one.verdict), default=0)


def test_a_growing_fault_never_improves_the_verdict_and_a_gross_one_is_found(climbed):
    ladder, found = climbed
    grades = {}
    for _, injected, runs, acquisition, _ in found:
        for expected in injected.expected:
            grades.setdefault((expected.check, expected.run), []).append(grade(expected.check, expected.run, runs, acquisition))
    gross = GRADE[GROSS.get(ladder.name, Verdict.FAIL)]
    for key, climbs in grades.items():
        assert climbs == sorted(climbs), key
        assert climbs[-1] == gross, key


def test_the_beats_truly_touched_by_a_gross_fault_are_the_ones_rejected(climbed):
    ladder, found = climbed
    _, injected, runs, _, _ = found[-1]
    touched = {}
    for expected in injected.expected:
        if expected.instants_s:
            touched.setdefault(expected.run, set()).update(beats_at(runs[expected.run].subject, expected.instants_s))
    for name, run in runs.items():
        lost = {place + 1 for place, names in enumerate(run.rejected_by) if names}
        if name in touched:
            assert touched[name] <= lost
            near = {beat + step for beat in touched[name] for step in (-1, 0, 1)}
            assert lost <= near
        elif ladder.name != "samples-scattered" and run.is_usable:
            assert not lost


def test_nothing_cries_out_that_the_fault_does_not_break(climbed):
    ladder, found = climbed
    for severity, injected, runs, _, findings in found:
        decisive = {finding.check.name for finding in findings if finding.decisive}
        decisive |= {finding.check.name for run in runs.values() for finding in run.findings if finding.decisive}
        made_for = {expected.check for expected in injected.expected}
        assert decisive <= made_for | ALSO_FOUND.get(ladder.name, set()), severity


def test_every_check_has_a_ladder():
    climbs = {expected.check for ladder in LADDERS for expected in ladder.inject(sound(), ladder.severities[-1]).expected}
    whole, _ = clean_acquisition("normal")
    of_runs = [ladder for ladder in RUN_LADDERS if ladder.name in {"pressure-sent-in-cmh2o", "volume-calibrated-twice"}]
    for ladder in (*ACQUISITION_LADDERS, *of_runs):
        climbs |= {expected.check for expected in ladder.inject(whole, ladder.severities[-1]).expected}
    assert climbs | set(ELSEWHERE) == set(CHECKS)
    assert {check.name for check in ALL if check.level is Level.ACQUISITION and check.name in ELSEWHERE} == VISITS | SHIFTED
