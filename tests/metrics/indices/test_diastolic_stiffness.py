from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from flows.sources.simulated.heart import heart_named
from metrics.indices.card import RunBeats, StageBeats, Withheld
from metrics.indices.diastolic_curve import end_diastolic_points, exponential_curve, power_curve
from metrics.indices.diastolic_stiffness import (
    BETA,
    POWER_STIFFNESS,
    POWER_VOLUME_AT_20,
    POWER_VOLUME_AT_30,
    STIFFNESS,
    VOLUME_AT_20,
    VOLUME_AT_30,
)
from metrics.signals.preload import preload_window
from tests.bench.accuracy_of_clean import facts_of
from tests.metrics.made_beats import made_beats, made_signals
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats

CARDS = (BETA, STIFFNESS, VOLUME_AT_20, VOLUME_AT_30, POWER_STIFFNESS, POWER_VOLUME_AT_20, POWER_VOLUME_AT_30)
VOLUMES_ML = np.linspace(150.0, 90.0, 11)
by_card = pytest.mark.parametrize("card", CARDS, ids=lambda card: f"{card.name}-{card.estimator}")


def passive_run(volume_ml, pressure_mmhg, run="ramp"):
    """A run whose beats end diastole at these points: each beat stands still at the next one's."""
    count, rate_hz = len(volume_ml), 250.0
    beats = made_beats(count, rr_s=0.4, rate_hz=rate_hz)
    beats = replace(beats, start=beats.start + 60, end=beats.end + 60)
    held = np.repeat(np.arange(count), 100)
    signals = made_signals(np.append(pressure_mmhg[held], np.zeros(80)), np.append(volume_ml[held], np.zeros(80)), rate_hz=rate_hz)
    return RunBeats(run, signals, beats, np.ones(count, dtype=bool), "caval-balloon")


def curved(volume_ml, beta=0.03, alpha=0.4, offset=-1.0):
    return alpha * np.exp(beta * volume_ml) + offset


def scattered(seed=0, scale=0.2):
    return curved(VOLUMES_ML) + np.random.default_rng(seed).normal(0.0, scale, VOLUMES_ML.size)


def stage(*pressures, volume_ml=VOLUMES_ML):
    return StageBeats(preload=tuple(passive_run(volume_ml, pressure, f"ramp-{n}") for n, pressure in enumerate(pressures, 1)))


@given(st.floats(0.005, 0.06), st.floats(3.0, 20.0), st.floats(-4.0, 6.0))
def test_an_exact_curve_is_found(beta, rise, offset):
    pressure = offset + rise * np.exp(beta * (VOLUMES_ML - 120.0))
    curve = exponential_curve(VOLUMES_ML, pressure)
    assert curve.beta_per_ml() == pytest.approx(beta, rel=1e-5)
    middle = offset + rise
    assert curve.volume_at_ml(middle) == pytest.approx(120.0, abs=1e-4)
    assert curve.stiffness_mmhg_per_ml(middle) == pytest.approx(beta * rise, rel=1e-5)


def test_indices_of_an_exact_curve():
    made = stage(curved(VOLUMES_ML))
    assert BETA.compute(made).value == pytest.approx(0.03)
    assert STIFFNESS.compute(made).value == pytest.approx(0.03 * 11.0)
    assert VOLUME_AT_20.compute(made).value == pytest.approx(np.log(21.0 / 0.4) / 0.03)
    assert VOLUME_AT_30.compute(made).value == pytest.approx(np.log(31.0 / 0.4) / 0.03)
    assert BETA.compute(made).beats == 11


