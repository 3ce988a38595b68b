"""Hum, noise, coarse steps, ringing, a leaking electrogram, and a run of which little is left."""

import numpy as np
import pytest

from checks.check import Verdict
from checks.run.beats_accepted import accepted_share
from checks.run.ecg_leak import leak
from checks.run.noise import responses
from checks.run.quantisation import converter_step, step_share
from checks.run.ringing import common_swing
from checks.subject import RunSubject
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.heart import HEARTS
from flows.sources.simulated.ladders import RUN_LADDERS
from metrics.signals.mains import line_amplitude, shown_at_hz, stretches
from metrics.signals.recording import Recording
from tests.checks.made_acquisitions import judged
from tests.checks.made_subjects import (
    BREATHING_RAMP,
    COARSE,
    FIBRILLATING,
    RAMP,
    REST,
    SINUS_ARRHYTHMIA,
    drawn,
    judged_run,
    never_improves,
    of,
    prepared,
    rerecorded,
    simulated,
    solution,
    worst,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
HUM = ("edp-hum", "pressure-hum", "dpdt-hum", "end-systole-hum", "volume-hum")
NOISE = ("pressure-noise", "dpdt-noise", "volume-noise", "volume-noise-intercept")
STEPS = ("edp-quantisation", "dpdt-quantisation", "pressure-quantisation", "volume-quantisation")
LEAK = ("ecg-leak", "ecg-leak-large")
ALL = (*HUM, *NOISE, *STEPS, *LEAK, "ringing", "beats-accepted")
LADDERS = {ladder.name: ladder for ladder in RUN_LADDERS}
CLIMBS = {
    "pressure-hum-50": ("edp-hum", "pressure-hum", "dpdt-hum"),
    "pressure-hum-60": ("edp-hum", "dpdt-hum"),
    "volume-hum-50": ("volume-hum",),
    "pressure-noisy": ("pressure-noise", "dpdt-noise"),
    "volume-noisy": ("volume-noise", "volume-noise-intercept"),
    "pressure-coarse": ("edp-quantisation", "dpdt-quantisation", "pressure-quantisation"),
    "volume-coarse": ("volume-quantisation",),
    "ecg-leaking": LEAK,
}
"""Which checks fail at the grossest step of a ladder."""


def added(subject, name, values):
    return rerecorded(subject, **{name: subject.recording.channels[name].samples + values})


def mains(subject, name, amplitude, hz=50.0):
    channel = subject.recording.channels[name]
    return added(subject, name, amplitude * np.sin(2.0 * np.pi * hz * np.arange(channel.samples.size) / channel.sampling_rate_hz + 0.3))


def noise(subject, name, sd):
    return added(subject, name, sd * np.random.default_rng(3).standard_normal(subject.recording.channels[name].samples.size))


def verdicts(subject, names):
    found = judged_run(subject)
    return {name: of(found, name).worst() for name in names}


@pytest.mark.parametrize("heart", [heart.name for heart in HEARTS])
def test_sound_hearts_with_the_usual_noise_are_quiet(heart):
    for conditions in (REST, BREATHING_RAMP, SINUS_ARRHYTHMIA, FIBRILLATING):
        for rate_hz in (250.0, 1000.0) if conditions is REST else (250.0,):
            assert set(verdicts(simulated(heart, conditions, rate_hz=rate_hz), ALL).values()) <= {P, N}
    solution.cache_clear()


@pytest.mark.parametrize("heart", ["normal", "right", "right-small"])
def test_steps_of_one_unit_withhold_nothing(heart):
    assert F not in verdicts(simulated(heart, REST, COARSE), STEPS).values()


@pytest.mark.parametrize(
    ("amplitude", "expected"),
    [(0.5, (P, P, P)), (1.5, (S, P, P)), (3.0, (F, P, P)), (8.0, (F, S, S)), (14.0, (F, S, F)), (25.0, (F, F, F))],
)
def test_hum_first_reaches_end_diastole_then_the_slope_then_all_pressure(amplitude, expected):
    assert tuple(verdicts(mains(simulated(), "pressure", amplitude), HUM[:3]).values()) == expected


@pytest.mark.parametrize("hz", [49.8, 50.0, 60.0, 60.2])
def test_the_mains_are_found_where_they_wander(hz):
    time_s = np.arange(5000) / 1000.0
    wave = 50.0 * np.sin(2.0 * np.pi * 1.1 * time_s) + 2.0 * np.sin(2.0 * np.pi * hz * time_s)
    found = [line_amplitude(stretches(wave, 1000.0), 1000.0, mains_hz) for mains_hz in (50.0, 60.0)]
    assert max(found) == pytest.approx(2.0, rel=0.1)
    assert min(found) < 0.001


@pytest.mark.parametrize(
    ("rate_hz", "expected"), [(1000.0, 50.0), (120.0, 50.0), (80.0, 30.0), (100.0, np.nan), (60.0, np.nan), (52.0, np.nan)]
)
def test_a_slow_recorder_shows_the_mains_elsewhere_or_not_at_all(rate_hz, expected):
    assert shown_at_hz(50.0, rate_hz) == pytest.approx(expected, nan_ok=True)


def test_hum_needs_a_stretch_without_a_gap():
    assert stretches(np.full(1000, np.nan), 250.0).shape[0] == 0
    assert np.isnan(line_amplitude(np.empty((0, 500)), 250.0, 50.0))
    subject = simulated()
    holed = subject.recording.channels["volume"].samples.copy()
    holed[::400] = np.nan
    assert verdicts(rerecorded(subject, volume=holed), ("volume-hum",)) == {"volume-hum": N}


@pytest.mark.parametrize(
    ("name", "sd", "expected"),
    [
        ("pressure", 0.5, (P, P, P, P)),
        ("pressure", 2.0, (P, F, P, P)),
        ("pressure", 10.0, (F, F, P, P)),
        ("volume", 2.5, (P, P, P, S)),
        ("volume", 3.5, (P, P, S, F)),
        ("volume", 6.5, (P, P, F, F)),
    ],
)
def test_noise_first_reaches_the_slope_then_what_is_read_at_extremes(name, sd, expected):
    assert tuple(verdicts(noise(simulated(), name, sd), NOISE).values()) == expected


def test_hum_is_not_taken_for_noise():
    assert verdicts(mains(simulated(), "pressure", 10.0), NOISE)["dpdt-noise"] is P
    assert verdicts(mains(simulated(), "volume", 15.0), NOISE)["volume-noise"] is P


def test_a_channel_too_slow_for_the_filter_shows_no_noise():
    assert all(np.isnan(one) for one in responses(100.0, "LV"))
    assert all(one > 0.0 for one in responses(250.0, "RV"))


@pytest.mark.parametrize(
    ("step", "expected"), [(0.5, (P, P, P)), (1.2, (S, P, P)), (2.0, (F, P, P)), (4.0, (F, S, P)), (7.0, (F, F, S)), (12.0, (F, F, F))]
)
def test_pressure_on_ever_coarser_steps(step, expected):
    subject = simulated()
    coarse = np.round(subject.recording.channels["pressure"].samples / step) * step
    assert tuple(verdicts(rerecorded(subject, pressure=coarse), STEPS[:3]).values()) == expected


@pytest.mark.parametrize(("step", "expected"), [(1.0, P), (5.0, S), (12.0, F)])
def test_volume_on_ever_coarser_steps(step, expected):
    subject = simulated()
    coarse = np.round(subject.recording.channels["volume"].samples / step) * step
    assert worst(rerecorded(subject, volume=coarse), "volume-quantisation") is expected


def test_a_channel_of_one_value_has_no_step():
    assert np.isnan(converter_step(np.ones(10)))
    still = np.full(simulated().recording.channels["pressure"].samples.size, 4.0)
    assert np.isnan(step_share(rerecorded(simulated(), pressure=still), "pressure"))


def test_a_line_that_swings_after_relaxation_rings_and_a_tip_does_not():
    acquisition, _ = clean_acquisition("normal", ramps=1, salines=0)
    for natural_hz, expected in ((100.0, P), (12.0, F), (8.0, F)):
        runs, _, _ = judged(LADDERS["line-ringing"].inject(acquisition, natural_hz).acquisition)
        assert {of(run, "ringing").worst() for run in runs.values()} == {expected}


def test_what_differs_from_beat_to_beat_does_not_ring():
    pieces = np.random.default_rng(1).standard_normal((12, 60))
    assert common_swing(pieces, 250.0) == 0.0
    assert common_swing(pieces + 3.0 * np.sin(np.arange(60) / 2.0), 250.0) == pytest.approx(2.1, abs=0.3)
    assert worst(drawn(), "ringing") in {P, F}
    assert worst(drawn(3), "ringing") is N


@pytest.mark.parametrize("late", [-4, 0, 5])
def test_a_leak_is_found_whatever_the_delay_and_the_slow_curve(late):
    time_s = np.arange(-75, 76) / 250.0
    lead = np.exp(-((time_s / 0.012) ** 2)) - 0.3 * np.exp(-(((time_s - 0.03) / 0.01) ** 2))
    volume = 120.0 - 40.0 * time_s + 5.0 * np.roll(lead, late)
    lags = np.arange(-5, 6)
    assert leak(volume, lead, 10, lags) == pytest.approx(5.0, rel=0.05)
    assert leak(120.0 - 40.0 * time_s + 90.0 * time_s**2, lead, 10, lags) == 0.0


def test_noise_that_looks_like_the_electrogram_by_chance_is_no_leak():
    lead = np.exp(-((np.arange(-75, 76) / 250.0 / 0.012) ** 2))
    volume = 120.0 + 0.5 * lead
    assert leak(volume, lead, 10, np.array([0])) == pytest.approx(0.5, rel=0.05)
    assert leak(volume, lead, 10, np.array([0]), 0.5) == 0.0


def test_without_an_electrogram_no_leak_is_looked_for():
    subject = simulated()
    channels = {name: channel for name, channel in subject.recording.channels.items() if name != "ecg"}
    assert set(verdicts(prepared(Recording("rest", channels), subject.facts), LEAK).values()) == {N}


@pytest.mark.parametrize(("accepted", "expected"), [(12, P), (6, P), (5, S), (4, S), (3, F), (0, F)])
def test_a_run_of_which_less_than_a_third_is_sound(accepted, expected):
    edv = np.where(np.arange(12) < accepted, 120.0, 900.0)
    found = judged_run(drawn(edv_ml=edv, esv_ml=edv - 70.0))
    assert of(found, "beats-accepted").worst() is expected
    assert found.is_usable is (expected is not F)


def test_beats_that_were_lost_with_their_samples_say_nothing_against_the_others():
    subject = simulated()
    rng, holed = np.random.default_rng(2), subject.recording.channels["pressure"].samples.copy()
    for first in rng.integers(200, holed.size - 200, 30).tolist():
        holed[first : first + 10] = np.nan
    found = judged_run(rerecorded(subject, pressure=holed))
    assert found.accepted.mean() < 1.0 / 3.0
    assert of(found, "beats-accepted").worst() is P


@pytest.mark.parametrize("heart", ["normal", "right", "right-fast"])
def test_hum_and_noise_are_not_taken_for_ringing(heart):
    for sd in (2.0, 5.0, 10.0):
        assert worst(noise(simulated(heart), "pressure", sd), "ringing") in {P, N}
        for hz in (50.0, 60.0):
            assert worst(mains(simulated(heart), "pressure", sd, hz), "ringing") in {P, N}


def test_a_coarse_converter_does_not_ring():
    for heart in ("right", "right-stiff"):
        assert {worst(simulated(heart, conditions, COARSE), "ringing") for conditions in (REST, FIBRILLATING)} == {P}


def test_before_the_beats_are_judged_nothing_is_said_of_them():
    subject = drawn()
    assert np.isnan(float(accepted_share(RunSubject(subject.facts, subject.recording, subject.signals, subject.beats)).value))


def test_white_noise_of_thirty_mmhg_publishes_nothing_of_pressure():
    found = judged_run(noise(simulated("right"), "pressure", 30.0))
    assert {"dpdt-noise", "pressure-noise"} <= {check.name for check in found.failed}


@pytest.mark.parametrize("name", CLIMBS)
@pytest.mark.parametrize("heart", ["normal", "right"])
def test_a_growing_fault_never_improves_the_verdict_and_a_gross_one_is_found(heart, name):
    acquisition, _ = clean_acquisition(heart, ramps=1, salines=0)
    climbs = {}
    for severity in LADDERS[name].severities:
        injected = LADDERS[name].inject(acquisition, severity)
        runs, _, _ = judged(injected.acquisition)
        for check in CLIMBS[name]:
            for run, verdict in runs.items():
                climbs.setdefault((check, run), []).append(of(verdict, check).worst())
        assert {expected.check for expected in injected.expected} <= set(CLIMBS[name])
    for key, found in climbs.items():
        assert (found[0], found[-1]) == (P, F), key
        assert never_improves(found), key


def test_the_ladders_of_a_preload_run_are_those_of_one_at_rest():
    assert verdicts(mains(simulated("normal", RAMP), "pressure", 25.0), HUM[:3]) == dict.fromkeys(HUM[:3], F)
