"""How near the published indices of clean, noisy recordings come to the truth.

Every simulated heart, filled from a source or in a closed loop, is recorded at rest and through an occlusion, at 250 and 1000 Hz, with
0.5 mmHg and 0.6 mL of white noise, and goes the program's own way: calibrate, cut into beats, judge, compute the indices. ``python
tests/bench/accuracy_of_clean.py --seeds 5`` prints a table of errors and leaves with 1 when a target is missed.

Truth is the solved heart's own, before any noise. PRSW's is the straight line of true stroke work on true end-diastolic volume over the
beats that were used: the relation is a little curved, so another window has another slope.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from checks import ALL as CHECKS
from checks.subject import RunSubject
from checks.verdicts import Rules, RunVerdict, judge_run
from flows.sources.simulated.catheter import Catheter, record
from flows.sources.simulated.circulation import Solution, solve
from flows.sources.simulated.heart import CLOSED_HEARTS, HEARTS, Heart
from flows.sources.simulated.recorded import REST_AND_RAMP, RecordedRun
from flows.sources.simulated.truth import RunTruth, run_truth
from flows.stage_indices import index_rows, stages_of
from metrics.signals.calibrate import calibrated
from metrics.signals.facts import RunFacts
from metrics.signals.landmarks import beats_of
from metrics.signals.recording import Channel, Recording

NOISY = Catheter(pressure_noise_mmhg=0.5, volume_noise_ml=0.6, ecg_noise_mv=0.015)
RATES_HZ = (250.0, 1000.0)

WITHIN = {"SV": 0.02, "SW": 0.02, "Ea": 0.02, "dPdt_max": 0.05}
"""Largest relative error of any one value."""
FITTED = {"Ees": 0.03, "PRSW": 0.03}
"""Largest relative error of any one value, unless its own 95 % interval reaches the truth."""
MEDIAN = 0.01
"""Largest median relative error of a fitted slope over all recordings, signed and unsigned."""
V0_WITHIN_ML = 3.0
"""Largest error of V0, unless its own 95 % interval reaches the truth."""
BEYOND = 0.05
"""Share of recordings whose interval may miss the truth: one in twenty does so by its own definition. Each one is told all the same."""
INDICES = (*WITHIN, *FITTED, "V0")


@dataclass(frozen=True, slots=True)
class Found:
    """One published value beside its truth; ``low`` and ``high`` bound its 95 % interval, NaN without one."""

    heart: str
    rate_hz: float
    seed: int
    index: str
    value: float
    true: float
    low: float
    high: float

    @property
    def error(self) -> float:
        """Return the error relative to the truth, that of V0 in mL."""
        away = self.value - self.true
        return away if self.index == "V0" else away / self.true

    def miss(self) -> str | None:
        """Return how the value misses its target, None when it does not."""
        if not np.isfinite(self.value):
            return "withheld"
        bound = V0_WITHIN_ML if self.index == "V0" else WITHIN.get(self.index, FITTED.get(self.index))
        if bound is None or abs(self.error) <= bound or (self.index not in WITHIN and self.low <= self.true <= self.high):
            return None
        return f"{self.value:.4g} where {self.true:.4g} is true, interval {self.low:.4g} to {self.high:.4g}"


def recording_of(run: RecordedRun, channels: Iterable[str] = ("pressure", "volume", "ecg")) -> Recording:
    """Return a run in memory as a reader would hand it over, with these channels."""
    columns = {"pressure": ("pressure_mmhg", "mm[Hg]"), "volume": ("volume_ml", "mL"), "ecg": ("ecg_mv", "mV")}
    return Recording(
        run.run, {name: Channel(getattr(run.signals, columns[name][0]), columns[name][1], run.sampling_rate_hz) for name in channels}
    )


def facts_of(run: RecordedRun, **changes: Any) -> RunFacts:
    """Return what a site would declare about a run in memory, with these fields changed."""
    declared: dict[str, Any] = {
        "run": run.run,
        "kind": run.kind,
        "chamber": run.chamber,
        "stage": "baseline",
        "manoeuvre": "caval-balloon" if run.kind == "preload-reduction" else None,
        "sampling_rate_hz": run.sampling_rate_hz,
        "rhythm": "sinus",
        "events": run.events,
    }
    return RunFacts(**{**declared, **changes})


def judged(recording: Recording, facts: RunFacts) -> RunVerdict:
    """Return a recording calibrated, cut into beats and judged by the checks' own limits."""
    signals = calibrated(recording, facts)
    return judge_run(RunSubject(facts, recording, signals, beats_of(signals, facts.chamber)), CHECKS, Rules({}))


def published(runs: Sequence[RunVerdict]) -> dict[str, dict[str, Any]]:
    """Return the primary row of every index of the one stage these runs form, by the index's name."""
    (stage,) = stages_of(runs, (), {}, None)
    return {str(row["index"]): row for row in index_rows(stage) if row["primary"]}


def true_prsw(truth: RunTruth, run: RunVerdict) -> float:
    """Return the slope of true stroke work on true end-diastolic volume over the beats of the run that were used."""
    beats, signals = run.subject.known_beats(), run.subject.known_signals()
    used = run.accepted & run.subject.in_window
    middle_s = 0.5 * (beats.start + beats.end)[used] / signals.sampling_rate_hz
    own = np.abs(truth.beats.middle_s[:, None] - middle_s).argmin(axis=0)
    return float(np.polyfit(truth.beats.edv_ml[own], truth.beats.sw_mmhg_ml[own], 1)[0])


