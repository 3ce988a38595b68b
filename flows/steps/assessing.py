"""Assessing: a chunk of packages goes to the children, and each answer is kept as soon as it is there."""

from __future__ import annotations

import threading
from collections.abc import Callable, Sequence
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from flows.catalogue import evidence_files, store
from flows.catalogue.engine import writing
from flows.catalogue.outcome import Found, Outcome, Refused, Trouble

if TYPE_CHECKING:
    from flows.steps.opening import Night
    from flows.workers import Job

CHUNK = 20
"""Packages in one task of the orchestration: what is lost of its own time to each task is then below 1 % of the work."""

_writing = threading.Lock()


def chunks(jobs: Sequence[Job]) -> list[list[Job]]:
    """Return the jobs in chunks."""
    return [list(jobs[start : start + CHUNK]) for start in range(0, len(jobs), CHUNK)]


def assess_chunk(night: Night, jobs: Sequence[Job], done: Callable[[], None] = lambda: None) -> int:
    """Assess these packages and keep each outcome in one transaction of its own; return how many were found out.

    ``done`` is called after each package. Several threads may assess chunks at once: they wait for children and write in turn.
    """
    futures = [(job, night.workers.submit(job)) for job in jobs]
    found = 0
    for job, future in futures:
        outcome = night.workers.outcome(job, future)
        with _writing:
            found += isinstance(_keep(night, job, outcome), Found)
        done()
    return found


def _keep(night: Night, job: Job, outcome: Outcome) -> Outcome:
    """Keep the outcome and return what was kept: rows that do not fit the tables are the program's fault, and the package is put aside."""
    try:
        _write(night, job, outcome)
    except ValueError as misfit:
        outcome = Refused(Trouble.PROGRAM, f"the program could not assess this package: {misfit}")
        _write(night, job, outcome)
    night.assessed += 1
    night.tried.add((job.site, job.package_sha256))
    if isinstance(outcome, Refused) and outcome.trouble != Trouble.INPUT:
        night.problems.append(f"{job.site}/{job.package}: {outcome.reason}")
    return outcome


def _write(night: Night, job: Job, outcome: Outcome) -> None:
    evidence_sha256 = None
    if isinstance(outcome, Found):
        evidence_sha256 = evidence_files.keep(night.store, night.basis.key(job.site, job.package_sha256), outcome.evidence)
    with writing(night.engine) as session:
        store.put_assessment(
            session,
            job.site,
            job.package_sha256,
            night.basis,
            outcome,
            at=datetime.now(UTC),
            evidence_sha256=evidence_sha256,
        )
