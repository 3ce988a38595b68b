"""The night: take in what sites uploaded, assess what is new, publish one release. Interrupted anywhere, the next one ends the same.

`run_night` runs it under the orchestration, which shows and records how it went; `run_night_plain` is the same steps without it. What was
done stands in the study's own catalogue in either case, and nothing depends on what the orchestration remembers.
"""

from __future__ import annotations

import sys
import time
from dataclasses import replace
from pathlib import Path

from flows.prefect_settings import settle
from flows.steps.assessing import assess_chunk, chunks
from flows.steps.opening import Options, already_running, is_held, open_night
from flows.steps.publishing import NightResult, publish_night
from flows.steps.receiving import pending, receive
from flows.study.protocol import read_protocol

_SECONDS_BETWEEN_LINES = 5.0


def run_night(study: Path, options: Options | None = None) -> NightResult:
    """Run a night over the study folder ``study`` under the orchestration and return what it came to.

    Where the orchestration does not start, the night runs without it and says so among the problems. Raises InputError for a study that
    cannot be used or that another night holds, GateRefused when the tables break a promise, and OSError when the disk fails.
    """
    options = options or Options()
    study = study.absolute()
    read_protocol(study)
    if is_held(study / "store"):
        raise already_running(study / "store")  # said at once: the orchestration takes its time to start
    settle(study / "store")
    from flows.nightly_flow import EngineFailed, run_flow  # noqa: PLC0415  (3 s, and the settings must come first)

    try:
        return run_flow(study, options)
    except EngineFailed as failure:
        result = run_night_plain(study, options)
        return replace(result, problems=(f"the orchestration did not start, the night ran without it: {failure}", *result.problems))


def run_night_plain(study: Path, options: Options | None = None) -> NightResult:
    """Run a night without the orchestration; returns and raises as `run_night` does."""
    with open_night(study.absolute(), options or Options()) as night:
        arrivals = receive(night)
        while jobs := pending(night, arrivals):
            progress = Progress(len(jobs))
            for chunk in chunks(jobs):
                assess_chunk(night, chunk, progress.one_more)
        return publish_night(night)


class Progress:
    """Lines on stderr that say how many packages are assessed: the first, the last, and one every few seconds."""

    def __init__(self, total: int) -> None:
        """Begin at none of ``total``."""
        self._total, self._done, self._said_at = total, 0, time.monotonic()
        sys.stderr.write(f"{total} package{'' if total == 1 else 's'} to assess\n")

    def one_more(self) -> None:
        """Count one more package."""
        self._done += 1
        now = time.monotonic()
        if self._done == self._total or now - self._said_at > _SECONDS_BETWEEN_LINES:
            self._said_at = now
            sys.stderr.write(f"{self._done} of {self._total} packages assessed\n")
