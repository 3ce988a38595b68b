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
from checks.subject import AcquisitionSubject, RunSubject
from metrics.signals.saline import SalineIntercept, saline_intercept_of


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


def saline_gap(subject: AcquisitionSubject) -> Measured:
    """Return how far the declared offset lies beyond the runs' uncertainty, over end-diastolic volume, shape (); NaN without both."""
    edv_ml = subject.steady_medians()["edv_ml"]
    found: list[SalineIntercept] = []
    gaps_ml, alphas = [], []
    for run in subject.runs:
        intercept = _intercept(run)
        if intercept is not None and run.facts.volume.alpha_vc_ml is not None:
            found.append(intercept)
            gaps_ml.append(intercept.ml - run.facts.volume.alpha_vc_ml)
            alphas.append(1.0 if run.facts.volume.alpha is None else run.facts.volume.alpha)
    if not found or not edv_ml > 0.0:
        return single(np.nan)
    beyond_ml = max(abs(float(np.mean(gaps_ml))) - uncertainty_ml(found), 0.0)
    return single(beyond_ml / float(np.mean(alphas)) / edv_ml)


def _intercept(run: RunSubject) -> SalineIntercept | None:
    """Return what a saline run shows, None for other runs and for one that shows nothing."""
    if run.facts.kind != "saline" or run.recording is None:
        return None
    try:
        return saline_intercept_of(run.recording, run.facts)
    except ValueError:
        return None


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
