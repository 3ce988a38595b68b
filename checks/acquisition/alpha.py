"""Gain and parallel volume of a raw volume must be such as a conductance catheter can have.

Baan 1984, Circulation 70:812 (read in abstract) gives alpha 0.75 to 1.07; 0.4 to 1.2 is an engineering default, and far outside it an
entry is more likely a percentage or a reciprocal. The tissue around the blood conducts, so the saline intercept is positive (Herrera 1999,
Med Biol Eng Comput 37:169, read in abstract: 92.4 % of 138 manoeuvres gave a positive one, the others were discarded) and lies below
the smallest raw volume. The intercept of a fit to images, two points or a cuvette may be negative: there nothing is said of it.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import AcquisitionSubject

FITTED_METHODS = frozenset({"imaging", "two-point", "cuvette"})
"""Methods whose intercept is that of a fitted line, not a parallel conductance."""


def farthest_alpha(subject: AcquisitionSubject) -> Measured:
    """Return the alpha of any raw volume that lies farthest from 1 (as a ratio), shape (); NaN where none is used."""
    used = [run.facts.volume.alpha for run in subject.runs if not run.facts.volume.calibrated and run.facts.volume.alpha is not None]
    return single(max(used, key=lambda alpha: abs(float(np.log(alpha)))) if used else np.nan)


def parallel_share(subject: AcquisitionSubject) -> Measured:
    """Return alpha_vc_ml over the raw end-systolic volume at rest, the least likely of the runs', shape (); NaN where none is used."""
    esv_ml = subject.steady_medians()["esv_ml"]
    shares = []
    for run in subject.runs:
        volume = run.facts.volume
        if volume.calibrated or volume.alpha_vc_ml is None or run.facts.kind == "saline":
            continue
        raw_esv_ml = (1.0 if volume.alpha is None else volume.alpha) * esv_ml + volume.alpha_vc_ml
        share = volume.alpha_vc_ml / raw_esv_ml if raw_esv_ml > 0.0 else np.nan
        if np.isfinite(share) and not (share < 0.0 and volume.method in FITTED_METHODS):
            shares.append(share)
    return single(max(shares, key=lambda share: abs(share - 0.5)) if shares else np.nan)


PLAUSIBLE = Check(
    name="alpha-plausible",
    title="Volume gain is plausible",
    level=Level.ACQUISITION,
    measure=farthest_alpha,
    unit="1",
    limits=Limits(
        suspect_below=0.4,
        suspect_above=1.2,
        fail_below=0.2,
        fail_above=2.0,
        basis="house default 0.4-1.2 about the 0.75-1.07 of Baan 1984 (read in abstract)",
    ),
    reason="alpha is {value:.3g}, where a conductance catheter has one near 1 (limit {limit:g})",
    remedy="confirm alpha: a fraction, the raw stroke volume over the true one, not its reciprocal or a percentage",
    spoils=VOLUME_GAIN,
)
PARALLEL_PLAUSIBLE = Check(
    name="alpha-vc-plausible",
    title="Parallel volume is plausible",
    level=Level.ACQUISITION,
    measure=parallel_share,
    unit="1",
    limits=Limits(
        suspect_below=0.05, fail_below=0.0, fail_above=1.0, basis="physics; 92.4 % of intercepts are positive (Herrera 1999, read)"
    ),
    reason="alpha_vc_ml is {value:.0%} of the raw end-systolic volume, of which it must be a positive part (limit {limit:.0%})",
    remedy="confirm alpha_vc_ml and its sign: the saline intercept on raw volume in mL",
    spoils=VOLUME_OFFSET,
)
