"""Volume calibration: a raw volume needs its gain alpha and its parallel volume to become mL.

Baan 1984, Circulation 70:812 (read in abstract). A channel sent as calibrated is taken as it is; two facts, two checks, because an
unknown offset spoils far less than an unknown gain.
"""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import AcquisitionSubject


def is_gain_unknown(subject: AcquisitionSubject) -> Measured:
    """Return 1 when a run has raw volume without alpha, else 0; shape ()."""
    return single(any(not run.facts.volume.calibrated and run.facts.volume.alpha is None for run in subject.runs))


def is_offset_unknown(subject: AcquisitionSubject) -> Measured:
    """Return 1 when a run has raw volume without alpha_vc_ml, else 0; shape ()."""
    return single(any(not run.facts.volume.calibrated and run.facts.volume.alpha_vc_ml is None for run in subject.runs))


GAIN_KNOWN = Check(
    name="volume-gain-known",
    title="Volume gain is known",
    level=Level.ACQUISITION,
    measure=is_gain_unknown,
    unit="1",
    limits=Limits(fail_above=0.5, basis="a fact; Baan 1984"),
    reason="raw volume was sent without its gain alpha",
    remedy="send calibration.volume.alpha and how it was found",
    spoils=VOLUME_GAIN,
    is_fact=True,
)
OFFSET_KNOWN = Check(
    name="volume-offset-known",
    title="Parallel volume is known",
    level=Level.ACQUISITION,
    measure=is_offset_unknown,
    unit="1",
    limits=Limits(fail_above=0.5, basis="a fact; Baan 1984"),
    reason="raw volume was sent without its parallel volume alpha_vc_ml",
    remedy="send calibration.volume.alpha_vc_ml, the saline intercept on raw volume",
    spoils=VOLUME_OFFSET,
    is_fact=True,
)
