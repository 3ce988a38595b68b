"""Required runs: what the protocol demands of this visit and the package does not hold."""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.subject import AcquisitionSubject


def missing_runs(subject: AcquisitionSubject) -> Measured:
    """Return how many required kinds of run or stages are missing, shape ()."""
    return single(len(subject.facts.missing_required))


CHECK = Check(
    name="required-runs",
    title="Runs the protocol demands",
    level=Level.ACQUISITION,
    measure=missing_runs,
    unit="1",
    limits=Limits(fail_above=0.0, basis="the study protocol"),
    reason="the package lacks {value:.0f} of the runs or stages the protocol demands of this visit",
    remedy="send the missing runs in a corrected package, or say why they were not recorded",
    is_fact=True,
)
