"""What happens in the course of a run, from hardly noticeable to gross: found by its check, no milder as it grows, nothing in health."""

import functools

import numpy as np
import pytest

from checks import spoils
from checks.check import Verdict
from checks.subject import AcquisitionSubject
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.faults import with_columns
from flows.sources.simulated.forms import as_segments
from flows.sources.simulated.heart import HEARTS
from flows.sources.simulated.ladders import RUN_LADDERS
from flows.sources.simulated.rhythm import Conditions
from metrics.signals.facts import AcquisitionFacts
from tests.checks import made_acquisitions
from tests.checks.made_acquisitions import judged
from tests.checks.made_subjects import (
    BREATHING,
    BREATHING_RAMP,
    CHECKS,
    FIBRILLATING,
    REFLEX,
    SINUS_ARRHYTHMIA,
    declared,
    drawn,
    judged_run,
    of,
    rerecorded,
    simulated,
    worst,
)

PREMATURE = Conditions(duration_s=24.0, premature_s=(8.0, 16.0))


@pytest.fixture(autouse=True)
def _segments_are_in_ml(monkeypatch):
    """Let acquisitions be judged that send segments in place of a volume."""
    segments = {f"segment-{number}": "mL" for number in range(1, 6)}
    monkeypatch.setattr(made_acquisitions, "UNITS", made_acquisitions.UNITS | segments)


LADDERS = {ladder.name: ladder for ladder in RUN_LADDERS}
GRADE = {Verdict.PASS: 0, Verdict.NOT_EVALUATED: 0, Verdict.SUSPECT: 1, Verdict.FAIL: 2}
COURSE = ("pressure-step", "volume-step", "pressure-drift", "volume-drift", "edp-step", "esv-step", "edp-drift", "esv-drift")
FAILS_FROM = {
    ("pressure-step", "rest"): 10.0,
    ("pressure-step", "ramp-1"): 5.0,
    ("volume-step", "rest"): 10.0,
    ("volume-step", "ramp-1"): 10.0,
    ("pressure-drifting", "rest"): 20.0,
    ("pressure-drifting", "ramp-1"): 10.0,
    ("volume-drifting", "rest"): 20.0,
    ("volume-drifting", "ramp-1"): 10.0,
    ("edp-step", "rest"): 2.0,
    ("edp-drift", "rest"): 5.0,
    ("esv-step", "rest"): 10.0,
    ("esv-drift", "rest"): 20.0,
    ("steady-ramping", "rest"): 0.012,
    ("edp-steadiness", "rest"): 0.012,
    ("work-steadiness", "rest"): 0.012,
    ("segment-swing", "rest"): 0.4,
    ("respiration-undeclared", "rest"): 0.12,
    ("rhythm-undeclared", "ramp-1"): 0.26,
    ("segment-astray", "rest"): 0.6,
    ("segment-astray", "ramp-1"): 0.6,
}
"""By which step at the latest a run fails."""

CHECK = {
    "pressure-drifting": "pressure-drift",
    "volume-drifting": "volume-drift",
    "steady-ramping": "steadiness",
    "respiration-undeclared": "respiration-as-declared",
    "rhythm-undeclared": "rhythm-as-declared",
    "segment-astray": "segment-phase",
}
FAULT = {
    "edp-step": "pressure-step",
    "esv-step": "volume-step",
    "edp-drift": "pressure-drifting",
    "esv-drift": "volume-drifting",
    "edp-steadiness": "steady-ramping",
    "work-steadiness": "steady-ramping",
    "segment-swing": "segment-astray",
}
"""The faults that lesser checks of the same measure find as well."""

ASKS_ONLY = {"rhythm-undeclared"}
"""Faults of which a sound heart may show as much, so that they are asked about and no more."""

OTHERS = (
    "channel-delay",
    "channel-delay-gross",
    "damping",
    "damping-peak",
    "damping-gross",
    "pressure-late",
    "steadiness",
    "edp-steadiness",
    "work-steadiness",
    "respiration-as-declared",
    "rhythm-as-declared",
    "segment-phase",
    "segment-swing",
)


@functools.lru_cache(maxsize=2)
def climbed(name, heart):
    """The runs of an acquisition, judged at each severity of a fault."""
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    return [judged(LADDERS[name].inject(acquisition, severity).acquisition)[0] for severity in LADDERS[name].severities]


def prepared_run_of(name, severity, heart="normal"):
    """The run at rest with a fault in it."""
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    return judged(LADDERS[name].inject(acquisition, severity).acquisition)[0]["rest"].subject


def climb(name, heart, run, check):
    return [GRADE[of(runs[run], check).worst()] if runs[run].is_usable else 2 for runs in climbed(name, heart)]


@pytest.mark.parametrize(("name", "run"), FAILS_FROM)
@pytest.mark.parametrize("heart", ["normal", "failing", "right-loaded"])
def test_what_goes_wrong_in_the_course_of_a_run_is_found_by_its_check(name, run, heart):
    fault = FAULT.get(name, name)
    grades = climb(fault, heart, run, CHECK.get(name, name))
    due = LADDERS[fault].severities.index(FAILS_FROM[name, run])
    assert grades[0] == 0
    assert grades[: due + 1] == sorted(grades[: due + 1])
    assert grades[due] == (1 if name in ASKS_ONLY else 2)


