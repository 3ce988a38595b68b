"""Beats found: a run without at least three whole beats carries no steady state and no slope."""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING
from checks.subject import RunSubject


def beat_count(subject: RunSubject) -> Measured:
    """Return the number of whole beats, shape ()."""
    return single(len(subject.known_beats()))


CHECK = Check(
    name="beats-found",
    title="Beats were found",
    level=Level.RUN,
    measure=beat_count,
    unit="1",
    limits=Limits(fail_below=3.0, basis="house default"),
    reason="only {value:.0f} whole beats were found (limit {limit:.0f})",
    remedy="check that the pressure channel holds ventricular pressure and the run is long enough",
    spoils=EVERYTHING,
)
