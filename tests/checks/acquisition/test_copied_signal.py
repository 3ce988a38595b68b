from dataclasses import replace

import numpy as np
import pytest

from checks.acquisition.copied_signal import copied_seconds, longest_copy
from checks.check import Verdict, judge
from checks.spoils import EVERYTHING
from checks.subject import AcquisitionSubject, RunSubject
from metrics.signals.facts import AcquisitionFacts, RunFacts
from metrics.signals.recording import Channel, Recording
from tests.checks.made_subjects import CHECKS

P, F, N = Verdict.PASS, Verdict.FAIL, Verdict.NOT_EVALUATED
RATE_HZ = 250.0
SECONDS = 12
TIME_S = np.arange(int(SECONDS * RATE_HZ)) / RATE_HZ
CHECK = CHECKS["copied-signal"]
BEATING = 60.0 + 50.0 * np.sin(2.0 * np.pi * 1.2 * TIME_S)
"""A heart that beats exactly alike in every run: only noise tells its recordings apart."""


def noise(seed, size=0.4):
    return size * np.random.default_rng(seed).standard_normal(TIME_S.size)


def recorded(seed, step=0.02, size=0.4):
    return np.round((BEATING + noise(seed, size)) / step) * step


def run(name, samples, rate_hz=RATE_HZ, channel="pressure", **others):
    channels = {channel: Channel(samples, "mm[Hg]", rate_hz)} | {key: Channel(value, "mV", rate_hz) for key, value in others.items()}
    return RunSubject(RunFacts(name, "steady"), Recording(name, channels))


def found(*runs):
    return judge(CHECK, AcquisitionSubject(AcquisitionFacts(), runs), CHECK.limits)


def test_recordings_of_one_steady_heart_are_not_copies_of_each_other():
    assert found(run("a", recorded(1)), run("b", recorded(2)), run("c", recorded(3))).worst() is P


def test_an_exact_copy_is_found_whatever_its_ecg():
    copied = found(run("a", recorded(1), ecg=noise(4)), run("b", recorded(1), ecg=noise(5)))
    assert copied.worst() is F
    assert copied.value.tolist() == [float(SECONDS)] * 2
    assert copied.runs == ("a", "b")
    assert CHECK.spoils == EVERYTHING


def test_a_shared_ecg_is_no_copy_of_the_heart_s_signals():
    assert found(run("a", recorded(1), ecg=noise(4)), run("b", recorded(2), ecg=noise(4))).worst() is P


def test_a_copy_with_noise_laid_over_it_is_found():
    assert found(run("a", recorded(1)), run("b", recorded(1) + noise(6))).worst() is F


@pytest.mark.parametrize(("seconds", "verdict"), [(0, P), (1, P), (3, F), (6, F)])
def test_a_part_is_enough_from_two_seconds_on(seconds, verdict):
    cut = int(seconds * RATE_HZ)
    assert found(run("a", recorded(1)), run("b", np.concatenate([recorded(1)[:cut], recorded(2)[cut:]]))).worst() is verdict


@pytest.mark.parametrize("cut", [77, 500, 1300])
def test_an_exact_copy_may_begin_elsewhere(cut):
    copied = found(run("a", recorded(1)), run("b", recorded(1)[cut:]))
    assert copied.worst() is F
    assert copied.value[0] >= SECONDS - cut / RATE_HZ - 1.0


def test_volume_and_segments_are_looked_at_too():
    for channel in ("volume", "segment-1"):
        assert found(run("a", recorded(1), channel=channel), run("b", recorded(1), channel=channel)).worst() is F
    assert found(run("a", recorded(1), channel="volume"), run("b", recorded(1))).worst() is N


def test_without_noise_nothing_is_said():
    quiet = [run(name, np.round(BEATING, 2)) for name in "ab"]
    coarse = [run(name, recorded(seed, step=1.0, size=0.2)) for seed, name in enumerate("ab")]
    constant = [run(name, np.full(TIME_S.size, 7.0)) for name in "ab"]
    assert [found(*pair).worst() for pair in (quiet, coarse, constant)] == [N, N, N]


def test_runs_of_other_rates_or_without_a_recording_are_not_compared():
    assert found(run("a", recorded(1)), run("b", recorded(1), rate_hz=500.0)).worst() is N
    assert found(run("a", recorded(1)), RunSubject(RunFacts("b", "steady"), None)).worst() is N
    assert found(run("a", recorded(1))).worst() is N


def test_gaps_at_the_same_place_are_no_copy():
    gappy = [recorded(seed) for seed in (1, 2)]
    for samples in gappy:
        samples[500:1500] = np.nan
    assert found(run("a", gappy[0]), run("b", gappy[1])).worst() is P


def test_runs_of_other_lengths_are_compared_as_far_as_they_go():
    assert longest_copy(recorded(1), recorded(1)[:1000], 250) == 1000
    assert longest_copy(recorded(1)[:10], recorded(1), 250) == 0


def test_a_hundred_pairs_of_sound_recordings_are_never_copies():
    runs = tuple(run(f"run-{seed}", recorded(seed)) for seed in range(15))
    subject = AcquisitionSubject(AcquisitionFacts(), runs)
    assert not copied_seconds(subject).value.any()
    copied = copied_seconds(replace(subject, runs=(*runs, run("late", recorded(7)))))
    assert {name: value for name, value in zip(copied.runs, copied.value.tolist(), strict=True) if value} == {"run-7": 12.0, "late": 12.0}


@pytest.mark.parametrize("hertz", [50.0, 60.0, 50.1])
def test_hum_of_the_mains_is_no_copy_and_hides_none(hertz):
    hum = 20.0 * np.sin(2.0 * np.pi * hertz * TIME_S) + 5.0 * np.sin(4.0 * np.pi * hertz * TIME_S)
    assert found(run("a", recorded(1) + hum), run("b", recorded(2) + hum)).worst() is P
    assert found(run("a", recorded(1) + hum), run("b", recorded(1) + hum + noise(6))).worst() is F


def test_where_hum_is_all_there_is_besides_the_heart_nothing_is_said():
    hum = 5.0 * np.sin(2.0 * np.pi * 50.0 * TIME_S)
    assert found(run("a", np.round(BEATING + hum, 2)), run("b", np.round(BEATING + hum, 2))).worst() is N


def test_a_third_run_stands_beside_a_copied_pair():
    copied = found(run("a", recorded(1)), run("b", recorded(1)), run("c", recorded(3)))
    assert dict(zip(copied.runs, copied.verdict, strict=True)) == {"a": F, "b": F, "c": P}
