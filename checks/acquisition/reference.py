"""Reference volumes: what another method measured beside the accepted steady beats.

A wrong gain multiplies EDV, ESV and SV by one factor, a wrong parallel volume moves EDV and ESV by one shift. Both are fitted to the gaps
between beats and reference, weighted by what the reference does not know and by the beats' own standard error, and count once one of them
explains more than 2.6 standard uncertainties (1 in 100 by chance). Factor alone, shift alone, or both are then tried: what cannot be told
apart within 2 standard uncertainties is named together. Saline runs help to tell them apart where the volumes alone allow either.

What the reference does not know: its ``sv_sd_ml``; without it 6.5 % of SV, as CMR against Fick (limits of agreement -10.4 to 8.7 mL, read).
A volume is known by that over the square root of 2 (errors of EDV and ESV make up that of SV), but never better than to 3 % (repeated CMR,
Grothues 2002, Am J Cardiol 90:29, from memory). With 140 and 65 mL and an SD of 4 mL a factor of 6-7 % and a shift of 6 mL can be told; a
stroke volume alone tells a factor of 14 %. Smaller errors the evidence does not exclude. Where regurgitation or a shunt parts forward from
total stroke volume, a flow method says nothing about the ventricle's.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from checks.acquisition.saline_agreement import saline_shift_ml
from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import REGURGITATION, AcquisitionSubject
from metrics.arrays import FloatArray
from metrics.signals.facts import ReferenceVolumes

FLOW_METHODS = frozenset({"thermodilution", "Fick", "flow-probe"})
STROKE_SHARE = 0.065
LEAST_SHARE = 0.03
OWN_SHARE = 0.02
"""A stroke volume nearer than this to EDV - ESV was made of them and tells nothing new; house default."""

TOLD = 2.6
TOLD_APART = 2.0
MEDIAN_SE = 1.2533
"""Standard error of a median over that of a mean, for a normal sample (square root of half pi)."""

WIDE = float(stats.norm.ppf(0.975))
FACTOR, SHIFT, BOTH = [0], [1], [0, 1]


@dataclass(frozen=True, slots=True)
class Gaps:
    """What was seen minus what was told, in standard uncertainties, and what a factor of 1 more and a shift of 1 mL add to it.

    ``told`` has shape (n,), ``by`` (n, 2).
    """

    told: FloatArray
    by: FloatArray

    def fit(self, which: list[int]) -> tuple[FloatArray, float]:
        """Return the fitted excess of the factor and shift, 0 for one left out, and the squared gaps that remain."""
        found = np.zeros(2)
        found[which] = np.linalg.lstsq(self.by[:, which], self.told, rcond=None)[0]
        return found, float(np.sum((self.told - self.by @ found) ** 2))

    def and_also(self, gap: float, factor: float, shift: float, sd: float) -> Gaps:
        """Return these gaps with one more, in its own unit."""
        return Gaps(np.append(self.told, gap / sd), np.vstack([self.by, [factor / sd, shift / sd]]))


def stroke_ml(reference: ReferenceVolumes) -> float | None:
    """Return the reference's stroke volume, its own or that of its two volumes; None without either."""
    if reference.sv_ml is None and reference.edv_ml is not None and reference.esv_ml is not None:
        return reference.edv_ml - reference.esv_ml
    return reference.sv_ml


def flow_is_forward_only(subject: AcquisitionSubject) -> bool:
    """Return whether the reference measured a flow that is not all that the ventricle ejects."""
    reference = subject.facts.reference
    return reference is not None and reference.source in FLOW_METHODS and bool(subject.facts.conditions & REGURGITATION)


def gaps(subject: AcquisitionSubject) -> Gaps | None:
    """Return how the beats at rest depart from the reference; None without beats, or without two volumes or a stroke volume."""
    reference = subject.facts.reference
    expected_ml = None if reference is None else stroke_ml(reference)
    if reference is None or expected_ml is None or not expected_ml > 0.0:
        return None
    if flow_is_forward_only(subject):
        return None
    seen = {name: values[np.isfinite(values)] for name, values in subject.steady_beats().items()}
    if not all(values.size for values in seen.values()):
        return None
    stroke_sd_ml = STROKE_SHARE * expected_ml if reference.sv_sd_ml is None else reference.sv_sd_ml
    found = Gaps(np.empty(0), np.empty((0, 2)))
    volumes = (("edv_ml", reference.edv_ml), ("esv_ml", reference.esv_ml)) if None not in (reference.edv_ml, reference.esv_ml) else ()
    for name, told_ml in volumes:
        if told_ml is not None:
            sd_ml = float(np.hypot(max(stroke_sd_ml / np.sqrt(2.0), LEAST_SHARE * abs(told_ml)), _error(seen[name])))
            found = found.and_also(float(np.median(seen[name])) - told_ml, told_ml, 1.0, sd_ml)
    apart_ml = np.inf if reference.edv_ml is None or reference.esv_ml is None else abs(expected_ml - reference.edv_ml + reference.esv_ml)
    if apart_ml > OWN_SHARE * expected_ml:
        sd_ml = float(np.hypot(max(stroke_sd_ml, LEAST_SHARE * expected_ml), _error(seen["sv_ml"])))
        found = found.and_also(float(np.median(seen["sv_ml"])) - expected_ml, expected_ml, 0.0, sd_ml)
    return found