@pytest.mark.parametrize("heart", [heart.name for heart in HEARTS])
def test_a_sound_acquisition_shows_no_sensor_that_moves(heart):
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    runs, _, _ = judged(acquisition)
    assert {one.worst() for run in runs.values() for one in run.judged if one.check.name in COURSE} == {Verdict.PASS}


@pytest.mark.parametrize("heart", ["normal", "stiff", "right"])
@pytest.mark.parametrize("per_s", [0.005, 0.012])
def test_a_heart_that_truly_empties_is_no_sensor_that_moves(heart, per_s):
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    runs, _, _ = judged(LADDERS["steady-ramping"].inject(acquisition, per_s).acquisition)
    assert {of(runs["rest"], check).worst() for check in COURSE} == {Verdict.PASS}


@pytest.mark.parametrize("fault", ["volume-late", "pressure-late"])
@pytest.mark.parametrize("heart", ["normal", "large", "failing", "stiff"])
def test_a_delay_is_found_once_it_weighs(fault, heart):
    for run in ("rest", "ramp-1"):
        grades = climb(fault, heart, run, "channel-delay")
        assert grades == sorted(grades)
        assert (grades[:3], grades[-2:]) == ([0, 0, 0], [2, 2])
        assert climb(fault, heart, run, "channel-delay-gross")[-1] == (2 if fault == "volume-late" else 0)
        assert {climb(fault, heart, run, name)[-1] for name in ("damping", "pressure-late")} == {0 if fault == "volume-late" else 2}


@pytest.mark.parametrize("fault", ["volume-late", "pressure-late"])
@pytest.mark.parametrize("heart", ["right", "right-loaded", "right-failing"])
def test_a_gross_delay_is_found_in_a_right_ventricle_too(fault, heart):
    for run in ("rest", "ramp-1"):
        grades = climb(fault, heart, run, "channel-delay")
        assert grades == sorted(grades)
        assert (grades[:3], grades[-1]) == ([0, 0, 0], 2)


@pytest.mark.parametrize(
    ("heart", "least"), [("normal", [0, 1, 2, 2, 2, 2]), ("failing", [0, 0, 2, 2, 2, 2]), ("right", [0, 0, 0, 2, 2, 2])]
)
def test_a_line_ever_slower_first_spoils_slopes_and_work_then_the_peak_then_all_pressure(heart, least):
    grades = {name: climb("line-overdamped", heart, "rest", name) for name in ("damping", "damping-peak", "damping-gross")}
    assert all(found == sorted(found) for found in grades.values())
    assert all(found >= due for found, due in zip(grades["damping"], least, strict=True))
    assert grades["damping-peak"][-2:] == [2, 2]
    assert grades["damping-gross"][-2:] == [0, 2]


def test_pressure_that_is_high_at_filling_but_not_late_is_no_more_than_suspect():
    subject = declared(prepared_run_of("line-overdamped", 7.0), conditions=frozenset({"mitral-regurgitation"}))
    assert worst(subject, "damping-gross") is Verdict.SUSPECT
    assert worst(subject, "damping") is Verdict.NOT_EVALUATED


def test_a_delay_that_was_declared_is_none():
    assert climb("volume-late-as-declared", "normal", "rest", "channel-delay") == [0] * 6


@pytest.mark.parametrize("heart", [heart.name for heart in HEARTS])
@pytest.mark.parametrize("conditions", [BREATHING_RAMP, SINUS_ARRHYTHMIA, FIBRILLATING, REFLEX, PREMATURE])
def test_a_sound_heart_is_not_even_suspect(heart, conditions):
    verdict = judged_run(simulated(heart, conditions))
    found = {name: of(verdict, name).worst() for name in OTHERS if name in {one.check.name for one in verdict.judged}}
    assert set(found.values()) <= {Verdict.PASS, Verdict.NOT_EVALUATED}, found


@pytest.mark.parametrize("heart", ["mitral-leak"])
def test_valves_and_not_wires_set_the_onset_where_nothing_is_said_of_a_delay(heart):
    assert worst(simulated(heart), "channel-delay") is Verdict.NOT_EVALUATED


def test_regurgitation_declared_is_enough_to_say_nothing_of_a_delay():
    subject = declared(simulated("normal"), conditions=frozenset({"aortic-regurgitation"}))
    assert worst(subject, "channel-delay") is Verdict.NOT_EVALUATED


@pytest.mark.parametrize("gain", [0.6, 1.8])
def test_a_delay_does_not_depend_on_gains_and_offsets(gain):
    subject = simulated("normal")
    pressure, volume = (subject.recording.channels[name].samples for name in ("pressure", "volume"))
    other = rerecorded(subject, pressure=gain * pressure + 6.0, volume=gain * volume + 40.0)
    values = [float(CHECKS["channel-delay"].measure(one).value) for one in (subject, other)]
    assert values[0] == pytest.approx(values[1], abs=0.5)


