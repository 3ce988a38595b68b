from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict
from checks.run.clipping import flat_tops, lost
from checks.subject import RunSubject
from checks.verdicts import sentence
from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.recorded import NOISELESS
from tests.checks.made_subjects import (
    COARSE,
    OWN_LIMITS,
    QUANTISED,
    RAMP,
    REST,
    drawn,
    judged_run,
    never_improves,
    of,
    rerecorded,
    simulated,
    worst,
)

P, F, N = Verdict.PASS, Verdict.FAIL, Verdict.NOT_EVALUATED
NAMES = ("pressure", "volume")
ENDS = ("", "-low")
DEEPER = ("pressure-clipping", "pressure-clipping-work", "pressure-clipping-end-systole", "pressure-clipping-slope")


def cut(subject, name, share, *, low=False):
    """The run with the top (or bottom) of a channel cut off flat."""
    samples = subject.recording.channels[name].samples
    reach = share * float(np.ptp(samples))
    limited = np.maximum(samples, samples.min() + reach) if low else np.minimum(samples, samples.max() - reach)
    return rerecorded(subject, **{name: limited})


@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
@pytest.mark.parametrize("catheter", [NOISELESS, QUANTISED, COARSE, Catheter(pressure_step_mmhg=0.5, volume_step_ml=0.5)])
@pytest.mark.parametrize("heart", ["normal", "large", "failing", "right"])
def test_quantised_plateaus_are_no_rails(heart, catheter, rate_hz):
    for conditions in (REST, RAMP):
        verdict = judged_run(simulated(heart, conditions, catheter, rate_hz))
        assert [of(verdict, f"{name}-clipping{end}").worst() for name in NAMES for end in ENDS] == [P] * 4


@pytest.mark.parametrize("catheter", [NOISELESS, QUANTISED])
@pytest.mark.parametrize("name", NAMES)
def test_a_channel_that_ran_out_of_range_fails_and_leaves_the_beats_alone(name, catheter):
    verdict = judged_run(cut(simulated("normal", REST, catheter), name, 0.2))
    assert of(verdict, f"{name}-clipping").worst() is F
    assert verdict.is_usable
    assert verdict.accepted.mean() > 0.9


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("low", [False, True])
def test_top_and_bottom_are_told_apart(name, low):
    verdict = judged_run(cut(simulated(), name, 0.2, low=low))
    assert [of(verdict, f"{name}-clipping{end}").worst() for end in ENDS] == ([P, F] if low else [F, P])


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("low", [False, True])
def test_a_rail_that_cuts_deeper_never_improves_the_verdict(name, low):
    check = f"{name}-clipping" + ("-low" if low else "")
    verdicts = [worst(cut(simulated(), name, share, low=low), check) for share in (0.0, 0.02, 0.05, 0.1, 0.2, 0.3)]
    assert (verdicts[0], verdicts[-1]) == (P, F)
    assert never_improves(verdicts)


@pytest.mark.parametrize("heart", ["normal", "failing", "right"])
def test_a_rail_reaches_the_peak_then_work_and_end_systole_and_the_slope_last(heart):
    found = [judged_run(cut(simulated(heart), "pressure", share)) for share in (0.02, 0.2, 0.45)]
    failed = [[of(verdict, name).worst() is F for name in DEEPER] for verdict in found]
    assert failed == [[False] * 4, [True, True, True, False], [True] * 4]


@pytest.mark.parametrize("share", [0.1, 0.2, 0.3])
def test_what_is_lost_is_told_from_the_flanks(share):
    wave = 100.0 * np.sin(np.arange(6000) / 40.0)
    noisy = np.minimum(wave + 0.3 * np.random.default_rng(5).standard_normal(wave.size), 100.0 - 200.0 * share)
    first, stop = flat_tops(noisy, 250.0)
    assert first.size > 20
    assert np.median(lost(noisy, first, stop, 250.0)) == pytest.approx(share, rel=0.33)


@pytest.mark.parametrize(("beats", "expected"), [(2, P), (3, F), (5, F)])
def test_a_rail_must_come_back_in_three_beats(beats, expected):
    wave = np.sin(2.0 * np.pi * np.arange(2420) / 200.0)
    peaks = np.where(np.arange(2420) < 200 * beats, 60.0 + 70.0 * wave, 60.0 + 30.0 * wave)
    subject = drawn()
    channel = subject.recording.channels["pressure"]
    clipped = replace(channel, samples=np.minimum(peaks, 110.0))
    recording = replace(subject.recording, channels={**subject.recording.channels, "pressure": clipped})
    found = of(judged_run(RunSubject(subject.facts, recording, subject.signals, subject.beats)), "pressure-clipping")
    assert found.worst() is expected
    if expected is F:
        assert "of its reach" in sentence(found, 0)


def test_the_top_of_a_smooth_wave_is_no_rail_however_coarse_the_converter():
    wave = 100.0 * np.sin(np.arange(4000) / 40.0)
    for step in (0.1, 1.0, 5.0):
        assert flat_tops(np.round(wave / step) * step, 250.0)[0].size == 0
    assert flat_tops(np.minimum(wave, 80.0), 250.0)[0].size > 10


@pytest.mark.parametrize("samples", [np.empty(0), np.full(5, np.nan), np.array([1.0, 2.0]), np.full(100, 3.0)])
def test_too_little_or_nothing_but_one_value_has_no_rail(samples):
    assert flat_tops(samples, 250.0)[0].size == 0


@pytest.mark.parametrize(("gain", "shift"), [(2.0, 0.0), (0.5, 40.0), (1.0, -30.0)])
def test_unit_and_offset_of_a_channel_do_not_matter(gain, shift):
    samples = cut(simulated(), "pressure", 0.2).recording.channels["pressure"].samples
    assert flat_tops(samples * gain + shift, 250.0)[0].tolist() == flat_tops(samples, 250.0)[0].tolist()


def test_a_channel_that_is_not_there_is_not_evaluated():
    subject = drawn()
    only_pressure = replace(subject.recording, channels={"pressure": subject.recording.channels["pressure"]})
    without = RunSubject(subject.facts, only_pressure, subject.signals, subject.beats)
    assert of(judged_run(without, OWN_LIMITS), "volume-clipping").worst() is N
    assert worst(without, "pressure-clipping") is P
