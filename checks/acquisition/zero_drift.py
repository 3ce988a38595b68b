"""Zero drift: how far the pressure zero moved between its first and last reading.

Drift up to 2 mmHg is taken out silently, up to 5 mmHg taken out and flagged; beyond that a straight line between two readings is no
longer to be trusted, and what an offset reaches is withheld. Customary drift of tip sensors is about 1 mmHg an hour (from memory).
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_OFFSET
from checks.subject import AcquisitionSubject
from metrics.signals.calibrate import two_point_line
from metrics.signals.facts import PressureCalibration


def drift_mmhg(calibration: PressureCalibration) -> float:
    """Return how far apart the zero readings between two re-zeros lie once through the two-point line, in mmHg.

    NaN with fewer than two. What a re-zero takes away is no drift; readings without a clock are compared as a whole.

    >>> from metrics.signals.facts import ZeroReading
    >>> drift_mmhg(PressureCalibration(zeros=(ZeroReading(0.5, 0.0), ZeroReading(3.5, 3600.0))))
    3.0
    """
    readings = np.array([zero.mmhg for zero in calibration.zeros])
    at_s = np.array([zero.at_s for zero in calibration.zeros], dtype=np.float64)
    piece = np.zeros(readings.size, dtype=np.int64)
    if np.isfinite(at_s).all():
        piece = np.searchsorted(np.sort(np.array(calibration.re_zeros_s, dtype=np.float64)), at_s, side="right")
    spans = [float(np.ptp(readings[piece == one])) for one in np.unique(piece) if np.sum(piece == one) >= 2]
    k, _ = two_point_line(calibration.points)
    return max(spans) / abs(k) if spans else float("nan")


def zero_drift(subject: AcquisitionSubject) -> Measured:
    """Return the largest drift any run is calibrated with, mmHg, shape (); its sign is ignored."""
    drifts = [drift_mmhg(calibration) for calibration in subject.pressure_calibrations()]
    known = [drift for drift in drifts if np.isfinite(drift)]
    return single(max(known) if known else np.nan)


CHECK = Check(
    name="zero-drift",
    title="Pressure zero drift",
    level=Level.ACQUISITION,
    measure=zero_drift,
    unit="mm[Hg]",
    limits=Limits(suspect_above=2.0, fail_above=5.0, basis="house default; customary drift is about 1 mmHg an hour (from memory)"),
    reason="the pressure zero moved by {value:.1f} mmHg between its readings (limit {limit:g} mmHg)",
    remedy="check the transducer, send all zero readings and say when it was re-zeroed",
    spoils=PRESSURE_OFFSET,
    corrected=True,
)
