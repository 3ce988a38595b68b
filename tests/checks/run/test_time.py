from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict
from checks.run.heart_rate_agreement import heart_rate_ratio
from checks.subject import RunSubject
from checks.verdicts import sentence
from tests.checks.made_subjects import (
    FIBRILLATING_RAMP,
    RATE_HZ,
    declared,
    drawn,
    drawn_run,
    judged_run,
    never_improves,
    of,
    rerecorded,
    simulated,
    worst,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED


def without_stamps(subject):
    """The same run timed by its declared rate."""
    channels = {name: replace(channel, time_s=None) for name, channel in subject.recording.channels.items()}
    return replace(subject, recording=replace(subject.recording, channels=channels))


def set_back(subject, seconds):
    """The same run with its clock set back in the middle."""
    stamps = subject.recording.channels["pressure"].time_s.copy()
    stamps[stamps.size // 2 :] -= seconds
    return rerecorded(subject, time_s=stamps)


def test_time_that_only_goes_forward_passes_and_a_gap_or_a_twin_is_no_step_back():
    subject = simulated()
    stamps = subject.recording.channels["pressure"].time_s.copy()
    stamps[1000:] += 0.4
    stamps[501] = stamps[500]
    assert worst(subject, "time-base") is P
    assert worst(rerecorded(subject, time_s=stamps), "time-base") is P
    assert worst(without_stamps(subject), "time-base") is P


@pytest.mark.parametrize("seconds", [0.008, 1.0, 8.0])
def test_one_step_back_makes_the_run_unusable_and_is_shown_where_it_happens(seconds):
    verdict = judged_run(set_back(simulated(), seconds))
    found = of(verdict, "time-base")
    assert found.worst() is F
    assert found.at_s[0] == pytest.approx(9.0, abs=0.01)
    assert not verdict.is_usable
    assert "backwards at 1 samples" in sentence(found, 0)
    assert of(verdict, "readable").worst() is P


def test_a_run_that_was_not_read_has_no_time_to_judge():
    lost = RunSubject(simulated().facts, None, trouble="rest.csv: is empty")
    assert worst(lost, "time-base") is N
    assert worst(lost, "readable") is F


@pytest.mark.parametrize(("factor", "expected"), [(1.0, P), (1.004, P), (1.01, S), (1.03, S), (1.06, F), (0.5, F), (0.99, S)])
def test_the_declared_rate_is_held_against_the_time_stamps(factor, expected):
    channels = {
        name: replace(channel, sampling_rate_hz=channel.sampling_rate_hz * factor)
        for name, channel in simulated().recording.channels.items()
    }
    subject = replace(simulated(), recording=replace(simulated().recording, channels=channels))
    unwitnessed = declared(subject, duration_s=None, heart_rate_per_min=None)
    assert worst(unwitnessed, "sampling-rate") is expected
    assert worst(without_stamps(subject), "sampling-rate") is N


@pytest.mark.parametrize(
    ("ratio", "witnesses", "expected"),
    [
        (1.1, {"duration_s": 18.0}, S),
        (1.1, {"duration_s": 19.8}, F),
        (1.1, {"duration_s": 3600.0}, F),
        (1.1, {"heart_rate_per_min": 1.0}, F),
        (2.0, {"heart_rate_per_min": 1.03}, S),
        (2.0, {"heart_rate_per_min": 0.5}, F),
        (2.0, {"duration_s": 18.0, "heart_rate_per_min": 1.0}, S),
        (2.0, {"duration_s": 18.0, "heart_rate_per_min": 0.5}, F),
    ],
)
def test_stamps_that_duration_and_heart_rate_bear_out_are_right(ratio, witnesses, expected):
    """Heart rates are given over the measured one; a tenth is as much as a heart may wander, so at a tenth it cannot tell."""
    channels = {
        name: replace(channel, sampling_rate_hz=channel.sampling_rate_hz * ratio)
        for name, channel in simulated().recording.channels.items()
    }
    rate = 60.0 / float(np.median(simulated().beats.rr_s))
    told = {"duration_s": None, "heart_rate_per_min": None} | witnesses
    if told["heart_rate_per_min"] is not None:
        told["heart_rate_per_min"] *= rate
    subject = declared(replace(simulated(), recording=replace(simulated().recording, channels=channels)), **told)
    assert worst(subject, "sampling-rate") is expected


@pytest.mark.parametrize(
    ("duration_s", "heart_rate", "expected"),
    [
        (18.0, 1.0, P),
        (18.9, 1.0 / 1.05, P),
        (19.2, 1.0 / 1.065, F),
        (19.8, 1.0 / 1.1, F),
        (16.4, 1.1, F),
        (19.2, 1.0 / 1.04, S),
        (19.8, 1.1, P),
        (19.8, 1.0, P),
        (36.0, 1.0 / 1.1, P),
        (None, 0.5, N),
        (36.0, None, N),
    ],
)
def test_only_where_duration_and_heart_rate_agree_is_the_clock_wrong(duration_s, heart_rate, expected):
    rate = 60.0 / float(np.median(simulated().beats.rr_s))
    subject = declared(simulated(), duration_s=duration_s, heart_rate_per_min=None if heart_rate is None else rate * heart_rate)
    assert worst(subject, "clock-agreement") is expected


def test_a_beat_missed_in_a_gap_is_no_slower_heart():
    subject = simulated()
    rr_s = subject.beats.rr_s.copy()
    rr_s[::2] *= 2.0
    rate, accepted = 60.0 / float(np.median(subject.beats.rr_s)), np.arange(rr_s.size) % 2 == 1
    gappy = declared(replace(subject, beats=replace(subject.beats, rr_s=rr_s)), heart_rate_per_min=rate)
    assert heart_rate_ratio(gappy) < 0.8
    assert heart_rate_ratio(replace(gappy, accepted=accepted)) == pytest.approx(1.0, abs=0.02)


def test_stamps_rounded_to_whole_milliseconds_are_still_the_declared_rate():
    stamps = np.round(np.arange(6480) / 360.0, 3)
    channels = {
        name: replace(channel, samples=np.resize(channel.samples, 6480), sampling_rate_hz=360.0, time_s=stamps)
        for name, channel in simulated().recording.channels.items()
    }
    subject = replace(simulated(), recording=replace(simulated().recording, channels=channels))
    assert worst(rerecorded(subject), "sampling-rate") is P


@pytest.mark.parametrize("beyond_s", [0.0, 0.99, -0.99])
def test_clock_times_in_whole_seconds_are_no_wrong_duration(beyond_s):
    assert worst(declared(simulated(), duration_s=18.0 + beyond_s), "duration") is P


@pytest.mark.parametrize(("declared_s", "expected"), [(18.0, P), (19.5, S), (16.5, S), (25.0, F), (9.0, F), (None, N), (0.0, N), (-3.0, N)])
def test_duration_is_held_against_the_clock_times(declared_s, expected):
    assert worst(declared(simulated(), duration_s=declared_s), "duration") is expected


def test_a_wrong_rate_without_stamps_shows_in_duration_and_heart_rate_though_nothing_in_the_file_contradicts_it():
    subject = without_stamps(simulated())
    channels = {name: replace(channel, sampling_rate_hz=500.0) for name, channel in subject.recording.channels.items()}
    wrong = rerecorded(replace(subject, recording=replace(subject.recording, channels=channels)))
    verdict = judged_run(wrong)
    assert [of(verdict, name).worst() for name in ("sampling-rate", "duration", "heart-rate-agreement")] == [N, F, F]
    assert verdict.is_usable


def test_heart_rate_that_wanders_passes_and_another_one_fails():
    rate = 60.0 / float(np.median(simulated().beats.rr_s))
    ladder = [worst(declared(simulated(), heart_rate_per_min=rate * factor), "heart-rate-agreement") for factor in (1.0, 1.08, 1.15, 1.4)]
    assert ladder == [P, P, S, F]
    assert worst(declared(simulated(), heart_rate_per_min=rate / 2.0), "heart-rate-agreement") is F


@pytest.mark.parametrize("undeclared", [None, 0.0])
def test_without_a_declared_heart_rate_it_is_not_compared(undeclared):
    assert worst(declared(simulated(), heart_rate_per_min=undeclared), "heart-rate-agreement") is N


def test_two_beats_are_no_heart_rate():
    assert worst(declared(drawn(2), heart_rate_per_min=240.0), "heart-rate-agreement") is N


def test_a_fibrillating_heart_s_few_beats_in_an_occlusion_are_suspect_at_most_but_its_steady_rate_must_agree():
    for kind, expected in (("preload-reduction", S), ("steady", F)):
        subject = declared(drawn(), kind=kind, rhythm="atrial-fibrillation", heart_rate_per_min=120.0)
        assert worst(subject, "heart-rate-agreement") is expected
    assert worst(simulated("small", FIBRILLATING_RAMP), "heart-rate-agreement") is not F


@pytest.mark.parametrize(("lost", "expected"), [(0, P), (2, P), (48, S), (240, S), (700, S), (1900, F)])
def test_missing_samples_of_the_run_are_counted(lost, expected):
    subject = drawn()
    missing = np.zeros(subject.signals.pressure_mmhg.size, dtype=bool)
    missing[400 : 400 + lost] = True
    gappy = replace(subject, signals=replace(subject.signals, missing=missing))
    found = of(judged_run(gappy), "time-gaps")
    assert found.worst() is expected
    assert found.at_s[0] == pytest.approx(2.0) if lost else np.isnan(found.at_s[0])


def test_a_run_of_gaps_is_unusable_and_each_beat_says_why():
    subject = drawn()
    missing = np.arange(subject.signals.pressure_mmhg.size) % 3 == 0
    verdict = judged_run(replace(subject, signals=replace(subject.signals, missing=missing)))
    assert not verdict.is_usable
    assert all("time-gaps" in names for names in verdict.rejected_by)


@pytest.mark.parametrize(("count", "expected"), [(0, F), (1, F), (2, F), (3, P), (12, P)])
def test_a_run_needs_three_beats(count, expected):
    verdict = judged_run(drawn(count))
    assert of(verdict, "beats-found").worst() is expected
    assert verdict.is_usable is (expected is P)


def test_noise_alone_holds_no_beats_worth_having():
    rng = np.random.default_rng(0)
    still = drawn_run(np.full(2000, 60.0), np.full(2000, 100.0), drawn(0).beats)
    assert worst(still, "beats-found") is F
    silent = rerecorded(simulated(), pressure=np.zeros(4500), volume=rng.normal(100.0, 1.0, 4500), ecg=np.zeros(4500))
    assert worst(silent, "beats-found") is F


def test_growing_faults_of_time_never_improve_the_verdict():
    subject = simulated()
    away = np.linspace(0.0, 12.0, 25)
    assert never_improves([worst(declared(subject, duration_s=18.0 + seconds), "duration") for seconds in away])
    rate = 60.0 / float(np.median(subject.beats.rr_s))
    assert never_improves([worst(declared(subject, heart_rate_per_min=rate * (1.0 + one / 12.0)), "heart-rate-agreement") for one in away])
    assert never_improves([worst(drawn(count), "beats-found") for count in (6, 4, 3, 2, 1, 0)])


@pytest.mark.parametrize("name", ["time-base", "sampling-rate", "duration", "clock-agreement", "time-gaps", "beats-found"])
def test_a_run_without_signals_is_not_evaluated(name):
    bare = RunSubject(declared(simulated(), heart_rate_per_min=70.0).facts, None, trouble="the file is cut")
    found = of(judged_run(bare), name)
    assert found.worst() is N
    assert np.isnan(found.value).all()


def test_an_unreadable_run_is_unusable_and_its_reason_is_the_reader_s():
    verdict = judged_run(RunSubject(simulated().facts, None, trouble="rest.csv: is empty"))
    assert not verdict.is_usable
    reasons = [finding.reason for finding in verdict.findings if finding.check.name == "readable"]
    assert reasons == ["the run cannot be used: rest.csv: is empty"]


def test_a_saline_run_is_readable_without_pressure_and_unreadable_without_a_file():
    facts = replace(simulated().facts, run="saline-1", kind="saline")
    volume = {"volume": simulated().recording.channels["volume"]}
    held = judged_run(RunSubject(facts, replace(simulated().recording, channels=volume)))
    lost = judged_run(RunSubject(facts, None, trouble="saline-1.csv: is empty"))
    assert [judged.check.name for judged in held.judged] == ["readable"]
    assert (held.is_usable, lost.is_usable) == (True, False)


def test_the_drawn_run_is_sampled_as_it_says():
    assert worst(drawn(), "sampling-rate") is P
    assert drawn().recording.channels["pressure"].sampling_rate_hz == RATE_HZ
