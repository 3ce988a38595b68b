"""What happens in the course of a run, from hardly noticeable to gross: found by its check, no milder as it grows, nothing in health."""

import numpy as np
import pytest

from checks import spoils
from checks.check import Verdict
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.heart import HEARTS
from flows.sources.simulated.ladders import RUN_LADDERS
from tests.checks.made_acquisitions import judged
from tests.checks.made_subjects import CHECKS, drawn, of, rerecorded, simulated, worst

LADDERS = {ladder.name: ladder for ladder in RUN_LADDERS}
GRADE = {Verdict.PASS: 0, Verdict.NOT_EVALUATED: 0, Verdict.SUSPECT: 1, Verdict.FAIL: 2}
COURSE = ("pressure-step", "volume-step", "pressure-drift", "volume-drift")
FAILS_FROM = {
    ("pressure-step", "rest"): 5.0,
    ("pressure-step", "ramp-1"): 5.0,
    ("volume-step", "rest"): 10.0,
    ("volume-step", "ramp-1"): 10.0,
    ("pressure-drifting", "rest"): 5.0,
    ("pressure-drifting", "ramp-1"): 10.0,
    ("volume-drifting", "rest"): 20.0,
    ("volume-drifting", "ramp-1"): 10.0,
}
"""By which step at the latest a run fails."""

CHECK = {"pressure-drifting": "pressure-drift", "volume-drifting": "volume-drift"}


def climb(name, heart, run, check):
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    grades = []
    for severity in LADDERS[name].severities:
        runs, _, _ = judged(LADDERS[name].inject(acquisition, severity).acquisition)
        grades.append(GRADE[of(runs[run], check).worst()] if runs[run].is_usable else 2)
    return grades


@pytest.mark.parametrize(("name", "run"), FAILS_FROM)
@pytest.mark.parametrize("heart", ["normal", "failing", "right", "right-loaded"])
def test_a_sensor_that_moves_is_found_by_its_check(name, run, heart):
    grades = climb(name, heart, run, CHECK.get(name, name))
    due = LADDERS[name].severities.index(FAILS_FROM[name, run])
    assert grades[0] == 0
    assert grades[: due + 1] == sorted(grades[: due + 1])
    assert grades[due] == 2


@pytest.mark.parametrize("heart", [heart.name for heart in HEARTS])
def test_a_sound_acquisition_shows_no_sensor_that_moves(heart):
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    runs, _, _ = judged(acquisition)
    assert {of(run, check).worst() for run in runs.values() for check in COURSE} == {Verdict.PASS}


@pytest.mark.parametrize("heart", ["normal", "stiff", "right"])
@pytest.mark.parametrize("per_s", [0.005, 0.012])
def test_a_heart_that_truly_empties_is_no_sensor_that_moves(heart, per_s):
    acquisition, _ = clean_acquisition(heart, 250.0, 3, salines=0)
    runs, _, _ = judged(LADDERS["steady-ramping"].inject(acquisition, per_s).acquisition)
    assert {of(runs["rest"], check).worst() for check in COURSE} == {Verdict.PASS}


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
    assert float(found.value) == pytest.approx(6.0, abs=0.7)
    assert float(found.at_s) == pytest.approx(9.0, abs=1.2)


@pytest.mark.parametrize("check", COURSE)
def test_a_few_beats_tell_of_no_course(check):
    assert worst(drawn(6), check) is Verdict.NOT_EVALUATED


@pytest.mark.parametrize("check", COURSE)
def test_what_the_loops_themselves_show_is_still_published(check):
    assert not CHECKS[check].spoils & {"HR", "SV", "SW", "CO", "dPdt_max", "dPdt_min", "tau"}
    assert CHECKS[check].spoils >= {"Ees", "V0"}
    assert CHECKS["volume-drift"].spoils >= spoils.VOLUME_OFFSET