def test_what_was_not_declared_cannot_be_contradicted():
    subject = simulated("normal", BREATHING)
    assert worst(subject, "respiration-as-declared") is Verdict.NOT_EVALUATED
    assert worst(declared(subject, respiration="free"), "respiration-as-declared") is Verdict.NOT_EVALUATED
    assert worst(declared(subject, respiration="held"), "respiration-as-declared") is Verdict.FAIL
    assert worst(declared(subject, rhythm=None), "rhythm-as-declared") is Verdict.NOT_EVALUATED


def test_sinus_arrhythmia_is_breathing_and_fibrillation_is_not_sinus_rhythm():
    assert worst(simulated("normal", SINUS_ARRHYTHMIA), "rhythm-as-declared") is Verdict.PASS
    fibrillating = declared(simulated("normal", FIBRILLATING), rhythm="sinus")
    assert worst(fibrillating, "rhythm-as-declared") in {Verdict.SUSPECT, Verdict.FAIL}


@pytest.mark.parametrize("check", [name for name in OTHERS if name != "damping-gross"])
def test_too_little_says_nothing(check):
    assert worst(drawn(4), check) is Verdict.NOT_EVALUATED


def test_breathing_and_rhythm_are_asked_about_and_nothing_is_withheld():
    assert not CHECKS["respiration-as-declared"].spoils | CHECKS["rhythm-as-declared"].spoils


@pytest.mark.parametrize(("gain", "shift"), [(1.3, 0.0), (1.0, 25.0)])
def test_what_volume_moved_is_measured_alike_whatever_the_gain_and_offset_of_pressure(gain, shift):
    subject = simulated("normal")
    pressure, volume = (subject.recording.channels[name].samples for name in ("pressure", "volume"))
    moved = volume + 15.0 * (np.arange(volume.size) > volume.size // 2)
    values = [of_step(rerecorded(subject, volume=moved, pressure=one)) for one in (pressure, gain * pressure + shift)]
    assert values[0] == pytest.approx(values[1], rel=0.05)
    assert values[0] > 0.05


def of_step(subject):
    return float(CHECKS["volume-step"].measure(subject).value)


def test_a_step_is_told_with_its_instant():
    subject = simulated("normal")
    pressure = subject.recording.channels["pressure"]
    moved = pressure.samples + 6.0 * (pressure.time_s > 9.0)
    found = CHECKS["pressure-step"].measure(rerecorded(subject, pressure=moved))
    assert float(found.value) * float(np.median(subject.beats.pmax_mmhg)) == pytest.approx(6.0, abs=0.7)
    assert float(found.at_s) == pytest.approx(9.0, abs=1.2)


@pytest.mark.parametrize("check", COURSE)
def test_a_few_beats_tell_of_no_course(check):
    assert worst(drawn(6), check) is Verdict.NOT_EVALUATED


@pytest.mark.parametrize("check", COURSE)
def test_what_the_loops_themselves_show_is_still_published(check):
    assert not CHECKS[check].spoils & {"HR", "SV", "SW", "CO", "dPdt_max", "dPdt_min", "tau"}
    assert CHECKS["volume-drift"].spoils | CHECKS["esv-drift"].spoils >= spoils.VOLUME_OFFSET
    assert CHECKS["pressure-drift"].spoils | CHECKS["edp-drift"].spoils >= spoils.PRESSURE_OFFSET | {"Ees"}


@pytest.mark.parametrize(("fault", "check"), [("pressure-drifting", "pressure"), ("volume-drifting", "volume")])
def test_a_drift_shown_at_rest_counts_for_the_occlusions_that_hide_it(fault, check):
    acquisition, _ = clean_acquisition("right-large", 250.0, 3, salines=0)
    name, grades = f"{check}-shift-elsewhere", []
    for severity in LADDERS[fault].severities[:4]:
        runs, whole, _ = judged(LADDERS[fault].inject(acquisition, severity).acquisition)
        worst_found = next(one for one in whole if one.check.name == name).worst()
        in_ramps = max(GRADE[of(runs[run], f"{check}-drift").worst()] for run in ("ramp-1", "ramp-2"))
        grades.append(max(GRADE[worst_found], in_ramps))
    assert grades[0] == 0
    assert max(grades) == 2
    assert grades == sorted(grades)


def test_of_one_run_nothing_is_said_elsewhere():
    subject = AcquisitionSubject(AcquisitionFacts(), (simulated("normal"),))
    assert np.isnan(CHECKS["pressure-shift-elsewhere"].measure(subject).value)


def test_a_still_segment_inside_is_no_more_than_suspect():
    acquisition, _ = clean_acquisition("normal", 250.0, 3, salines=0)
    segments = as_segments(acquisition)
    first = segments.columns["rest"]["v_segment_1"]
    runs, _, _ = judged(with_columns(segments, "rest", {"v_segment_1": 0.1 * first + 0.9 * float(np.mean(first))}))
    assert of(runs["rest"], "segment-swing").worst() is Verdict.SUSPECT
    assert of(runs["ramp-1"], "segment-swing").worst() is Verdict.PASS