def _error(values: FloatArray) -> float:
    """Return the standard error of the median."""
    return MEDIAN_SE * float(np.std(values, ddof=1)) / float(np.sqrt(values.size)) if values.size > 1 else 0.0


def factor_and_shift(found: Gaps, saline: tuple[float, float] | None) -> tuple[float, float]:
    """Return the excess of the factor and the shift in mL that the gaps tell of, 0 for what they do not.

    ``saline`` is the shift the saline runs show and the half width of its 95 % interval.

    >>> two = Gaps(np.empty(0), np.empty((0, 2))).and_also(14.0, 140.0, 1.0, 2.8).and_also(6.5, 65.0, 1.0, 2.8)
    >>> [round(one, 3) for one in factor_and_shift(two, (0.0, 4.0))]
    [0.1, 0.0]
    >>> [round(one, 2) for one in factor_and_shift(two, None)]
    [0.1, 10.25]
    """
    nothing = float(np.sum(found.told**2))
    gained = nothing - min(found.fit(which)[1] for which in (FACTOR, SHIFT))
    gained_jointly = nothing - found.fit(BOTH)[1]
    if not (gained > TOLD**2 or gained_jointly > float(stats.chi2.ppf(0.99, 2))):
        return 0.0, 0.0
    witnessed = found if saline is None else found.and_also(saline[0], 0.0, 1.0, max(saline[1], 1e-9) / WIDE)
    alone = [which for which in (FACTOR, SHIFT) if explains(found, which)]
    left = [which for which in alone if explains(witnessed, which)] or alone or [BOTH]
    factor, shift = (max((float(found.fit(which)[0][place]) for which in left), key=abs) for place in (0, 1))
    return factor, shift


def explains(found: Gaps, which: list[int]) -> bool:
    """Return whether a factor or a shift alone explains the gaps as well as both do, within two standard uncertainties."""
    return found.fit(which)[1] - found.fit(BOTH)[1] <= TOLD_APART**2


def stroke_volume_gap(subject: AcquisitionSubject) -> Measured:
    """Return the factor volumes are too large or small by, less 1 and without sign, shape (); 0 where none is told, NaN without both."""
    found = gaps(subject)
    return single(np.nan if found is None else abs(factor_and_shift(found, saline_shift_ml(subject))[0]))


def volume_gap(subject: AcquisitionSubject) -> Measured:
    """Return the shift of volumes over the reference's EDV, without sign, shape (); 0 where none is told, NaN without two volumes."""
    found, reference = gaps(subject), subject.facts.reference
    if found is None or reference is None or reference.edv_ml is None or reference.esv_ml is None:
        return single(np.nan)
    return single(abs(factor_and_shift(found, saline_shift_ml(subject))[1]) / reference.edv_ml)


BASIS = "house default: beyond 2.6 standard uncertainties, 5 % is what matters"
STROKE_VOLUME = Check(
    name="reference-stroke-volume",
    title="Volume gain against the reference",
    level=Level.ACQUISITION,
    measure=stroke_volume_gap,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.05, basis=BASIS),
    reason="volumes differ from the reference by a factor of {value:.0%}, more than its uncertainty explains (limit {limit:.0%})",
    remedy="confirm alpha and the reference volumes, measured in the same state",
    spoils=VOLUME_GAIN,
    revision=2,
)
VOLUMES = Check(
    name="reference-volumes",
    title="Volume offset against the reference",
    level=Level.ACQUISITION,
    measure=volume_gap,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.05, basis=BASIS),
    reason="volumes are shifted against the reference by {value:.0%} of its end-diastolic volume (limit {limit:.0%})",
    remedy="repeat the parallel-volume (saline) calibration or confirm the reference volumes",
    spoils=VOLUME_OFFSET,
    revision=2,
)
