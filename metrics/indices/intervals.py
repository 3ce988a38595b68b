"""The interval of an index: its fit and its calibration, joined in quadrature.

Uncertainty budget of first order, derived: calibration errors are common to all beats, so they join the fit's own half width last and
do not shrink with more beats.
"""

from __future__ import annotations

import numpy as np

from metrics.indices.card import Estimate, Sensitivity
from metrics.signals.uncertainty import CalibrationUncertainty

NORMAL_95 = 1.959964
"""The 97.5 % point of the normal distribution: a calibration's standard uncertainty is quoted, not estimated from these beats."""

Interval = tuple[float | None, float | None]


def calibrated_interval(estimate: Estimate, sensitivity: Sensitivity, doubt: CalibrationUncertainty) -> Interval:
    """Return the 95 % interval of fit and calibration together; (None, None) where either cannot be told.

    Nothing is told where the calibration moves the value and the manifest declares no uncertainty of it: too narrow an interval is
    worse than none.

    >>> one = Estimate(2.5, 2.3, 2.7, 10)
    >>> calibrated_interval(one, Sensitivity(volume_gain=-2.5), CalibrationUncertainty())
    (None, None)
    >>> low, high = calibrated_interval(one, Sensitivity(volume_gain=-2.5), CalibrationUncertainty(volume_gain=0.08))
    >>> round(low, 3), round(high, 3)
    (2.06, 2.94)
    """
    half = calibration_half(sensitivity, doubt)
    if half is None or estimate.fit_low is None or estimate.fit_high is None:
        return None, None
    low = estimate.value - float(np.hypot(estimate.value - estimate.fit_low, half))
    high = estimate.value + float(np.hypot(estimate.fit_high - estimate.value, half))
    return (low, high) if np.isfinite(low) and np.isfinite(high) else (None, None)


def calibration_half(sensitivity: Sensitivity, doubt: CalibrationUncertainty) -> float | None:
    """Return half the 95 % interval that the calibration alone gives a value; None where a term that moves it is not declared."""
    pairs = (
        (sensitivity.pressure_gain, doubt.pressure_gain),
        (sensitivity.pressure_mmhg, doubt.pressure_mmhg),
        (sensitivity.volume_gain, doubt.volume_gain),
        (sensitivity.volume_ml, doubt.volume_ml),
    )
    terms = []
    for by, uncertainty in pairs:
        if by == 0.0:
            continue
        if uncertainty is None:
            return None
        terms.append(by * uncertainty)
    return NORMAL_95 * float(np.sqrt(np.sum(np.square(terms))))
