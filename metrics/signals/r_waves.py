"""R waves of an ECG.

The detector follows Pan and Tompkins 1985, IEEE Trans Biomed Eng 32:230: band-pass, derivative, square, moving integral of 150 ms, two
running thresholds with search-back (thresholds read in textbook excerpts by Tompkins; band, refractory and search-back times from
memory). Their integer filters hold at 200 Hz only, so ours are redesigned for the rate at hand and have no delay.
"""

from __future__ import annotations

import numpy as np
from scipy import signal

from metrics.arrays import FloatArray, IntArray

BAND_HZ = (5.0, 15.0)
INTEGRAL_S = 0.150
REFRACTORY_S = 0.200
T_WAVE_S = 0.360
SEARCH_BACK = 1.66
LEARNING_S = 2.0
SURGE = 4.0
"""One peak counts for at most this many running signal peaks (twice the amplitude), so that an artefact does not deafen the detector to
the beats after it; house default."""


def thresholds(signal_peak: float, noise_peak: float) -> tuple[float, float]:
    """Return Pan and Tompkins' first and second threshold from the running signal and noise peaks.

    >>> thresholds(1.0, 0.2)
    (0.4, 0.2)
    """
    first = noise_peak + 0.25 * (signal_peak - noise_peak)
    return first, 0.5 * first


def running_peak(previous: float, peak: float, weight: float = 0.125) -> float:
    """Return the running peak after one more; weight 0.125 in the ordinary course, 0.25 after a search-back.

    >>> running_peak(1.0, 1.6)
    1.075
    """
    return weight * peak + (1.0 - weight) * previous


def r_waves(ecg_mv: FloatArray, sampling_rate_hz: float) -> IntArray:
    """Return the sample index of each R wave, ascending; empty when the ECG is flat or shorter than two seconds.

    ``ecg_mv`` has shape (n,) and holds no NaN; its unit does not matter.
    """
    if ecg_mv.size < 2.0 * sampling_rate_hz or sampling_rate_hz < 4.0 * BAND_HZ[1] or np.ptp(ecg_mv) == 0.0:
        return np.empty(0, dtype=np.int64)
    band = signal.sosfiltfilt(signal.butter(2, BAND_HZ, "bandpass", fs=sampling_rate_hz, output="sos"), ecg_mv)
    slope = np.gradient(band)
    width = max(1, round(INTEGRAL_S * sampling_rate_hz))
    energy = np.convolve(slope**2, np.full(width, 1.0 / width), mode="same")
    candidates, _ = signal.find_peaks(energy, distance=max(1, round(REFRACTORY_S * sampling_rate_hz)))
    accepted = _above_thresholds(energy, slope, candidates, sampling_rate_hz)
    return _apexes(band, accepted, sampling_rate_hz)


def _above_thresholds(energy: FloatArray, slope: FloatArray, candidates: IntArray, sampling_rate_hz: float) -> IntArray:
    """Walk through the candidate peaks with running thresholds, T-wave test and search-back."""
    signal_peak, noise_peak = _first_levels(energy, sampling_rate_hz)
    found: list[int] = []
    intervals: list[int] = []
    half = max(1, round(0.5 * INTEGRAL_S * sampling_rate_hz))
    steepest = {int(c): float(np.max(np.abs(slope[max(0, c - half) : c + half]))) for c in candidates}
    passed_over: list[int] = []
    for candidate in map(int, candidates):
        if found and intervals and candidate - found[-1] > SEARCH_BACK * float(np.mean(intervals[-8:])):
            second = thresholds(signal_peak, noise_peak)[1]
            missed = [c for c in passed_over if c > found[-1] + T_WAVE_S * sampling_rate_hz and energy[c] > second]
            if missed:
                best = max(missed, key=lambda c: float(energy[c]))
                intervals.append(best - found[-1])
                found.append(best)
                signal_peak = running_peak(signal_peak, min(float(energy[best]), SURGE * signal_peak), 0.25)
        first, _ = thresholds(signal_peak, noise_peak)
        peak = float(energy[candidate])
        gap = candidate - found[-1] if found else None
        is_t_wave = gap is not None and gap < T_WAVE_S * sampling_rate_hz and steepest[candidate] < 0.5 * steepest[found[-1]]
        if peak > first and not is_t_wave:
            if gap is not None:
                intervals.append(gap)
            found.append(candidate)
            signal_peak = running_peak(signal_peak, min(peak, SURGE * signal_peak))
            passed_over.clear()
        else:
            noise_peak = running_peak(noise_peak, peak)
            passed_over.append(candidate)
    return np.array(sorted(set(found)), dtype=np.int64)


def _first_levels(energy: FloatArray, sampling_rate_hz: float) -> tuple[float, float]:
    """Return the running peaks to begin with: half the usual largest and mean energy of 2 s.

    Pan and Tompkins learn from the first 2 s; a whole run is at hand, so an artefact in those need not set the level. The upper quartile
    of the windows, because a lead may be off for some of them.
    """
    length = round(LEARNING_S * sampling_rate_hz)
    windows = energy[: energy.size // length * length].reshape(-1, length)
    return 0.5 * float(np.quantile(windows.max(axis=1), 0.75)), 0.5 * float(np.quantile(windows.mean(axis=1), 0.75))


def _apexes(band: FloatArray, around: IntArray, sampling_rate_hz: float) -> IntArray:
    """Return the largest deflection within 100 ms of each accepted peak, of the polarity most beats share."""
    if around.size == 0:
        return around
    half = max(1, round(0.100 * sampling_rate_hz))
    windows = np.clip(around[:, None] + np.arange(-half, half + 1), 0, band.size - 1)
    near = band[windows]
    polarity = 1.0 if np.median(near.max(axis=1)) >= np.median(-near.min(axis=1)) else -1.0
    apex = windows[np.arange(around.size), np.argmax(polarity * near, axis=1)]
    unique: IntArray = np.unique(apex)
    return unique
