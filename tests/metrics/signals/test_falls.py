import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from flows.sources.simulated.rhythm import Conditions
from metrics.signals.calibrate import calibrated
from metrics.signals.facts import RunFacts
from metrics.signals.falls import (
    MISFIT,
    MISSING,
    NO_HALF,
    NOT_POSITIVE,
    STRAIGHT,
    TOO_LONG,
    TOO_SHORT,
    Falls,
    falls,
    half_time,
    matsubara,
    raff_glantz,
    tau_ms,
    weiss,
)
from metrics.signals.landmarks import beats_of
from metrics.signals.recording import Channel, Recording
from tests.metrics.made_beats import made_beats, made_signals
from tests.metrics.recorded_hearts import run_in_memory, signals_and_beats

RATE_HZ = 250.0


def fall(pressure, step_s=0.004):
    """One fall of these pressures, at even steps."""
    pressure = np.asarray(pressure, dtype=np.float64)[None]
    return Falls(step_s * np.arange(pressure.size)[None], pressure, np.ones(pressure.shape, dtype=bool), np.array([""], dtype=object))


def exponential_fall(p0=70.0, pinf=-5.0, tau_s=0.05, last_s=0.06, step_s=0.004):
    return fall((p0 - pinf) * np.exp(-np.arange(0.0, last_s + 1e-9, step_s) / tau_s) + pinf, step_s)


@given(st.floats(40.0, 110.0), st.floats(-20.0, 6.0), st.floats(0.02, 0.12))
def test_a_free_asymptote_finds_every_exponential(p0, pinf, tau_s):
    found = raff_glantz(exponential_fall(p0, pinf, tau_s, last_s=1.2 * tau_s, step_s=tau_s / 12.0))
    assert found.tau_s[0] == pytest.approx(tau_s, rel=1e-6)
    assert found.asymptote_mmhg[0] == pytest.approx(pinf, abs=1e-4)
    assert found.misfit_mmhg[0] == pytest.approx(0.0, abs=1e-6)
    assert found.trouble.tolist() == [""]


@pytest.mark.parametrize("offset", [-5.0, -0.5, 0.5, 5.0])
def test_an_offset_moves_the_zero_asymptote_and_the_half_time_alone(offset):
    exact = exponential_fall(pinf=0.0)
    moved = fall(exact.pressure_mmhg[0] + offset)
    for measure in (raff_glantz, matsubara):
        assert measure(moved).tau_s[0] == pytest.approx(measure(exact).tau_s[0], rel=1e-6)
        assert measure(moved).asymptote_mmhg[0] == pytest.approx(measure(exact).asymptote_mmhg[0] + offset, abs=1e-4)
    for measure in (weiss, half_time):
        assert np.sign(measure(moved).tau_s[0] - measure(exact).tau_s[0]) == np.sign(offset)


@pytest.mark.parametrize("measure", [weiss, half_time])
def test_what_1_mmhg_does_is_told(measure):
    up, down = (measure(fall(exponential_fall().pressure_mmhg[0] + by)).tau_s[0] for by in (0.01, -0.01))
    assert measure(exponential_fall()).per_mmhg[0] == pytest.approx((up - down) / 0.02, rel=2e-3)


@pytest.mark.parametrize("measure", [raff_glantz, weiss, matsubara, half_time])
@given(gain=st.floats(0.5, 2.0))
def test_a_gain_moves_no_time_constant(measure, gain):
    exact = exponential_fall(pinf=-2.0)
    assert measure(fall(gain * exact.pressure_mmhg[0])).tau_s[0] == pytest.approx(measure(exact).tau_s[0], rel=1e-6)


def test_half_of_80_after_4_and_a_half_steps():
    found = half_time(fall([80.0, 70.0, 60.0, 50.0, 42.0, 38.0, 20.0]))
    assert found.tau_s[0] == pytest.approx(4.5 * 0.004 / np.log(2.0))
    assert half_time(fall([80.0, 70.0, 60.0, 50.0, 41.0])).trouble.tolist() == [NO_HALF]


