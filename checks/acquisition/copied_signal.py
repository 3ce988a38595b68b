"""Copied signal: two runs of one acquisition cannot hold the same recording.

Two recordings of a heart may look alike, but never share their noise. So a stretch is a copy where both runs go together and what is left
of them at the highest frequencies goes together too: an exact copy, and one that noise of the same size was laid over (there the noises
correlate by 0.7, by chance by 0.1 in a second at 250 Hz). A recording without noise, or one coarser than its noise, tells nothing. A copy
may begin elsewhere in the other run if it is exact. Whose heart the acquisition shows can no longer be trusted then. House default.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING
from checks.subject import AcquisitionSubject, RunSubject
from metrics.arrays import BoolArray, FloatArray, robust_sd, smallest_step

BLOCK_S = 1.0
LEAST_BLOCK = 100
LIKE_SIGNALS = 0.99
LIKE_NOISES = 0.3
"""Two hearts beating alike go together by 0.99 for a second; only a copy's noise, by the share of samples of one sign, does by 0.3."""

WHITE_GAIN = 4.0
"""The sixth difference of white noise is 6.8 times its third (from the binomial sums 924 and 20); that of a smooth signal is smaller."""

SIXTH_GAIN = float(np.sqrt(924.0))
LEAST_NOISE_STEPS = 0.5
"""Rounding alone has a standard deviation of 0.29 of its step."""

JUDGED_BY = 20_000
"""Samples, from the middle, that show whether there is noise: more would only cost time."""

PROBES = 5
PROBE_SAMPLES = 24


def shows_noise(samples: FloatArray) -> bool:
    """Return whether noise stands above the rounding and the signal at the highest frequencies.

    >>> wave = np.sin(np.arange(1000) / 8.0)
    >>> shows_noise(wave), shows_noise(wave + 0.01 * np.random.default_rng(1).standard_normal(1000))
    (False, True)
    """
    samples = samples[max(samples.size - JUDGED_BY, 0) // 2 :][:JUDGED_BY]
    third, sixth = robust_sd(np.diff(samples, 3)), robust_sd(np.diff(samples, 6))
    step = smallest_step(np.round(samples, 6))
    return bool(sixth > WHITE_GAIN * third and sixth / SIXTH_GAIN > LEAST_NOISE_STEPS * step)


def copied_blocks(one: FloatArray, other: FloatArray, block: int) -> BoolArray:
    """Return which blocks of ``block`` samples are the same recording, shape (n_blocks,), for two signals of one length.

    >>> noise = np.random.default_rng(1).standard_normal((2, 400))
    >>> copied_blocks(noise[0], noise[0], 200).tolist(), copied_blocks(noise[0], noise[1], 200).tolist()
    ([True, True], [False, False])
    """
    count = one.size // block
    first, second = (samples[: count * block].reshape(count, block) for samples in (one, other))
    noises = np.mean(np.sign(np.diff(first, 3, axis=1)) * np.sign(np.diff(second, 3, axis=1)), axis=1)
    first, second = (samples - samples.mean(axis=1, keepdims=True) for samples in (first, second))
    size = np.sqrt(np.sum(first**2, axis=1) * np.sum(second**2, axis=1))
    like = np.sum(first * second, axis=1) > LIKE_SIGNALS * size
    copied: BoolArray = like & (size > 0.0) & (noises > LIKE_NOISES)
    return copied


def longest_copy(one: FloatArray, other: FloatArray, block: int) -> int:
    """Return how many samples in a row, in whole blocks, both hold: from one sample on, or shifted where a copy is exact."""
    longest = 0
    for shift in {0, *_exact_shifts(one, other)}:
        from_one, from_other = max(shift, 0), max(-shift, 0)
        length = min(one.size - from_one, other.size - from_other)
        blocks = copied_blocks(one[from_one : from_one + length], other[from_other : from_other + length], block)
        edges = np.flatnonzero(np.diff(np.concatenate([[False], blocks, [False]]).astype(np.int8)))
        longest = max(longest, block * int(np.max(edges[1::2] - edges[::2], initial=0)))
    return longest


def _exact_shifts(one: FloatArray, other: FloatArray) -> set[int]:
    """Return by how much a piece of ``other`` stands later in ``one``, for a few pieces spread over it."""
    shifts = set()
    for start in np.linspace(0, max(other.size - PROBE_SAMPLES, 0), PROBES + 2).astype(np.int64)[1:-1].tolist():
        piece = other[start : start + PROBE_SAMPLES]
        places = np.flatnonzero(one[: max(one.size - PROBE_SAMPLES, 0)] == piece[0])
        for offset, value in enumerate(piece.tolist()):
            places = places[one[places + offset] == value]
        if places.size == 1:
            shifts.add(int(places[0]) - start)
    return shifts


def copied_seconds(subject: AcquisitionSubject) -> Measured:
    """Return the longest stretch two runs share in a channel other than the ECG, seconds, shape ().

    NaN where no channel is in two runs, at one rate, with noise to tell recordings apart.
    """
    noisy = [channels for channels in map(_noisy_channels, subject.runs) if channels]
    found = []
    for one, other in combinations(noisy, 2):
        for name in sorted(set(one) & set(other)):
            (first, rate_hz), (second, other_rate_hz) = one[name], other[name]
            if rate_hz == other_rate_hz:
                found.append(longest_copy(first, second, max(LEAST_BLOCK, round(BLOCK_S * rate_hz))) / rate_hz)
    return single(max(found) if found else np.nan)


def _noisy_channels(run: RunSubject) -> dict[str, tuple[FloatArray, float]]:
    """Return samples and rate of the run's pressure, volume and segments as far as they show noise; gaps are zeros."""
    if run.recording is None:
        return {}
    kept = {name: one for name, one in run.recording.channels.items() if name in {"pressure", "volume"} or name.startswith("segment-")}
    filled = {name: (np.nan_to_num(one.samples), one.sampling_rate_hz) for name, one in kept.items()}
    return {name: one for name, one in filled.items() if shows_noise(one[0])}


CHECK = Check(
    name="copied-signal",
    title="Every run is a recording of its own",
    level=Level.ACQUISITION,
    measure=copied_seconds,
    unit="s",
    limits=Limits(fail_above=1.5, basis="house default: two seconds of shared noise do not happen by chance"),
    reason="two runs hold the same recording for {value:.0f} s, so it is not known which of them, nor whose, it is (limit {limit:g} s)",
    remedy="send the right file for each run, and say which heart and run the copied one is of",
    spoils=EVERYTHING,
)
