"""Reference volumes: what another method measured beside the accepted steady beats.

A stroke volume that disagrees points at the gain, one that agrees beside a wrong end-diastolic volume at the parallel volume. Limits of
agreement of CMR stroke volume against Fick are about 13 % (read), so twice the reference's own SD is taken out first. Where
regurgitation or a shunt parts forward from total stroke volume, a flow method says nothing about the ventricle's.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import REGURGITATION, AcquisitionSubject

FLOW_METHODS = frozenset({"thermodilution", "Fick", "flow-probe"})


def stroke_volume_gap(subject: AcquisitionSubject) -> Measured:
    """Return |SV - reference| beyond twice the reference's SD, over the reference, shape (); NaN without either."""
    reference = subject.facts.reference
    if reference is None:
        return single(np.nan)
    if reference.source in FLOW_METHODS and subject.facts.conditions & REGURGITATION:
        return single(np.nan)
    expected_ml = reference.sv_ml
    if expected_ml is None and reference.edv_ml is not None and reference.esv_ml is not None:
        expected_ml = reference.edv_ml - reference.esv_ml
    if expected_ml is None:
        return single(np.nan)
    gap_ml = abs(subject.steady_medians()["sv_ml"] - expected_ml)
    return single(max(gap_ml - 2.0 * (reference.sv_sd_ml or 0.0), 0.0) / expected_ml if np.isfinite(gap_ml) else np.nan)


def volume_gap(subject: AcquisitionSubject) -> Measured:
    """Return the common shift of EDV and ESV against the reference over its EDV, shape (); NaN without both.

    A shift is what remains of the EDV gap once the gain the two stroke volumes show is taken out, so a wrong gain alone does not fire.
    """
    reference = subject.facts.reference
    if reference is None or reference.edv_ml is None or reference.esv_ml is None or reference.edv_ml <= reference.esv_ml:
        return single(np.nan)
    found = subject.steady_medians()
    gain = found["sv_ml"] / (reference.edv_ml - reference.esv_ml)
    shift_ml = 0.5 * (found["edv_ml"] + found["esv_ml"] - gain * (reference.edv_ml + reference.esv_ml))
    return single(abs(shift_ml) / reference.edv_ml)


STROKE_VOLUME = Check(
    name="reference-stroke-volume",
    title="Stroke volume against the reference",
    level=Level.ACQUISITION,
    measure=stroke_volume_gap,
    unit="1",
    limits=Limits(
        suspect_above=0.05, fail_above=0.10, basis="house default beyond 2 SD of the reference; agreement of CMR and Fick (read)"
    ),
    reason="stroke volume differs from the reference by {value:.0%} more than the reference's own uncertainty explains (limit {limit:.0%})",
    remedy="confirm alpha and the reference stroke volume, measured in the same state",
    spoils=VOLUME_GAIN,
)
VOLUMES = Check(
    name="reference-volumes",
    title="Volume offset against the reference",
    level=Level.ACQUISITION,
    measure=volume_gap,
    unit="1",
    limits=Limits(suspect_above=0.08, fail_above=0.12, basis="house default; mean parallel-volume error 7 % (Baan 1984, read in abstract)"),
    reason="volumes are shifted against the reference by {value:.0%} of its end-diastolic volume (limit {limit:.0%})",
    remedy="repeat the parallel-volume (saline) calibration or confirm the reference volumes",
    spoils=VOLUME_OFFSET,
)