def test_a_straight_fall_is_infinitely_slow_and_a_hunched_one_too():
    straight = fall(np.linspace(80.0, 20.0, 12))
    hunched = fall(80.0 - 60.0 * np.linspace(0.0, 1.0, 12) ** 2)
    for one in (straight, hunched):
        found = raff_glantz(one)
        assert found.tau_s.tolist() == [np.inf]
        assert found.asymptote_mmhg.tolist() == [-np.inf]
        assert found.trouble.tolist() == [STRAIGHT]


def test_a_fall_that_no_curve_follows_has_no_time_constant():
    pressure = exponential_fall().pressure_mmhg[0].copy()
    pressure += 12.0 * np.sin(2.0 * np.pi * np.arange(pressure.size) / 5.0)
    for measure in (raff_glantz, matsubara):
        found = measure(fall(pressure))
        assert np.isnan(found.tau_s[0])
        assert found.trouble.tolist() == [MISFIT]
        assert found.misfit_mmhg[0] > 0.05 * 60.0


def test_a_logarithm_needs_pressures_above_0():
    found = weiss(exponential_fall(p0=60.0, pinf=-30.0))
    assert np.isnan(found.tau_s[0])
    assert found.trouble.tolist() == [NOT_POSITIVE]


def run_of(pressure, first, last, rate_hz=RATE_HZ, missing=()):
    """A run of one beat that falls from ``first`` on and ends at ``last``."""
    signals = made_signals(pressure, pressure, rate_hz=rate_hz)
    signals.missing[list(missing)] = True
    return signals, made_beats(1, rr_s=last / rate_hz, rate_hz=rate_hz, dpdt_min_at=[first])


def test_a_fall_goes_from_dpdt_minimum_to_5_mmhg_above_the_next_end_diastolic_pressure():
    pressure = np.concatenate([[90.0, 85.0], 80.0 - 5.0 * np.arange(16), np.full(30, 8.0)])
    found = falls(*run_of(pressure, 2, 40))
    # 80, 75, ... down to 15: the next sample, 10, is below 8 + 5
    assert found.pressure_mmhg[0].tolist() == (80.0 - 5.0 * np.arange(14)).tolist()
    assert found.duration_s[0] == pytest.approx(13 / RATE_HZ)
    assert found.drop_mmhg[0] == pytest.approx(65.0)
    assert found.trouble.tolist() == [""]


@pytest.mark.parametrize(
    ("samples", "rate_hz", "trouble"),
    [(6, 250.0, ""), (5, 250.0, TOO_SHORT), (5, 200.0, ""), (4, 100.0, TOO_SHORT), (20, 1000.0, TOO_SHORT), (21, 1000.0, "")],
)
def test_a_fall_needs_5_samples_and_20_ms(samples, rate_hz, trouble):
    pressure = np.concatenate([np.linspace(60.0, 20.0, samples), np.full(40, 2.0)])
    found = falls(*run_of(pressure, 0, samples + 30, rate_hz))
    assert found.trouble.tolist() == [trouble]
    assert found.inside.sum() == (0 if trouble else samples)


def test_a_fall_that_never_ends_is_none():
    pressure = np.concatenate([np.linspace(60.0, 30.0, 100), np.full(20, 2.0)])
    assert falls(*run_of(pressure, 0, 110)).trouble.tolist() == [TOO_LONG]


def test_samples_that_are_missing_in_a_fall_spoil_it():
    pressure = np.concatenate([np.linspace(60.0, 20.0, 12), np.full(40, 2.0)])
    assert falls(*run_of(pressure, 0, 40, missing=[5])).trouble.tolist() == [MISSING]
    assert falls(*run_of(pressure, 0, 40, missing=[30])).trouble.tolist() == [""]


