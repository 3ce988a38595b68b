"""Copied signal: two runs of one acquisition cannot hold the same recording.

Two recordings of a heart may look alike, but never share their noise. So a second is a copy where both runs go together and what is left
of them in the upper half of the spectrum goes together too. Each frequency counts alike, whatever stands in it, so mains hum, which may
well go together, has no more say than the few lines it takes: noises of their own agree by 0.1 a second by chance (at 250 Hz), a copy
by 1, and one that noise of the same size was laid over still by 0.6. Where no noise stands above the rounding nothing is said. A copy may
begin elsewhere in the other run if it is exact. Which of the runs is the true one cannot be known, so both are out. House default.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING
from checks.subject import AcquisitionSubject, RunSubject
from metrics.arrays import FloatArray, smallest_step

BLOCK_S = 1.0
LEAST_BLOCK = 100
LIKE_POINTS = 50
LIKE_SIGNALS = 0.95
"""A first look, at so many points of a second: only where two runs go together at all is their noise looked at."""

LIKE_NOISES = 0.4
"""Halfway between what noises of their own reach by chance, with four of their standard deviations, and a copy under new noise."""

FLAT_NOISE = 0.5
"""Noise is about as strong in the highest quarter of the spectrum as in the one below; corners of a noiseless signal fall by two thirds."""

LEAST_NOISE_STEPS = 0.5
"""Rounding alone has a standard deviation of 0.29 of its step."""

PROBES = 5
PROBE_SAMPLES = 24


def shared_noise(one: FloatArray, other: FloatArray) -> tuple[FloatArray, bool]:
    """Return how far each row's noises go together, from -1 to 1, shape (n,), and whether there is noise at all; rows of shape (n, m).

    >>> rng = np.random.default_rng(1)
    >>> noise = rng.standard_normal((3, 250))
    >>> own = rng.standard_normal((3, 250))
    >>> [bool((shared_noise(noise, other)[0] > LIKE_NOISES).all()) for other in (noise, noise + own, own)]
    [True, True, False]
    """
    window = np.hanning(one.shape[1])
    quarter = one.shape[1] // 4
    upper = [np.fft.rfft((rows - rows.mean(axis=1, keepdims=True)) * window, axis=1)[:, quarter:] for rows in (one, other)]
    first, second = (np.abs(spectrum) for spectrum in upper)
    size = first * second
    together = np.where(size > 0.0, np.real(upper[0] * np.conj(upper[1])) / np.where(size > 0.0, size, 1.0), 0.0)
    noisy = all(_is_noise(height, float(np.sum(window**2)), rows) for height, rows in zip((first, second), (one, other), strict=True))
    return np.asarray(together.mean(axis=1), dtype=np.float64), noisy


def _is_noise(height: FloatArray, power: float, rows: FloatArray) -> bool:
    """Return whether the upper half of a spectrum is noise, above the rounding: of white noise half lies below ln 2 of its mean power."""
    middle = height.shape[1] // 2
    below, above = float(np.median(height[:, :middle])), float(np.median(height[:, middle:]))
    step = smallest_step(np.round(rows[0], 6))
    return above > FLAT_NOISE * below and above > LEAST_NOISE_STEPS * step * float(np.sqrt(np.log(2.0) * power))


def longest_copy(one: FloatArray, other: FloatArray, block: int) -> float:
    """Return how many samples in a row, in whole blocks, both hold: from one sample on, or shifted where a copy is exact.

    NaN where both go together in two blocks or more without noise to be told apart by.
    """
    counts = []
    for shift in sorted({0, *_exact_shifts(one, other)}):
        from_one, from_other = max(shift, 0), max(-shift, 0)
        count = max(min(one.size - from_one, other.size - from_other) // block, 0)
        rows = [held[first : first + count * block].reshape(count, block) for held, first in ((one, from_one), (other, from_other))]
        counts.append(_copied_blocks(*rows))
    return block * _gravest(counts)


def _copied_blocks(one: FloatArray, other: FloatArray) -> float:
    """Return the most rows in a row that are the same recording, NaN where rows go together and no noise can tell."""
    stride = max(one.shape[1] // LIKE_POINTS, 1)
    first, second = (rows[:, ::stride] - rows[:, ::stride].mean(axis=1, keepdims=True) for rows in (one, other))
    size = np.sqrt(np.sum(first**2, axis=1) * np.sum(second**2, axis=1))
    copied = (np.sum(first * second, axis=1) > LIKE_SIGNALS * size) & (size > 0.0)
    alike = np.flatnonzero(copied)
    if alike.size < 2:
        return 0.0
    together, noisy = shared_noise(one[alike], other[alike])
    if not noisy:
        return np.nan
    copied[alike] = together > LIKE_NOISES
    edges = np.flatnonzero(np.diff(np.concatenate([[False], copied, [False]]).astype(np.int8)))
    return float(np.max(edges[1::2] - edges[::2], initial=0))


def _exact_shifts(one: FloatArray, other: FloatArray) -> set[int]:
    """Return by how much a piece of ``other`` stands later in ``one``, for a few pieces spread over it."""
    shifts = set()
    for start in np.linspace(0, max(other.size - PROBE_SAMPLES, 0), PROBES + 2).astype(np.int64)[1:-1].tolist():
        piece = other[start : start + PROBE_SAMPLES]
        places = np.flatnonzero(one[: max(one.size - PROBE_SAMPLES, 0)] == piece[0])
        for offset, value in enumerate(piece.tolist()):
            if places.size == 0:
                break
            places = places[one[places + offset] == value]
        if places.size == 1:
            shifts.add(int(places[0]) - start)
    return shifts


def copied_seconds(subject: AcquisitionSubject) -> Measured:
    """Return for each run the longest stretch another one shares in pressure or volume, seconds, shape (n_runs,).

    NaN for a run that no other has a channel of that rate in common with, or that no noise tells apart from one it goes with.
    """
    channels = [_compared_channels(run) for run in subject.runs]
    found: list[list[float]] = [[] for _ in channels]
    for one, other in combinations(range(len(channels)), 2):
        shared_s = _shared_seconds(channels[one], channels[other])
        if shared_s is not None:
            found[one].append(shared_s)
            found[other].append(shared_s)
    value = np.array([_gravest(values) for values in found])
    return Measured(value, runs=tuple(run.facts.run for run in subject.runs)) if np.isfinite(value).any() else single(np.nan)


def _gravest(found: list[float]) -> float:
    """Return the longest of several stretches, NaN where none was found and not all could be told, or there are none."""
    longest = max((value for value in found if np.isfinite(value)), default=np.nan)
    return longest if longest > 0.0 or all(np.isfinite(found)) else np.nan


def _shared_seconds(one: dict[str, tuple[FloatArray, float]], other: dict[str, tuple[FloatArray, float]]) -> float | None:
    """Return the longest stretch two runs share in a channel both have, NaN where none can tell; None where they have none."""
    found = []
    for name in sorted(set(one) & set(other)):
        (first, rate_hz), (second, other_rate_hz) = one[name], other[name]
        if rate_hz == other_rate_hz:
            found.append(longest_copy(first, second, max(LEAST_BLOCK, round(BLOCK_S * rate_hz))) / rate_hz)
    known = [seconds for seconds in found if np.isfinite(seconds)]
    return max(known) if known else np.nan if found else None


def _compared_channels(run: RunSubject) -> dict[str, tuple[FloatArray, float]]:
    """Return samples (gaps are zeros) and rate of pressure and volume, of the first segment without a volume, as far as they move."""
    if run.recording is None:
        return {}
    held = run.recording.channels
    segments = sorted(name for name in held if name.startswith("segment-"))
    names = [name for name in ("pressure", "volume") if name in held] + (segments[:1] if "volume" not in held else [])
    kept = {name: (_filled(held[name].samples), held[name].sampling_rate_hz) for name in names}
    return {name: one for name, one in kept.items() if np.any(one[0] != one[0][:1])}


def _filled(samples: FloatArray) -> FloatArray:
    gaps = np.isnan(samples)
    return np.where(gaps, 0.0, samples) if gaps.any() else samples


CHECK = Check(
    name="copied-signal",
    title="Every run is a recording of its own",
    level=Level.ACQUISITION,
    measure=copied_seconds,
    unit="s",
    limits=Limits(fail_above=1.5, basis="house default: two seconds of shared noise do not happen by chance"),
    reason="the run holds {value:.0f} s that another run holds as well, so it is not known which of them recorded it (limit {limit:g} s)",
    remedy="send the right file for each run, and say which heart and run the copied one is of",
    spoils=EVERYTHING,
)
