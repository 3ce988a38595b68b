"""What the calibration adds to an interval: first-order sums anyone can redo."""

import numpy as np
import pytest

from metrics.indices import ALL
from metrics.indices.card import Estimate, Sensitivity, StageBeats
from metrics.indices.intervals import NORMAL_95, calibrated_interval, calibration_half
from metrics.signals.uncertainty import CalibrationUncertainty
from tests.metrics.made_beats import boxes

BY_NAME = {index.name: index for index in ALL if index.primary}
STAGE = StageBeats(steady=(boxes([130.0] * 7, run="rest"),), preload=(boxes(np.linspace(150.0, 110.0, 9)),), v0_ml=10.0)
"""The worked rectangle: Ees 2.5, V0 10, Ea 2, SV 66.67, ESP 133.33, SW 8888.9."""
DOUBT = CalibrationUncertainty(pressure_gain=0.01, pressure_mmhg=2.0, volume_gain=0.08, volume_ml=5.0)


def test_the_worked_budget_of_an_elastance():
    # Ees 2.5, slope SE 0.10, gain of volume 8 %, of pressure 1 %: u = sqrt(0.01 + 0.04 + 0.000625) = 0.225
    fit = Estimate(2.5, 2.5 - NORMAL_95 * 0.10, 2.5 + NORMAL_95 * 0.10, 10)
    low, high = calibrated_interval(fit, BY_NAME["Ees"].sensitivity(StageBeats(), 2.5), DOUBT)
    assert (high - low) / 2.0 / NORMAL_95 == pytest.approx(0.225)
    assert (high + low) / 2.0 == pytest.approx(2.5)


@pytest.mark.parametrize(
    ("name", "budget"),
    [
        ("Ees", np.hypot(2.5 * 0.08, 2.5 * 0.01)),
        ("V0", np.sqrt((2.0 / 2.5) ** 2 + 5.0**2 + (10.0 * 0.08) ** 2)),
        ("Ea", np.sqrt((2.0 * 3.0 / 200.0) ** 2 + (2.0 * 0.08) ** 2 + (2.0 * 0.01) ** 2)),
        ("Ees_Ea", 1.25 * 2.0 * 3.0 / 400.0),
        ("SW", 8888.888889 * np.hypot(0.08, 0.01)),
        ("PRSW", 0.01),
        ("EDP", 2.0),
        ("dPdt_max", 1333.333333 * 0.01),
        ("EF", 0.512820513 * 5.0 / 130.0),
        ("EDV", np.hypot(130.0 * 0.08, 5.0)),
        ("SV", 66.6666667 * 0.08),
        ("HR", 0.0),
    ],
)
def test_the_budget_of_each_index(name, budget):
    index = BY_NAME[name]
    value = 1.0 if name == "PRSW" else index.compute(STAGE).value
    assert calibration_half(index.sensitivity(STAGE, value), DOUBT) == pytest.approx(NORMAL_95 * budget, rel=1e-6)


def test_gains_common_to_both_cancel_in_the_coupling_ratio():
    ratio = BY_NAME["Ees_Ea"].sensitivity(STAGE, 1.25)
    assert (ratio.pressure_gain, ratio.volume_gain, ratio.volume_ml) == (0.0, 0.0, 0.0)
    alone = [calibration_half(BY_NAME[name].sensitivity(STAGE, value), DOUBT) / value for name, value in (("Ees", 2.5), ("Ea", 2.0))]
    assert calibration_half(ratio, DOUBT) / 1.25 < 0.2 * np.hypot(*alone)


def test_each_side_joins_its_own_half():
    fit = Estimate(10.0, 7.0, 14.0, 10)
    low, high = calibrated_interval(fit, Sensitivity(volume_ml=1.0), CalibrationUncertainty(volume_ml=4.0 / NORMAL_95))
    assert (low, high) == pytest.approx((10.0 - 5.0, 10.0 + np.hypot(4.0, 4.0)))


def test_what_moves_nothing_needs_no_declaration():
    fit = Estimate(10.0, 9.0, 11.0, 10)
    assert calibrated_interval(fit, Sensitivity(pressure_mmhg=1.0), CalibrationUncertainty(pressure_mmhg=0.0)) == (9.0, 11.0)
    assert calibrated_interval(fit, Sensitivity(), CalibrationUncertainty()) == (9.0, 11.0)
    assert calibrated_interval(fit, Sensitivity(pressure_mmhg=1e-9), CalibrationUncertainty(volume_ml=1.0)) == (None, None)


@pytest.mark.parametrize("bounds", [(None, None), (None, 3.0), (-np.inf, 3.0), (-np.inf, np.inf)])
def test_a_fit_without_an_interval_has_no_interval_together_either(bounds):
    assert calibrated_interval(Estimate(2.0, *bounds, 10), Sensitivity(), CalibrationUncertainty()) == (None, None)


def test_the_interval_holds_the_truth_when_the_calibration_errs_as_declared():
    draw = np.random.default_rng(31)
    doubt, sensitivity = CalibrationUncertainty(0.01, 0.5, 0.06, 4.0), BY_NAME["Ees"].sensitivity
    held = []
    for _ in range(2000):
        value = 2.5 * (1.0 + 0.01 * draw.standard_normal()) / (1.0 + 0.06 * draw.standard_normal()) + 0.08 * draw.standard_normal()
        fit = Estimate(value, value - NORMAL_95 * 0.08, value + NORMAL_95 * 0.08, 12)
        low, high = calibrated_interval(fit, sensitivity(StageBeats(), value), doubt)
        held.append((low <= 2.5 <= high, fit.fit_low <= 2.5 <= fit.fit_high))
    together, alone = 100.0 * np.mean(held, axis=0)
    assert 93.0 < together < 97.0
    assert alone < 70.0
