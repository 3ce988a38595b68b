from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from checks.check import Verdict
from checks.subject import RunSubject
from checks.verdicts import Rules, sentence
from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.recorded import NOISELESS
from flows.sources.simulated.rhythm import Conditions, Occlusion
from metrics.signals.stillness import still_stretches
from tests.checks.made_subjects import (
    BEAT_SAMPLES,
    COARSE,
    QUANTISED,
    RAMP,
    REST,
    drawn,
    judged_run,
    never_improves,
    of,
    rejected,
    rerecorded,
    simulated,
    worst,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED


def gap(first, samples, subject=None):
    """A drawn run with samples missing."""
    subject = subject or drawn()
    missing = subject.signals.missing.copy()
    missing[first : first + samples] = True
    return replace(subject, signals=replace(subject.signals, missing=missing))


def frozen(first, stop, *names):
    """A drawn run whose channels stand still from one sample to another."""
    subject = drawn()
    channels = dict(subject.recording.channels)
    for name in names or ("pressure", "volume"):
        samples = channels[name].samples.copy()
        samples[first:stop] = samples[first]
        channels[name] = replace(channels[name], samples=samples)
    return RunSubject(subject.facts, replace(subject.recording, channels=channels), subject.signals, subject.beats)


def twins(at, *, differ, subject=None):
    """A drawn run in which the stamps at these samples repeat the one before."""
    subject = subject or drawn()
    channels = {}
    for name, channel in subject.recording.channels.items():
        stamps, samples = channel.time_s.copy(), channel.samples.copy()
        for place in at:
            stamps[place] = stamps[place - 1]
            samples[place] = samples[place - 1] + (1.0 if differ else 0.0)
        channels[name] = replace(channel, time_s=stamps, samples=samples)
    return RunSubject(subject.facts, replace(subject.recording, channels=channels), subject.signals, subject.beats)


def failing(subject, name):
    return [place for place, one in enumerate(of(judged_run(subject), name).verdict) if one is F]


def test_one_lost_sample_is_bridged_a_gap_as_wide_as_dpdt_s_window_is_not():
    assert [worst(gap(450, samples), "missing-samples") for samples in (0, 1, 2, 3, 40)] == [P, P, P, F, F]


def test_a_gap_is_counted_in_every_beat_it_touches_and_shown_where_it_begins():
    across = gap(3 * BEAT_SAMPLES - 20, 40)
    found = of(judged_run(across), "missing-samples")
    assert failing(across, "missing-samples") == [2, 3]
    assert found.at_s[[2, 3]].tolist() == [2.9, 2.9]
    assert set(rejected(across)) == {3, 4}


def test_of_two_gaps_in_a_beat_the_longer_one_is_told():
    found = of(judged_run(gap(520, 30, gap(450, 6))), "missing-samples")
    assert (found.value[2], found.at_s[2]) == (0.15, 2.6)
    assert sentence(found, 2) == "0.150 s of samples are missing inside the beat (limit 0.010 s)"


def test_a_gap_outside_every_beat_costs_none():
    subject = drawn()
    starts = subject.beats.start + 10
    later = replace(subject, beats=replace(subject.beats, start=starts, end=subject.beats.end + 10))
    assert failing(gap(0, 10, later), "missing-samples") == []
    assert failing(gap(2411, 9, later), "missing-samples") == []


def test_a_growing_gap_never_improves_the_verdict_nor_frees_a_beat():
    lost = [set(failing(gap(650, samples), "missing-samples")) for samples in (0, 2, 4, 50, 200, 700)]
    assert all(earlier <= later for earlier, later in pairwise(lost))
    assert never_improves([worst(gap(650, samples), "missing-samples") for samples in (0, 2, 4, 50, 200, 700)])


def test_a_run_that_lost_a_second_loses_the_beats_that_held_it_and_no_more():
    subject = simulated()
    keep = np.ones(4500, dtype=bool)
    keep[2000:2250] = False
    channels = {name: channel.samples[keep] for name, channel in subject.recording.channels.items()}
    lost = rerecorded(subject, time_s=subject.recording.channels["pressure"].time_s[keep], **channels)
    gone = rejected(lost)
    assert all("missing-samples" in names for names in gone.values())
    starts, ends = lost.beats.start / 250.0, lost.beats.end / 250.0
    assert set(gone) == set((np.flatnonzero((starts < 9.0) & (ends > 8.0)) + 1).tolist())


def test_empty_cells_are_missing_samples_as_well():
    volume = simulated().recording.channels["volume"].samples.copy()
    volume[2000:2020] = np.nan
    assert worst(rerecorded(simulated(), volume=volume), "missing-samples") is F


def test_missing_samples_that_cannot_be_judged_reject_the_beat():
    subject = drawn()
    broken = replace(subject, signals=replace(subject.signals, missing=np.array(["?"])))
    verdict = judged_run(broken)
    assert set(of(verdict, "missing-samples").verdict) == {N}
    assert all("missing-samples" in names for names in verdict.rejected_by)
    lenient = judged_run(broken, Rules({}, required=frozenset({"landmarks"})))
    assert not any("missing-samples" in names for names in lenient.rejected_by)


def test_an_echoed_stamp_is_harmless_one_with_other_values_is_not():
    assert worst(twins([450, 460], differ=False), "duplicated-samples") is P
    contested = twins([450, 460, 1010], differ=True)
    assert failing(contested, "duplicated-samples") == [2, 5]
    found = of(judged_run(contested), "duplicated-samples")
    assert found.value[2] == 2.0
    assert found.at_s[2] == pytest.approx(2.25)
    assert sentence(found, 2) == "2 time stamps of the beat stand twice with different values"


def test_more_contested_stamps_never_improve_the_verdict():
    counts = [of(judged_run(twins(range(450, 450 + 2 * number, 2), differ=True)), "duplicated-samples") for number in range(6)]
    assert never_improves([found.worst() for found in counts])
    assert [found.value[2] for found in counts] == sorted(found.value[2] for found in counts)


def test_without_time_stamps_nothing_stands_twice_and_nothing_is_said():
    subject = drawn()
    channels = {name: replace(channel, time_s=None) for name, channel in subject.recording.channels.items()}
    found = judged_run(replace(subject, recording=replace(subject.recording, channels=channels)))
    assert set(of(found, "duplicated-samples").verdict) == {N}
    assert found.accepted.all()


@pytest.mark.parametrize("names", [("pressure",), ("volume",), ("pressure", "volume")])
def test_a_channel_that_stands_still_for_half_a_beat_loses_that_beat(names):
    assert failing(frozen(640, 750, *names), "flat-line") == [3]


def test_a_long_freeze_is_found_in_every_beat_it_covers():
    found = of(judged_run(frozen(500, 1150)), "flat-line")
    assert failing(frozen(500, 1150), "flat-line") == [2, 3, 4, 5]
    assert found.value[[3, 4]].tolist() == [1.0, 1.0]
    assert found.at_s[[2, 3]].tolist() == [2.5, 3.0]
    assert sentence(found, 3) == "pressure or volume stands still for 100% of the beat (limit 40%)"


def test_a_growing_freeze_never_improves_the_verdict():
    shares = [of(judged_run(frozen(640, 640 + samples)), "flat-line") for samples in (2, 30, 60, 79, 90, 160, 500)]
    assert never_improves([found.worst() for found in shares])
    assert [found.worst() for found in shares][3:5] == [P, F]


@pytest.mark.parametrize("catheter", [NOISELESS, QUANTISED, Catheter(pressure_step_mmhg=0.5, volume_step_ml=0.5), COARSE])
@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_quantised_diastasis_is_flat_in_health(catheter, rate_hz):
    deep = Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=4.0, floor=0.15, time_constant_s=2.0))
    for heart in ("large", "failing", "right"):
        for conditions in (REST, RAMP, deep):
            assert worst(simulated(heart, conditions, catheter, rate_hz), "flat-line") is P