def truths_of(heart: Heart, rest: RunTruth, ramp: RunTruth, judged_ramp: RunVerdict) -> dict[str, float]:
    """Return the truth of every index that has a target."""
    return {
        "SV": rest.sv_ml,
        "SW": rest.sw_mmhg_ml,
        "Ea": rest.ea_mmhg_per_ml,
        "dPdt_max": rest.dpdt_max_mmhg_per_s,
        "Ees": heart.ees_mmhg_per_ml,
        "PRSW": true_prsw(ramp, judged_ramp),
        "V0": heart.v0_ml,
    }


def assessed(heart: Heart, seed: int, rates_hz: Sequence[float] = RATES_HZ, catheter: Catheter = NOISY) -> list[Found]:
    """Return every value with a target, of one heart and one seed, at each sampling rate."""
    solved = {name: solve(heart, conditions, 100 * seed + place) for place, (name, conditions) in enumerate(REST_AND_RAMP.items())}
    truth = {name: run_truth(solution) for name, solution in solved.items()}
    found = []
    for rate_hz in rates_hz:
        runs = [_run(name, solution, truth[name], catheter, rate_hz, seed) for name, solution in solved.items()]
        verdicts = [judged(recording_of(run), facts_of(run)) for run in runs]
        rows = published(verdicts)
        for index, true in truths_of(heart, truth["rest"], truth["ramp"], verdicts[1]).items():
            value, low, high = (_number(rows[index][key]) for key in ("value", "fit_ci_low", "fit_ci_high"))
            found.append(Found(heart.name, rate_hz, seed, index, value, true, low, high))
    return found


def _run(name: str, solution: Solution, truth: RunTruth, catheter: Catheter, rate_hz: float, seed: int) -> RecordedRun:
    occlusion = solution.conditions.occlusion
    return RecordedRun(
        run=name,
        kind="steady" if occlusion is None else "preload-reduction",
        chamber=solution.heart.chamber,
        sampling_rate_hz=rate_hz,
        signals=record(solution, catheter, rate_hz, np.random.default_rng([seed, round(rate_hz), len(name)])),
        truth=truth,
        events=() if occlusion is None else ((occlusion.onset_s, "occlusion-on"),),
    )


def _number(value: float | None) -> float:
    return float("nan") if value is None else value


def told_of(found: Sequence[Found]) -> list[str]:
    """Return every value beyond its target as a sentence."""
    return [
        f"{one.index} of {one.heart} at {one.rate_hz:.0f} Hz, seed {one.seed}: {trouble}"
        for one in found
        if (trouble := one.miss()) is not None
    ]


def misses(found: Sequence[Found]) -> list[str]:
    """Return every missed target as a sentence: single values, and for fitted indices shares and medians over all recordings."""
    missed = told_of([one for one in found if one.index in WITHIN or not np.isfinite(one.value)])
    for index in (*FITTED, "V0"):
        fitted = [one for one in found if one.index == index and np.isfinite(one.value)]
        beyond = len(told_of(fitted))
        if beyond > BEYOND * len(fitted):
            missed.append(f"{index}: {beyond} of {len(fitted)} recordings beyond their target and their own interval")
    for index in FITTED:
        errors = _errors(found, index)
        for word, middle in (("signed", np.median(errors)), ("unsigned", np.median(np.abs(errors)))):
            if not abs(middle) <= MEDIAN:
                missed.append(f"{index}: median {word} error {middle:+.2%} of all recordings")
    return missed


def _errors(found: Sequence[Found], index: str) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    return np.array([one.error for one in found if one.index == index])


def table(found: Sequence[Found]) -> list[str]:
    """Return the lines of the table: median and largest error of each heart and rate, in per cent, V0 in mL."""
    keys = dict.fromkeys((one.heart, one.rate_hz) for one in found)
    groups = {key: [one for one in found if (one.heart, one.rate_hz) == key] for key in keys}
    lines = [f"{'heart':<22}{'Hz':>5}" + "".join(f"{index + (' mL' if index == 'V0' else ' %'):>16}" for index in INDICES)]
    lines += [f"{heart:<22}{rate_hz:>5.0f}" + _cells(group) for (heart, rate_hz), group in groups.items()]
    lines.append(f"{'all':<27}" + _cells(found))
    covered = {i: [f.low <= f.true <= f.high for f in found if f.index == i] for i in (*FITTED, "V0")}
    lines.append("share of 95 % intervals that hold the truth: " + ", ".join(f"{i} {np.mean(hits):.0%}" for i, hits in covered.items()))
    return lines


def _cells(found: Sequence[Found]) -> str:
    cells = []
    for index in INDICES:
        errors = _errors(found, index) * (1.0 if index == "V0" else 100.0)
        cells.append(f"{np.median(errors):+.2f} / {np.abs(errors).max():.2f}")
    return "".join(f"{cell:>16}" for cell in cells)


def measured(seeds: int, tell: Callable[[str], object]) -> list[Found]:
    """Return the values of every heart of either circulation at every rate, telling of each heart and seed as it is done."""
    found: list[Found] = []
    every = HEARTS + CLOSED_HEARTS
    for place, heart in enumerate(every, 1):
        for seed in range(seeds):
            found += assessed(heart, seed)
            tell(f"\rheart {place} of {len(every)} ({heart.name}), seed {seed + 1} of {seeds}      ")
    tell("\n")
    return found


def main() -> int:
    """Print the table and the misses; return 1 when there are any."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--seeds", type=int, default=5, help="recordings of each heart (default 5, some minutes)")
    found = measured(parser.parse_args().seeds, sys.stderr.write)
    missed = misses(found)
    beyond = told_of(found)
    lines = [*table(found), f"{len(beyond)} of {len(found)} values beyond their target", *beyond, f"{len(missed)} targets missed", *missed]
    sys.stdout.write("median error / largest error\n" + "\n".join(lines) + "\n")
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
