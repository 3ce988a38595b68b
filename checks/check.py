"""The card of a check, and the one place where a number meets a limit.

Verdicts follow the scheme of the open QARTOD manuals (pass, suspect, fail, not evaluated). A measure that raises or gives NaN
is *not evaluated*, never a pass: every comparison with NaN is false, so a naive test would let missing data through.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields, replace
from enum import StrEnum
from typing import Any

import numpy as np

from metrics.arrays import BoolArray, FloatArray


class Verdict(StrEnum):
    """What a check says of one subject."""

    PASS = "pass"  # noqa: S105  (a verdict, not a password)
    SUSPECT = "suspect"
    FAIL = "fail"
    NOT_EVALUATED = "not evaluated"


class Level(StrEnum):
    """What a check looks at."""

    ACQUISITION = "acquisition"
    RUN = "run"
    BEAT = "beat"


@dataclass(frozen=True, slots=True)
class Limits:
    """Bounds of one check; None means that bound does not exist. ``basis`` says where the numbers come from."""

    suspect_above: float | None = None
    fail_above: float | None = None
    suspect_below: float | None = None
    fail_below: float | None = None
    basis: str = "house default"

    def declared(self) -> tuple[str, ...]:
        """Return the names of the bounds this check uses: what a protocol may replace."""
        return tuple(f.name for f in fields(self) if f.name != "basis" and getattr(self, f.name) is not None)

    def replaced(self, **bounds: float) -> Limits:
        """Return these limits with some bounds replaced.

        Raises ValueError for a bound the check does not declare.
        """
        unknown = set(bounds) - set(self.declared())
        if unknown:
            message = f"bounds not declared by this check: {', '.join(sorted(unknown))}"
            raise ValueError(message)
        return replace(self, basis="study protocol", **bounds)


@dataclass(frozen=True, slots=True)
class Measured:
    """What a measure found: a value per subject, where it stands in time, and whether a second sign bears a fail out.

    ``value`` has shape () for an acquisition or run, (n_beats,) for beats; NaN where nothing can be said.
    ``at_s`` has the same shape (seconds from the run's first sample) or is None. Where ``corroborated`` is False a value beyond the
    fail bound is only suspect. A check of an acquisition that speaks of its runs one by one names them in ``runs``, with a value each:
    it then acts on those runs alone, as a check of a run does.
    """

    value: FloatArray
    at_s: FloatArray | None = None
    corroborated: BoolArray | None = None
    runs: tuple[str, ...] = ()


def single(value: float, at_s: float = np.nan) -> Measured:
    """Return what was measured of one acquisition or run, arrays of shape ()."""
    return Measured(np.array(value, dtype=np.float64), np.array(at_s, dtype=np.float64))


@dataclass(frozen=True)
class Check:
    """One check: a measure plus declared limits; it holds no comparison and no message logic of its own.

    ``reason`` is a sentence with ``{value}`` and ``{limit}``; ``spoils`` names the indices a fail on run or acquisition level reaches;
    ``remedy`` is what the site can do about it. ``corrected`` marks a fault that calibration takes out as long as the check does not fail,
    ``is_fact`` one whose value and limit say nothing to a reader. ``concerns`` names the indices a beat check speaks for: a run whose own
    failed checks withhold them all loses no beat to it. ``after_beats`` waits for the verdicts on beats; a ``required`` beat
    check that could not be evaluated rejects the beat.
    """

    name: str
    level: Level
    measure: Callable[[Any], Measured]
    unit: str
    limits: Limits
    reason: str
    title: str
    remedy: str = ""
    limits_rv: Limits | None = None
    spoils: frozenset[str] = frozenset()
    concerns: frozenset[str] = frozenset()
    corrected: bool = False
    is_fact: bool = False
    run_kinds: tuple[str, ...] = ("steady", "preload-reduction")
    after_beats: bool = False
    required: bool = False
    revision: int = 1

    def limits_for(self, chamber: str) -> Limits:
        """Return the default limits for a chamber (LV or RV)."""
        return self.limits_rv if chamber == "RV" and self.limits_rv is not None else self.limits


@dataclass(frozen=True, slots=True)
class Judged:
    """Verdicts of one check on its subjects: arrays of shape (n,), n = 1 above beat level. ``limit`` is the bound crossed, else NaN.

    ``runs`` names the run of each verdict where a check of an acquisition speaks of its runs one by one.
    """

    check: Check
    value: FloatArray
    verdict: Sequence[Verdict]
    limit: FloatArray
    at_s: FloatArray
    trouble: str | None = None
    runs: tuple[str, ...] = ()

    def worst(self) -> Verdict:
        """Return the gravest verdict of the subjects; NOT_EVALUATED when there is none."""
        return max(self.verdict, key=_GRAVITY.__getitem__, default=Verdict.NOT_EVALUATED)


_GRAVITY = {Verdict.PASS: 0, Verdict.NOT_EVALUATED: 1, Verdict.SUSPECT: 2, Verdict.FAIL: 3}


def judge(check: Check, subject: object, limits: Limits, count: int = 1) -> Judged:
    """Return the verdicts of a check on a subject with ``count`` members (1, or the number of beats).

    This is the one place where a number meets a limit: beyond a fail bound is fail, beyond a suspect bound suspect, NaN not evaluated.
    A measure that raises, or whose arrays do not fit the members, gives not evaluated for every member, with the error in ``trouble``.
    """
    nothing = np.full(count, np.nan)
    try:
        found = check.measure(subject)
        count = len(found.runs) or count
        value, at_s, borne_out = _spread(found, count)
    except Exception as error:  # noqa: BLE001  (whatever a measure raises must not let data through, nor stop the other checks)
        verdicts = (Verdict.NOT_EVALUATED,) * count
        return Judged(check, nothing, verdicts, nothing.copy(), nothing.copy(), f"{type(error).__name__}: {error}")
    failed, fail_bound = _beyond(value, limits.fail_above, limits.fail_below)
    doubtful, suspect_bound = _beyond(value, limits.suspect_above, limits.suspect_below)
    fails = failed & borne_out
    suspects = (failed | doubtful) & ~fails
    limit = np.where(fails, fail_bound, np.where(suspects, np.where(doubtful, suspect_bound, fail_bound), np.nan))
    verdicts = tuple(
        Verdict.NOT_EVALUATED if np.isnan(v) else Verdict.FAIL if f else Verdict.SUSPECT if s else Verdict.PASS
        for v, f, s in zip(value.tolist(), fails.tolist(), suspects.tolist(), strict=True)
    )
    return Judged(check, value, verdicts, limit, at_s, runs=found.runs)


def _spread(found: Measured, count: int) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Return value, instant and corroboration for each member, shape (count,); raises ValueError where they do not fit."""
    value = np.broadcast_to(np.asarray(found.value, dtype=np.float64), (count,)).copy()
    at_s = np.full(count, np.nan) if found.at_s is None else np.broadcast_to(np.asarray(found.at_s, dtype=np.float64), (count,)).copy()
    borne_out = np.ones(count, dtype=bool) if found.corroborated is None else np.broadcast_to(found.corroborated, (count,))
    return value, at_s, borne_out


def _beyond(value: FloatArray, above: float | None, below: float | None) -> tuple[BoolArray, FloatArray]:
    """Return which values lie beyond either bound, and the bound each one crossed."""
    beyond, crossed = np.zeros(value.shape, dtype=bool), np.full(value.shape, np.nan)
    for bound, is_beyond in ((below, np.less), (above, np.greater)):
        if bound is not None:
            this = is_beyond(value, bound)
            beyond |= this
            crossed[this] = bound
    return beyond, crossed