def test_a_coarse_converter_still_shows_a_freeze():
    subject = simulated("right", RAMP, COARSE)
    samples = subject.recording.channels["volume"].samples.copy()
    samples[1000:1400] = samples[1000]
    assert worst(rerecorded(subject, volume=samples), "flat-line") is F


def test_a_freeze_that_ends_where_it_began_is_found_in_the_beats_it_covers():
    subject = frozen(600, 1000)
    channels = dict(subject.recording.channels)
    samples = channels["volume"].samples
    slope = np.sign(np.arange(samples.size) - 800.0) * np.maximum(np.abs(np.arange(samples.size) - 800.0) - 200.0, 0.0)
    ramp = replace(channels["volume"], samples=100.0 + 0.1 * np.floor(slope / 10.0))
    found = of(judged_run(replace(subject, recording=replace(subject.recording, channels=channels | {"volume": ramp}))), "flat-line")
    assert [found.verdict[beat] for beat in (3, 4)] == [F, F]


def test_a_channel_that_never_moved_or_died_for_good_is_still():
    assert failing(frozen(0, 2420, "volume"), "flat-line") == list(range(12))
    assert failing(frozen(1510, 2420, "volume"), "flat-line") == [7, 8, 9, 10, 11]


def test_stillness_does_not_depend_on_unit_or_offset():
    samples = frozen(640, 750).recording.channels["pressure"].samples
    for moved in (7.50062 * samples, samples - 1000.0):
        assert [ends.tolist() for ends in still_stretches(moved)] == [ends.tolist() for ends in still_stretches(samples)]


def test_a_gap_is_no_still_stretch():
    samples = np.array([1.0, np.nan, np.nan, np.nan, np.nan, 2.0, 2.0, 2.0])
    assert [ends.tolist() for ends in still_stretches(samples)] == [[5], [8]]


@pytest.mark.parametrize("samples", [np.empty(0), np.array([1.0]), np.array([1.0, 1.0])])
def test_fewer_than_three_samples_hold_no_stretch(samples):
    assert still_stretches(samples)[0].size == 0


def test_a_run_whose_channels_were_not_read_is_not_evaluated_for_a_missing_signal():
    subject = replace(drawn(), signals=None)
    for name in ("flat-line", "duplicated-samples", "missing-samples"):
        assert set(of(judged_run(subject), name).verdict) == {N}
