"""How fast pressure falls once it falls fastest: the time constant tau of each beat, and the pressure it falls towards.

The fall is read from dP/dt minimum to 5 mmHg above the next end-diastolic pressure (read in a table of PMC8024231). Four estimators, never
to be mixed: the free asymptote of Raff and Glantz 1981, Circ Res 48:813 (formula read), P = (P0 - Pinf) exp(-t / tau) + Pinf, primary; the
zero asymptote of Weiss 1976, J Clin Invest 58:751 (formula read), ln P against t; the logistic P = A / (1 + exp(t / tau)) + B of Matsubara
1995, Circulation 92:2318 (formula from memory), whose constant is about half of the others'; the half-time, in which P falls to half of
what it was (read), over ln 2 so that it too is a time constant (derived; true for a zero asymptote only). On exact data of one kind the
others differ by 10 to 50 %, and trends may be opposite (Langer 2005, Physiol Res 54:601, read).

A zero-phase filter leaves an exponential what it is and touches its ends alone: at most 1.4 % of a tau of 35 ms at 250 Hz, and 4 % where
the fall begins with a kink (computed).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from metrics.arrays import FloatArray
from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, Withheld, powers
from metrics.indices.pressures import read_from_zero
from metrics.indices.steady import FEWEST_BEATS
from metrics.signals.falls import Falls, TimeConstants, Words, falls, half_time, matsubara, raff_glantz, weiss
from metrics.stats.medians import median_interval

LEAST_SHARE_OF_BEATS = 0.75
"""Where fewer of the accepted beats have a time constant, noise has chosen those that do; house default."""


def _falls_of(run: RunBeats) -> Falls:
    return falls(run.signals, run.beats)


def raff_glantz_of(run: RunBeats) -> TimeConstants:
    """Return `raff_glantz` of every beat of a run."""
    return raff_glantz(run.once(_falls_of))


def weiss_of(run: RunBeats) -> TimeConstants:
    """Return `weiss` of every beat of a run."""
    return weiss(run.once(_falls_of))


def matsubara_of(run: RunBeats) -> TimeConstants:
    """Return `matsubara` of every beat of a run."""
    return matsubara(run.once(_falls_of))


def half_time_of(run: RunBeats) -> TimeConstants:
    """Return `half_time` of every beat of a run."""
    return half_time(run.once(_falls_of))


Measure = Callable[[RunBeats], TimeConstants]


def _column(stage: StageBeats, measure: Measure, name: str) -> FloatArray:
    parts: list[FloatArray] = [getattr(run.once(measure), name)[run.chosen] for run in stage.steady]
    return np.concatenate(parts) if parts else np.empty(0)


def _troubles(stage: StageBeats, measure: Measure) -> Words:
    return np.concatenate([run.once(measure).trouble[run.chosen] for run in stage.steady])


def relaxation_median(stage: StageBeats, measure: Measure, name: str, per: float = 1.0) -> Estimate:
    """Return the median over the accepted steady beats of one column of `TimeConstants`, times ``per``.

    Falls as good as straight stand at the far end of the order, so that leaving them out cannot shorten the median. Raises `Withheld`
    with fewer than three beats, with a value in fewer than three quarters of them, and where the median itself is such a fall.
    """
    values = per * _column(stage, measure, name)
    if values.size < FEWEST_BEATS:
        message = f"{values.size} accepted steady beats where {FEWEST_BEATS} are needed"
        raise Withheld(message)
    known, far = ~np.isnan(values), np.isinf(values)
    if known.sum() < max(FEWEST_BEATS, LEAST_SHARE_OF_BEATS * values.size) or far.sum() >= 0.5 * known.sum():
        raise Withheld(_told(_troubles(stage, measure), int((known & ~far).sum())))
    beyond = 10.0 * float(np.max(np.abs(values[known & ~far]))) + 1.0
    median, *bounds = median_interval(np.where(far, np.sign(values) * beyond, values)[known])
    low, high = (bound if np.isfinite(bound) and abs(bound) < beyond else None for bound in bounds)
    return Estimate(median, low, high, int(known.sum()))


def _told(trouble: Words, known: int) -> str:
    """Return why there is no median: in how many beats there is a value, and what most of the others lack."""
    reasons, counts = np.unique(trouble[trouble != ""].astype(str), return_counts=True)
    return f"{known} of {trouble.size} accepted steady beats have a time constant; in most of the others {reasons[counts.argmax()]}"


def _tau(measure: Measure) -> Callable[[StageBeats], Estimate]:
    return lambda stage: relaxation_median(stage, measure, "tau_s", 1e3)


def asymptote(stage: StageBeats) -> Estimate:
    """Return the median pressure that the exponentials fall towards, mmHg; raises `Withheld` as the time constant does."""
    return relaxation_median(stage, raff_glantz_of, "asymptote_mmhg")


def _offset_moves(measure: Measure) -> Callable[[StageBeats, float], Sensitivity]:
    def sensitivity(stage: StageBeats, _value: float) -> Sensitivity:
        per_mmhg = _column(stage, measure, "per_mmhg")
        return Sensitivity(pressure_mmhg=1e3 * float(np.median(per_mmhg[np.isfinite(per_mmhg)])))

    return sensitivity


_NEEDS = (
    "at least 3 accepted steady beats, three quarters of which have a fall of 20 ms and 5 samples, from dP/dt minimum to 5 mmHg above the "
    "next end-diastolic pressure"
)

RAFF_GLANTZ = Index(
    name="tau",
    title="Time constant of relaxation, free asymptote",
    unit="ms",
    estimator="raff-glantz",
    source=Source.STEADY,
    compute=_tau(raff_glantz_of),
    needs=_NEEDS,
    sensitivity=powers(),
)
WEISS = Index(
    name="tau",
    title="Time constant of relaxation, zero asymptote",
    unit="ms",
    estimator="weiss",
    source=Source.STEADY,
    compute=_tau(weiss_of),
    needs=f"{_NEEDS}, all of it above 0 mmHg",
    sensitivity=_offset_moves(weiss_of),
    primary=False,
    rests_on=frozenset({"Pinf"}),
)
LOGISTIC = Index(
    name="tau",
    title="Time constant of relaxation, logistic",
    unit="ms",
    estimator="logistic",
    source=Source.STEADY,
    compute=_tau(matsubara_of),
    needs=_NEEDS,
    sensitivity=powers(),
    primary=False,
)
HALF_TIME = Index(
    name="tau",
    title="Time constant of relaxation, half-time over ln 2",
    unit="ms",
    estimator="half-time",
    source=Source.STEADY,
    compute=_tau(half_time_of),
    needs=f"{_NEEDS}, in which it falls to half",
    sensitivity=_offset_moves(half_time_of),
    primary=False,
    rests_on=frozenset({"Pinf"}),
)
ASYMPTOTE = Index(
    name="Pinf",
    title="Pressure that relaxation falls towards",
    unit="mm[Hg]",
    estimator="raff-glantz",
    source=Source.STEADY,
    compute=asymptote,
    needs=_NEEDS,
    sensitivity=read_from_zero,
)
