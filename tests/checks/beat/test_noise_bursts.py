"""Bursts of noise within beats: which beats are rejected, and what is no burst."""

import numpy as np
import pytest

from checks.check import Verdict
from flows.sources.simulated.ladders import RUN_LADDERS
from tests.checks.made_acquisitions import judged, sound
from tests.checks.made_subjects import COARSE, FIBRILLATING, RAMP, REST, beats_at, judged_run, of, rerecorded, simulated

LADDER = next(ladder for ladder in RUN_LADDERS if ladder.name == "pressure-bursts")
P, F = Verdict.PASS, Verdict.FAIL


def shaken(subject, sd, first_s, length_s=0.3):
    channel = subject.recording.channels["pressure"]
    samples, first = channel.samples.copy(), round(first_s * channel.sampling_rate_hz)
    count = round(length_s * channel.sampling_rate_hz)
    samples[first : first + count] += sd * np.random.default_rng(7).standard_normal(count)
    return rerecorded(subject, pressure=samples)


@pytest.mark.parametrize("heart", ["normal", "failing", "right", "right-fast"])
@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_sound_hearts_have_no_bursts(heart, rate_hz):
    for conditions in (REST, RAMP, FIBRILLATING):
        assert set(of(judged_run(simulated(heart, conditions, rate_hz=rate_hz)), "noise-bursts").verdict) == {P}
    assert set(of(judged_run(simulated(heart, REST, COARSE)), "noise-bursts").verdict) == {P}


@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_the_beats_a_burst_falls_into_are_rejected_and_no_others(rate_hz):
    subject = shaken(simulated(rate_hz=rate_hz), 30.0, 6.0)
    touched = set(beats_at(subject, (6.05, 6.25)))
    lost = {place + 1 for place, names in enumerate(judged_run(subject).rejected_by) if "noise-bursts" in names}
    assert touched <= lost <= {beat + step for beat in touched for step in (-1, 0, 1)}


def test_a_louder_burst_never_improves_the_verdict():
    counts = [
        sum(v is F for v in of(judged_run(shaken(simulated(), sd, 6.0)), "noise-bursts").verdict) for sd in (0.0, 1.0, 8.0, 20.0, 50.0)
    ]
    assert counts[:2] == [0, 0]
    assert min(counts[2:]) >= 1


def test_noise_of_the_whole_run_and_a_single_jump_are_no_bursts():
    noisy = shaken(simulated(), 5.0, 0.0, 18.0)
    assert set(of(judged_run(noisy), "noise-bursts").verdict) == {P}
    samples = simulated().recording.channels["pressure"].samples.copy()
    samples[1500:] += 25.0
    assert set(of(judged_run(rerecorded(simulated(), pressure=samples)), "noise-bursts").verdict) == {P}


def test_bursts_in_every_run_are_found_where_they_were_put():
    injected = LADDER.inject(sound(), 20.0)
    runs, _, _ = judged(injected.acquisition)
    for expected in injected.expected:
        lost = {place + 1 for place, names in enumerate(runs[expected.run].rejected_by) if "noise-bursts" in names}
        assert len(set(beats_at(runs[expected.run].subject, expected.instants_s)) - lost) <= 1
