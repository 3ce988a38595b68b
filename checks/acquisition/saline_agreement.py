"""Saline agreement: the parallel volume that was declared, against the one the sent saline runs show.

The runs' mean intercept is known as well as their own regressions, and their agreement with each other, allow; that much is taken out of
the difference before it is held against end-diastolic volume. The mean error of parallel volumes is 7 % (Baan 1984, Circulation 70:812,
read in abstract), but declared and found here come from the same injections.
"""

from __future__ import annotations

import numpy as np
from scipy import stats

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_OFFSET
from checks.subject import AcquisitionSubject
from metrics.signals.saline import SalineIntercept


def uncertainty_ml(found: list[SalineIntercept]) -> float:
    """Return the half width of the 95 % interval of the mean intercept, raw mL, and half of what parts the two regressions.

    The standard error is the larger of what the regressions say and what the runs' scatter says.

    >>> one = SalineIntercept(60.0, 61.0, 59.0, 2.0, 0.6, 0.98, 12)
    >>> round(uncertainty_ml([one]), 3)
    5.456
    """
    number = len(found)
    freedom = sum(one.beats - 2 for one in found)
    within = float(np.sqrt(sum(one.se_ml**2 for one in found))) / number
    between = float(np.std([one.ml for one in found], ddof=1)) / np.sqrt(number) if number > 1 else 0.0
    apart = 0.5 * float(np.mean([one.spread_ml for one in found]))
    return float(stats.t.ppf(0.975, freedom)) * max(within, between) + apart


def saline_shift_ml(subject: AcquisitionSubject) -> tuple[float, float] | None:
    """Return how much too large volumes are by the saline runs, and the half width of that, mL; None where nothing shows it."""
    shown = [(run.saline_intercept, run.facts.volume) for run in subject.runs]
    both = [(found, volume, volume.alpha_vc_ml) for found, volume in shown if found is not None and volume.alpha_vc_ml is not None]
    if not both:
        return None
    alpha = float(np.mean([1.0 if volume.alpha is None else volume.alpha for _, volume, _ in both]))
    gap_ml = float(np.mean([found.ml - declared_ml for found, _, declared_ml in both]))
    return gap_ml / alpha, uncertainty_ml([found for found, _, _ in both]) / alpha


def saline_gap(subject: AcquisitionSubject) -> Measured:
    """Return how far the declared offset lies beyond the runs' uncertainty, over end-diastolic volume, shape (); NaN without both."""
    edv_ml = subject.steady_medians()["edv_ml"]
    shift = saline_shift_ml(subject)
    if shift is None or not edv_ml > 0.0:
        return single(np.nan)
    return single(max(abs(shift[0]) - shift[1], 0.0) / edv_ml)


CHECK = Check(
    name="saline-agreement",
    title="Parallel volume against the saline runs",
    level=Level.ACQUISITION,
    measure=saline_gap,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.05, basis="house default beyond the runs' own uncertainty: 5 % of EDV is what matters"),
    reason="the saline runs put the volume offset {value:.0%} of end-diastolic volume away from alpha_vc_ml (limit {limit:.0%})",
    remedy="confirm alpha_vc_ml against the saline runs, or repeat the injections",
    spoils=VOLUME_OFFSET,
)
