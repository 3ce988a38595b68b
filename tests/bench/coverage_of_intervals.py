"""How often intervals of 95 % hold the truth, by the number of beats: medians of steady beats, lines of occlusions, means of runs.

Series and points are drawn from what beats do: independent, correlated with their neighbours, breathing. ``python
tests/bench/coverage_of_intervals.py --draws 2000`` prints three tables; the figures in the docstrings of `metrics.stats.bootstrap`,
`metrics.stats.lines` and `metrics.indices.slopes` are of this program.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable, Iterator

import numpy as np
from scipy.signal import lfilter

from metrics.arrays import FloatArray
from metrics.indices.slopes import Pool, slope_estimate
from metrics.stats.bootstrap import block_mean_interval, block_median_interval
from metrics.stats.lines import Line, deming_line, least_squares_line, unattenuated_line
from metrics.stats.medians import median_interval

Draw = np.random.Generator
SLOPE, INTERCEPT_ML = 2.0, 15.0
NOISE_ML, NOISE_MMHG = 0.8, 2.0
SEED = 20

SCATTER: dict[str, Callable[[Draw, int], FloatArray]] = {
    "independent": lambda draw, count: draw.standard_normal(count),
    "neighbours 0.3": lambda draw, count: autoregression(draw, count, 0.3),
    "neighbours 0.6": lambda draw, count: autoregression(draw, count, 0.6),
    "breath of 4.3": lambda draw, count: breathing(draw, count, 4.3),
    "breath of 5.7": lambda draw, count: breathing(draw, count, 5.7),
}


def autoregression(draw: Draw, count: int, near: float) -> FloatArray:
    """Return values whose neighbours correlate, of standard deviation 1."""
    values: FloatArray = lfilter([np.sqrt(1.0 - near**2)], [1.0, -near], draw.standard_normal(count + 50))[50:]
    return values


def breathing(draw: Draw, count: int, period: float) -> FloatArray:
    """Return values that swing with breathing, half again as far as they scatter."""
    values: FloatArray = 1.5 * np.sin(2.0 * np.pi * np.arange(count) / period + draw.uniform(0.0, 2.0 * np.pi)) + draw.standard_normal(
        count
    )
    return values


def holds(low: float, high: float, truth: float) -> bool:
    """Return whether an interval holds the truth."""
    return bool(low <= truth <= high)


def steady(draws: int) -> Iterator[str]:
    """Yield the table of medians by blocks, means by blocks, and medians by order statistics."""
    yield "steady beats: median by blocks / mean by blocks / median by order statistics, %"
    yield " ".join(["beats", *(f"{name:>18}" for name in SCATTER)])
    for count in (4, 6, 8, 10, 12, 16, 20, 30, 40, 80, 200):
        cells = []
        for series in SCATTER.values():
            draw = np.random.default_rng(SEED)
            drawn = [series(draw, count) for _ in range(draws)]
            shares = [
                100.0 * np.mean([holds(*interval(one)[1:], 0.0) for one in drawn])
                for interval in (block_median_interval, block_mean_interval, median_interval)
            ]
            cells.append("/".join(f"{share:.0f}" for share in shares))
        yield " ".join([f"{count:>5}", *(f"{cell:>18}" for cell in cells)])


def occlusions(draws: int) -> Iterator[str]:
    """Yield the table of lines: slope and intercept of Deming's, slope of the unattenuated and of least squares."""
    yield "ramps: Deming's slope / its intercept / unattenuated slope / slope of least squares, %"
    yield " ".join(["beats", *(f"{name:>18}" for name in SCATTER)])
    for count in (5, 6, 8, 10, 12, 15, 16, 20, 30, 40, 60):
        cells = []
        for series in SCATTER.values():
            draw = np.random.default_rng(SEED)
            held = [_held(draw, series, count) for _ in range(draws)]
            cells.append("/".join(f"{share:.0f}" for share in 100.0 * np.mean(held, axis=0)))
        yield " ".join([f"{count:>5}", *(f"{cell:>18}" for cell in cells)])


def _held(draw: Draw, series: Callable[[Draw, int], FloatArray], count: int) -> list[bool]:
    loads = np.linspace(120.0, 75.0, count)
    x = loads + NOISE_ML * draw.standard_normal(count)
    y = SLOPE * (loads - INTERCEPT_ML) + NOISE_MMHG * series(draw, count)
    line = deming_line(x, y, (NOISE_MMHG / NOISE_ML) ** 2)
    others = unattenuated_line(x, y, NOISE_ML**2), least_squares_line(x, y)
    return [
        holds(line.slope_low, line.slope_high, SLOPE),
        holds(line.intercept_low, line.intercept_high, INTERCEPT_ML),
        *(holds(other.slope_low, other.slope_high, SLOPE) for other in others),
    ]


def replicates(draws: int) -> Iterator[str]:
    """Yield the table of means of runs: runs that differ by their fits' errors alone, and by more."""
    apart = (0.0, 0.5, 1.0, 2.0, 5.0, 100.0)
    yield "means of runs whose true slopes scatter by so many of a fit's errors, 10 degrees a run, %"
    yield " ".join([" runs", *(f"{spread:>8g}" for spread in apart)])
    for runs in (1, 2, 3, 4, 6):
        cells = []
        for spread in apart if runs > 1 else apart[:1]:
            draw = np.random.default_rng(SEED)
            held = []
            for _ in range(draws):
                errors = 0.1 * np.sqrt(draw.chisquare(10, runs) / 10.0)
                slopes = SLOPE + 0.1 * np.hypot(1.0, spread) * draw.standard_normal(runs)
                found = slope_estimate(Pool(tuple(_run(*pair) for pair in zip(slopes, errors, strict=True))))
                held.append(found.fit_low is not None and found.fit_high is not None and holds(found.fit_low, found.fit_high, SLOPE))
            cells.append(f"{100.0 * np.mean(held):>8.0f}")
        yield " ".join([f"{runs:>5}", *cells])


def _run(slope: float, error: float) -> Line:
    half = 2.2281389 * error  # t of 10 degrees
    return Line(slope, 0.0, slope - half, slope + half, -half, half, error, 0.0, 12)


def main() -> int:
    """Print the tables."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--draws", type=int, default=500)
    draws = parser.parse_args().draws
    for table in (steady, occlusions, replicates):
        for line in table(draws):
            sys.stdout.write(line + "\n")
            sys.stdout.flush()
        sys.stdout.write("\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
