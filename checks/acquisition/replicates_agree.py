"""Replicates: occlusions of one stage and one manoeuvre measure one slope.

Two sound occlusions differ by their standard errors: with 10 % each, a limit of 15 % on the coefficient of variation alone fails 13 % of
sound pairs (computed). So a pair counts only where its slopes lie more than 2.6 combined standard errors apart (1 in 100 by chance).
Mean and spread of two or three occlusions, within 15 %, are customary (from memory). A run whose slope a check of its own already spoils
is left out: it bears no index. A heart that beat more strongly in one of them still has one V0: that is looked at by itself.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np
from scipy import stats

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRELOAD_SLOPES
from checks.subject import AcquisitionSubject
from metrics.stats.lines import Line

APART = 2.6


def pair_variation(first: tuple[float, float], second: tuple[float, float]) -> float:
    """Return the coefficient of variation of two (slope, standard error); 0 where they differ by chance.

    >>> round(pair_variation((2.0, 0.1), (3.0, 0.1)), 3)
    0.283
    >>> pair_variation((2.0, 0.3), (3.0, 0.3))
    0.0
    """
    difference = abs(first[0] - second[0])
    if difference <= APART * float(np.hypot(first[1], second[1])):
        return 0.0
    return difference / float(np.sqrt(2.0)) / abs(0.5 * (first[0] + second[0]))


def replicate_variation(subject: AcquisitionSubject) -> Measured:
    """Return the largest coefficient of variation of Ees of a pair of replicates that differ, 0 where none does, shape ().

    NaN without two runs of one stage and manoeuvre that carry a slope.
    """
    pairs = [((one.slope, one.slope_se), (other.slope, other.slope_se)) for one, other in _pairs(subject, "Ees")]
    return single(max((pair_variation(*pair) for pair in pairs), default=np.nan))


def intercept_gap(subject: AcquisitionSubject) -> Measured:
    """Return how far V0 of two replicates lies apart beyond chance, over end-diastolic volume at rest, shape (); NaN as above."""
    edv_ml = subject.steady_medians()["edv_ml"]
    found = [_beyond_chance_ml(*pair) for pair in _pairs(subject, "V0")]
    return single(max(found) / edv_ml if found and edv_ml > 0.0 else np.nan)


def _beyond_chance_ml(one: Line, other: Line) -> float:
    difference_ml = abs(one.axis_intercept - other.axis_intercept)
    return difference_ml if difference_ml > APART * float(np.hypot(_intercept_se_ml(one), _intercept_se_ml(other))) else 0.0


def _intercept_se_ml(line: Line) -> float:
    """Return the standard error that the half width of Fieller's interval stands for, taken on its wider side."""
    half_ml = max(line.intercept_high - line.axis_intercept, line.axis_intercept - line.intercept_low)
    return half_ml / float(stats.t.ppf(0.975, line.points - 2))


def _pairs(subject: AcquisitionSubject, index: str) -> list[tuple[Line, Line]]:
    """Return the lines of each pair of replicates that no check of its own run spoils for an index."""
    lines: dict[tuple[str | None, str | None], list[Line]] = {}
    for run in subject.runs:
        line = None if index in subject.spoiled.get(run.facts.run, frozenset()) else run.end_systolic_line
        if line is not None and line.slope > 0.0 and line.fieller_g < 1.0:
            lines.setdefault((run.facts.stage, run.facts.manoeuvre), []).append(line)
    return [pair for group in lines.values() for pair in combinations(group, 2)]


CHECK = Check(
    name="replicates-agree",
    title="Replicate occlusions agree",
    level=Level.ACQUISITION,
    measure=replicate_variation,
    unit="1",
    limits=Limits(suspect_above=0.10, fail_above=0.15, basis="15 % is customary (from memory), beyond 2.6 combined standard errors"),
    reason="two occlusions of one stage give slopes that vary by {value:.0%}, more than their uncertainty explains (limit {limit:.0%})",
    remedy="look at both occlusions; say which one is sound, or whether the state changed between them",
    spoils=PRELOAD_SLOPES - {"V0"},
)
INTERCEPT = Check(
    name="replicate-intercepts-agree",
    title="Replicate occlusions show one V0",
    level=Level.ACQUISITION,
    measure=intercept_gap,
    unit="1",
    limits=Limits(suspect_above=0.05, fail_above=0.08, basis="house default beyond 2.6 standard errors: half of it moves their mean"),
    reason="two occlusions of one stage show a V0 that differs by {value:.0%} of end-diastolic volume, beyond chance (limit {limit:.0%})",
    remedy="look at both occlusions; say which one is sound, or whether the catheter moved between them",
    spoils=frozenset({"V0", "V100", "V120", "PE", "PVA", "efficiency"}),
)
