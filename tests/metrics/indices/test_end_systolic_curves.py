from dataclasses import replace

import numpy as np
import pytest

from flows.sources.simulated.heart import heart_named
from metrics.indices.card import RunBeats, StageBeats, Withheld
from metrics.indices.curved_end_systole import (
    LOGARITHMIC_ELASTANCE,
    LOGARITHMIC_INTERCEPT,
    QUADRATIC_ELASTANCE,
    QUADRATIC_INTERCEPT,
)
from metrics.indices.end_systolic_curve import curvature_note, preferences, quadratic, relation_through
from metrics.indices.end_systolic_elastance import VOLUME_INTERCEPT
from metrics.signals.preload import preload_window
from tests.bench.accuracy_of_clean import facts_of
from tests.metrics.made_beats import boxes, made_beats, made_signals
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats

VOLUME_ML = np.linspace(60.0, 20.0, 12)
JITTER = np.resize([0.3, -0.2, -0.3, 0.2, 0.1], 12)
KASS = -0.02 * (VOLUME_ML - 10.0) ** 2 + 3.0 * (VOLUME_ML - 10.0)
LOG = -300.0 + 110.0 * np.log(VOLUME_ML)


def points(volume_ml, pressure_mmhg, run="ramp"):
    """A run whose beats end systole at these points: before it every beat is fuller, and after it emptier at no pressure."""
    count = len(volume_ml)
    volume = np.append(np.column_stack([volume_ml + 40.0, volume_ml, volume_ml - 1.0]).ravel(), 0.0)
    pressure = np.append(np.column_stack([np.ones(count), pressure_mmhg, np.ones(count)]).ravel(), 0.0)
    at = 3 * np.arange(count)
    beats = made_beats(count, rate_hz=25.0, dpdt_max_at=at, dpdt_min_at=at + 2, edv_ml=volume_ml + 40.0, esv_ml=volume_ml - 1.0)
    return RunBeats(run, made_signals(pressure, volume), beats, np.ones(count, dtype=bool), "caval-balloon")


def ramp_of(heart, catheter="noiseless"):
    recorded = heart_runs(heart, catheter=catheter)["ramp"]
    signals, beats = signals_and_beats(recorded)
    return RunBeats("ramp", signals, beats, preload_window(beats, facts_of(recorded), 250.0).inside)


def test_a_parabola_is_read_where_it_says():
    relation = relation_through(VOLUME_ML, KASS, "quadratic")
    at_72 = relation.reading(72.0)
    assert (at_72.slope, at_72.axis_intercept) == pytest.approx((1.8, 10.0))
    assert at_72.slope_low <= at_72.slope <= at_72.slope_high
    with pytest.raises(ValueError, match="does not rise through 200 mmHg"):
        relation.reading(200.0)
    with pytest.raises(ValueError, match="does not rise through 0 mmHg"):
        _ = relation_through(VOLUME_ML, 20.0 + 0.02 * VOLUME_ML**2, "quadratic").v0_ml


def test_a_logarithm_is_read_where_it_says():
    relation = relation_through(VOLUME_ML, LOG, "logarithmic")
    assert relation.v0_ml == pytest.approx(np.exp(300.0 / 110.0))
    assert relation.reading(LOG[3]).slope == pytest.approx(110.0 / VOLUME_ML[3])
    with pytest.raises(ValueError, match="does not rise"):
        relation_through(VOLUME_ML, -LOG, "logarithmic").reading(0.0)


@pytest.mark.parametrize("form", ["quadratic", "logarithmic"])
@pytest.mark.parametrize("pressure_mmhg", [0.0, 60.0])
def test_intervals_are_those_of_the_delta_method_done_by_small_steps(form, pressure_mmhg):
    relation = relation_through(VOLUME_ML, KASS + JITTER, form)
    found = relation.reading(pressure_mmhg)
    gradients = []
    for place, coefficient in enumerate(relation.curve.coefficients):
        step = 1e-5 * abs(coefficient)
        values = []
        for sign in (1.0, -1.0):
            moved = relation.curve.coefficients.copy()
            moved[place] += sign * step
            one = replace(relation, curve=replace(relation.curve, coefficients=moved)).reading(pressure_mmhg)
            values.append((one.slope, np.log(one.axis_intercept) if form == "logarithmic" else one.axis_intercept))
        gradients.append((np.array(values[0]) - np.array(values[1])) / (2.0 * step))
    by_slope, by_intercept = np.array(gradients).T
    assert found.slope_high - found.slope == pytest.approx(relation.curve.half_width(by_slope), rel=1e-4)
    half = relation.curve.half_width(by_intercept)
    up = np.log(found.intercept_high / found.axis_intercept) if form == "logarithmic" else found.intercept_high - found.axis_intercept
    assert up == pytest.approx(half, rel=1e-4)


def test_iterated_points_lie_on_the_curve_they_find():
    found = quadratic(points(VOLUME_ML, KASS))
    assert found.v0_ml == pytest.approx(10.0, abs=0.01)
    np.testing.assert_allclose(found.volume_ml, VOLUME_ML)


