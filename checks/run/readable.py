"""Readable: the run's file could be read and holds what its kind of run needs."""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.run.time_base import backward_steps
from checks.spoils import EVERYTHING
from checks.subject import RunSubject


def is_unreadable(subject: RunSubject) -> Measured:
    """Return 1 for a run without signals for another reason than its time base, else 0; shape ().

    A saline run has no pressure and is never cut into beats: there it is enough that its file was read.
    """
    if subject.facts.kind == "saline":
        return single(subject.recording is None)
    return single(subject.signals is None and not backward_steps(subject) > 0.0)


CHECK = Check(
    name="readable",
    title="The run can be read",
    level=Level.RUN,
    measure=is_unreadable,
    unit="1",
    limits=Limits(fail_above=0.5, basis="a fact"),
    reason="the run cannot be used: {trouble}",
    remedy="correct the file or its entry in acquisition.json and send the package again",
    spoils=EVERYTHING,
    run_kinds=("steady", "preload-reduction", "saline"),
    is_fact=True,
)