@pytest.mark.parametrize("heart", ["normal", "small", "large", "failing", "stiff", "high-afterload", "right", "right-failing"])
@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_the_passive_curve_of_a_simulated_heart(heart, rate_hz):
    recorded = heart_runs(heart, rate_hz)["ramp"]
    signals, beats = signals_and_beats(recorded)
    run = RunBeats("ramp", signals, beats, preload_window(beats, facts_of(recorded), rate_hz).inside)
    made = heart_named(heart)
    assert BETA.compute(StageBeats(preload=(run,))).value == pytest.approx(made.passive_exponent_per_ml, rel=0.005)
    volume_ml, pressure_mmhg = end_diastolic_points(run)
    passive = made.passive_pressure_mmhg * np.expm1(made.passive_exponent_per_ml * (volume_ml - made.v0_ml))
    np.testing.assert_allclose(pressure_mmhg, passive, atol=0.05)


def test_a_run_that_begins_with_end_diastole_is_read_from_its_first_sample():
    run = passive_run(VOLUMES_ML, curved(VOLUMES_ML))
    run = RunBeats("ramp", run.signals, replace(run.beats, start=run.beats.start - 60), run.chosen)
    assert end_diastolic_points(run)[0][0] == VOLUMES_ML[0]


@by_card
def test_the_interval_holds_the_truth_as_often_as_it_says(card):
    truth = card.compute(stage(curved(VOLUMES_ML))).value if card.primary else power_truth(card)
    base = curved(VOLUMES_ML) if card.primary else 11.5 * (VOLUMES_ML / 120.0) ** 4
    hits = []
    for seed in range(60):
        noise = np.random.default_rng(seed).normal(0.0, 0.3, VOLUMES_ML.size)
        estimate = card.compute(stage(base + noise))
        hits.append(estimate.fit_low <= truth <= estimate.fit_high)
    assert np.mean(hits) >= 0.88


def power_truth(card):
    at = {pressure: 120.0 * (pressure / 11.5) ** 0.25 for pressure in (10.0, 20.0, 30.0)}
    return {"EDPVR_stiffness": 40.0 / at[10.0], "V20": at[20.0], "V30": at[30.0]}[card.name]


@by_card
def test_the_calibration_moves_each_as_told(card):
    pressure = scattered()
    made = stage(pressure)
    told = card.sensitivity(made, card.compute(made).value)
    step = 1e-3
    moved = {
        "pressure_gain": [stage(pressure * (1.0 + by)) for by in (step, -step)],
        "pressure_mmhg": [stage(pressure + by) for by in (step, -step)],
        "volume_gain": [stage(pressure, volume_ml=VOLUMES_ML * (1.0 + by)) for by in (step, -step)],
        "volume_ml": [stage(pressure, volume_ml=VOLUMES_ML + by) for by in (step, -step)],
    }
    for name, (up, down) in moved.items():
        found = (card.compute(up).value - card.compute(down).value) / (2.0 * step)
        scale = abs(card.compute(made).value)
        assert getattr(told, name) == pytest.approx(found, rel=0.05, abs=2e-3 * scale), name


def test_runs_are_pooled_and_one_without_a_curve_is_left_out():
    level = np.full(VOLUMES_ML.size, 7.0)
    made = stage(curved(VOLUMES_ML), curved(VOLUMES_ML, beta=0.032, alpha=0.3), level)
    estimate = BETA.compute(made)
    assert estimate.value == pytest.approx(0.031)
    assert (estimate.runs, estimate.beats) == (2, 22)
    assert len(estimate.left_out) == 1
    assert estimate.left_out[0].startswith("run ramp-3: ")


def test_two_runs_join_errors_in_quadrature_and_add_their_freedom():
    one, two = (BETA.compute(stage(scattered(seed))) for seed in (1, 2))
    both = BETA.compute(stage(scattered(1), scattered(2)))
    halves = np.array([one.fit_high - one.value, two.fit_high - two.value]) / stats.t.ppf(0.975, 8)
    assert both.fit_high - both.value == pytest.approx(stats.t.ppf(0.975, 16) * np.hypot(*halves) / 2.0)


def refused(card, *pressures, volume_ml=VOLUMES_ML):
    with pytest.raises(Withheld) as caught:
        card.compute(stage(*pressures, volume_ml=volume_ml))
    return str(caught.value)