def test_cards_read_the_slope_at_a_stated_pressure_and_the_axis_only_near_it():
    volume_ml = np.linspace(75.0, 12.0, 12)
    stage = StageBeats(preload=(points(volume_ml, -0.01 * (volume_ml - 10.0) ** 2 + 2.5 * (volume_ml - 10.0)),))
    assert QUADRATIC_ELASTANCE.compute(stage).value == pytest.approx(np.sqrt(2.5**2 - 0.04 * 100.0), rel=1e-3)
    assert QUADRATIC_INTERCEPT.compute(stage).value == pytest.approx(10.0, abs=0.01)
    right = StageBeats(preload=stage.preload, chamber="RV")
    assert QUADRATIC_ELASTANCE.compute(right).value == pytest.approx(np.sqrt(2.5**2 - 0.04 * 30.0), rel=1e-3)


def test_curves_are_withheld_beyond_the_beats():
    low = StageBeats(preload=(points(VOLUME_ML, 0.5 * KASS),))
    with pytest.raises(Withheld, match="do not reach 100"):
        QUADRATIC_ELASTANCE.compute(low)
    high = StageBeats(preload=(points(VOLUME_ML + 40.0, KASS + 60.0),))
    with pytest.raises(Withheld, match="a parabola is not followed that far"):
        QUADRATIC_INTERCEPT.compute(high)


def test_a_logarithm_is_followed_to_the_axis():
    stage = StageBeats(preload=(points(VOLUME_ML, LOG),))
    assert LOGARITHMIC_ELASTANCE.compute(stage).value == pytest.approx(110.0 / np.exp(400.0 / 110.0), rel=1e-3)
    found = LOGARITHMIC_INTERCEPT.compute(stage)
    assert found.value == pytest.approx(np.exp(300.0 / 110.0), rel=1e-3)
    assert found.fit_low <= found.value <= found.fit_high


@pytest.mark.parametrize("card", [QUADRATIC_ELASTANCE, LOGARITHMIC_ELASTANCE, LOGARITHMIC_INTERCEPT], ids=lambda card: card.estimator)
def test_a_curve_has_no_say_where_a_line_is_better(card):
    few = np.linspace(60.0, 40.0, 7)
    jitter = np.array([0.4, -0.5, 0.3, 0.2, -0.4, 0.3, -0.3])
    stage = StageBeats(preload=(points(few, 2.5 * (few - 10.0) + jitter),))
    with pytest.raises(Withheld, match="a straight line describes the end-systolic points better"):
        card.compute(stage)


def test_v0_of_a_line_through_bent_points_says_so_and_is_published():
    straight, bent = points(VOLUME_ML, 2.5 * (VOLUME_ML - 10.0) + JITTER, "even"), points(VOLUME_ML, KASS + JITTER, "bent")
    assert VOLUME_INTERCEPT.compute(StageBeats(preload=(straight,))).notes == ()
    (note,) = (note for note in VOLUME_INTERCEPT.compute(StageBeats(preload=(straight, bent))).notes if "curved" in note)
    assert note.startswith("the end-systolic relation of run bent is curved (quadratic, AICc smaller by")
    assert note.endswith("means little")


def test_a_bend_too_small_to_matter_is_not_told():
    slight = 2.5 * (VOLUME_ML - 10.0) - 0.001 * (VOLUME_ML - 40.0) ** 2
    run = points(VOLUME_ML, slight)
    assert preferences(run)[0].gain > 4.0
    assert curvature_note(StageBeats(preload=(run,))) == ()


def test_a_run_without_a_line_has_no_preference():
    assert preferences(boxes([120.0] * 8)) == ()
    assert preferences(boxes(np.linspace(130.0, 110.0, 5))) == ()


@pytest.mark.parametrize("heart", ["normal", "failing", "right"])
def test_a_straight_heart_is_not_called_bent(heart):
    assert curvature_note(StageBeats(preload=(ramp_of(heart),))) == ()


def test_a_bent_heart_is():
    run = ramp_of("bent")
    (note,) = curvature_note(StageBeats(preload=(run,)))
    assert "quadratic" in note
    heart = heart_named("bent")
    a, b = heart.espvr_bend_mmhg_per_ml2, heart.ees_mmhg_per_ml
    expected = np.sqrt(b**2 + 4.0 * a * 100.0)
    assert QUADRATIC_ELASTANCE.compute(StageBeats(preload=(run,))).value == pytest.approx(expected, rel=0.03)


@pytest.mark.parametrize(
    "card", [LOGARITHMIC_ELASTANCE, LOGARITHMIC_INTERCEPT, QUADRATIC_INTERCEPT], ids=lambda card: f"{card.name}-{card.estimator}"
)
@pytest.mark.parametrize("error", ["pressure_gain", "pressure_mmhg", "volume_gain", "volume_ml"])
def test_a_small_error_of_the_points_moves_a_curve_by_what_its_card_says(card, error):
    volume_ml = np.linspace(75.0, 12.0, 12)
    is_log = card is not QUADRATIC_INTERCEPT
    pressure_mmhg = LOG if is_log else -0.01 * (volume_ml - 10.0) ** 2 + 2.5 * (volume_ml - 10.0)
    volume_ml = VOLUME_ML if is_log else volume_ml
    size = 0.01
    gains = [1.0 + size if name == error else 1.0 for name in ("pressure_gain", "volume_gain")]
    offsets = [size if name == error else 0.0 for name in ("pressure_mmhg", "volume_ml")]
    was = StageBeats(preload=(points(volume_ml, pressure_mmhg),))
    moved = StageBeats(preload=(points(gains[1] * volume_ml + offsets[1], gains[0] * pressure_mmhg + offsets[0]),))
    value = card.compute(was).value
    told = size * getattr(card.sensitivity(was, value), error)
    assert card.compute(moved).value - value == pytest.approx(told, rel=0.1, abs=3e-4 * value)