def test_a_beat_without_its_landmark_and_a_run_without_beats_have_no_fall():
    signals, _ = run_of(np.full(60, 10.0), 0, 40)
    beats = made_beats(1, rr_s=40 / RATE_HZ)
    assert falls(signals, beats).trouble.tolist() == [TOO_SHORT]
    for measure in (raff_glantz, weiss, matsubara, half_time):
        assert np.isnan(measure(falls(signals, beats)).tau_s).all()
        assert measure(falls(signals, made_beats(0))).tau_s.size == 0
    assert tau_ms(signals, made_beats(0)).size == 0


def pieces(cycle_s, p0, pinf, tau_s, edp, *, is_cornered):
    """A heart whose pressure falls exactly exponentially from 0.30 s of each beat on, to 3 mmHg above end-diastolic pressure."""

    def joined(a, b, begin, end, slope_a, slope_b):
        x = np.clip((cycle_s - a) / (b - a), 0.0, 1.0)
        rise = (3.0 * x**2 - 2.0 * x**3) * (end - begin)
        return begin + rise + (b - a) * ((x**3 - 2.0 * x**2 + x) * slope_a + (x**3 - x**2) * slope_b)

    open_s = 0.30 + tau_s * np.log((p0 - pinf) / (edp + 3.0 - pinf))
    steepest = 0.0 if is_cornered else -(p0 - pinf) / tau_s
    return np.select(
        [cycle_s < 0.02, cycle_s < 0.14, cycle_s < 0.30, cycle_s < open_s, cycle_s < open_s + 0.08],
        [
            np.full_like(cycle_s, edp),
            joined(0.02, 0.14, edp, 1.3 * p0, 0.0, 0.0),
            joined(0.14, 0.30, 1.3 * p0, p0, 0.0, steepest),
            (p0 - pinf) * np.exp(-(cycle_s - 0.30) / tau_s) + pinf,
            joined(open_s, open_s + 0.08, edp + 3.0, edp - 3.0, -(edp + 3.0 - pinf) / tau_s, 0.0),
        ],
        joined(open_s + 0.08, 0.8, edp - 3.0, edp, 0.0, 0.0),
    )


SMOOTH = [(70.0, -5.0, 0.05, 8.0), (80.0, -10.0, 0.035, 8.0), (60.0, 0.0, 0.07, 15.0), (90.0, 5.0, 0.045, 12.0)]


@pytest.mark.parametrize("rate_hz", [250.0, 500.0, 1000.0])
@pytest.mark.parametrize(
    ("p0", "pinf", "tau_s", "edp", "is_cornered"), [*((*heart, False) for heart in SMOOTH), (70.0, -5.0, 0.05, 8.0, True)]
)
@settings(max_examples=4, deadline=None)
@given(phase=st.floats(0.0, 1.0))
def test_the_common_filter_leaves_an_exponential_what_it_is(rate_hz, p0, pinf, tau_s, edp, is_cornered, phase):
    time_s = (np.arange(round(10.0 * rate_hz)) + phase) / rate_hz
    pressure = pieces(np.mod(time_s, 0.8), p0, pinf, tau_s, edp, is_cornered=is_cornered)
    recording = Recording("rest", {name: Channel(pressure, unit, rate_hz) for name, unit in (("pressure", "mm[Hg]"), ("volume", "mL"))})
    signals = calibrated(recording, RunFacts("rest", "steady", sampling_rate_hz=rate_hz))
    found = raff_glantz(falls(signals, beats_of(signals, "LV")))
    assert found.trouble.tolist() == [""] * found.trouble.size
    assert found.tau_s.size >= 10
    np.testing.assert_allclose(found.tau_s, tau_s, rtol=0.02)


def test_a_slower_relaxation_has_a_longer_time_constant():
    rest = Conditions(duration_s=8.0)
    signals, beats = signals_and_beats(run_in_memory("normal", rest))
    slow_signals, slow_beats = signals_and_beats(run_in_memory("failing", rest))
    for measure in (raff_glantz, weiss, matsubara, half_time):
        assert np.nanmedian(measure(falls(slow_signals, slow_beats)).tau_s) > 1.2 * np.nanmedian(measure(falls(signals, beats)).tau_s)