def test_points_on_a_straight_line_have_no_beta_but_a_slope():
    straight = 8.0 + 0.2 * (VOLUMES_ML - 120.0) + np.random.default_rng(5).normal(0.0, 0.2, VOLUMES_ML.size)
    assert refused(BETA, straight).startswith("run ramp-1: the points cannot be told from a straight line (beta ")
    assert STIFFNESS.compute(stage(straight)).value == pytest.approx(0.2, rel=0.2)


def test_points_that_bend_the_other_way_have_no_beta():
    assert "cannot be told from a straight line" in refused(BETA, 12.0 - 6.0 * np.exp(-0.03 * (VOLUMES_ML - 120.0)))


@by_card
def test_pressure_that_falls_with_volume_is_no_passive_curve(card):
    assert refused(card, curved(VOLUMES_ML)[::-1]).endswith("end-diastolic pressure does not rise with volume")


@pytest.mark.parametrize("card", [VOLUME_AT_20, VOLUME_AT_30, POWER_VOLUME_AT_30])
def test_a_pressure_that_was_never_near_is_not_spoken_of(card):
    low = 0.25 * curved(VOLUMES_ML)
    assert f"from {low.min():.1f} to {low.max():.1f} mmHg say nothing of" in refused(card, low)


@pytest.mark.parametrize(("highest_mmhg", "is_told"), [(15.1, True), (14.9, False)])
def test_a_pressure_half_of_the_range_beyond_is_the_last_one(highest_mmhg, is_told):
    # 5 to 15 mmHg reach to 20
    pressure = 5.0 + (highest_mmhg - 5.0) * np.expm1(0.03 * (VOLUMES_ML - 90.0)) / np.expm1(1.8)
    if is_told:
        assert VOLUME_AT_20.compute(stage(pressure)).value > VOLUMES_ML.max()
    else:
        assert "say nothing of 20 mmHg" in refused(VOLUME_AT_20, pressure)


def test_a_scatter_without_a_rise_has_no_stiffness():
    noise = 10.0 + np.random.default_rng(3).normal(0.0, 2.0, VOLUMES_ML.size) + 0.01 * (VOLUMES_ML - 120.0)
    assert "cannot be told from zero" in refused(STIFFNESS, noise) or "does not rise" in refused(STIFFNESS, noise)


@by_card
def test_five_points_of_more_than_one_load_are_needed(card):
    four = VOLUMES_ML[:4]
    assert refused(card, curved(four), volume_ml=four) == "run ramp-1: 4 accepted beats in the usable window where 5 are needed"
    same = np.full(6, 110.0)
    assert refused(card, curved(same), volume_ml=same) == "run ramp-1: every point has the same load"
    with pytest.raises(Withheld, match="no usable preload-reduction run"):
        card.compute(StageBeats())


def test_volumes_below_0_have_no_power():
    shifted = VOLUMES_ML - 100.0
    assert "volumes are not above 0" in refused(POWER_STIFFNESS, curved(VOLUMES_ML), volume_ml=shifted)
    assert BETA.compute(stage(curved(VOLUMES_ML), volume_ml=shifted)).value == pytest.approx(0.03)


def test_alpha_and_beta_are_never_told_apart():
    # the reason why alpha is no index: the two go together
    curve = exponential_curve(VOLUMES_ML, scattered())
    height, slope, bend = curve.parameters
    by_height = np.array([0.0, 1.0 / slope, -1.0 / bend - curve.middle_ml])  # of ln alpha
    covariance = by_height @ curve.covariance
    correlation = covariance[2] / np.sqrt(covariance @ by_height * curve.covariance[2, 2])
    assert correlation < -0.99
    assert height > 0.0


def test_both_kinds_read_the_same_from_the_same_points():
    pressure = 10.0 * (VOLUMES_ML / 120.0) ** 4
    kinds = [kind(VOLUMES_ML, pressure) for kind in (exponential_curve, power_curve)]
    assert kinds[0].volume_at_ml(15.0) == pytest.approx(kinds[1].volume_at_ml(15.0), abs=1.0)
