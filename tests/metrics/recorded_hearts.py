"""Simulated runs in memory and what the program makes of them, kept for the length of a test session."""

from functools import cache

import numpy as np

from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.recorded import NOISELESS, REST_AND_RAMP, recorded
from metrics.signals.calibrate import calibrated
from metrics.signals.landmarks import beats_of
from tests.bench.accuracy_of_clean import NOISY, facts_of, recording_of

ALL_CHANNELS = ("pressure", "volume", "ecg")
CATHETERS = {
    "noiseless": NOISELESS,
    "noisy": NOISY,
    "twice-noisy": Catheter(pressure_noise_mmhg=1.0, volume_noise_ml=1.2, ecg_noise_mv=0.03),
}


@cache
def heart_runs(heart, rate_hz=250.0, catheter="noiseless", seed=0):
    """The rest and the ramp of a heart."""
    return recorded(heart, REST_AND_RAMP, catheter=CATHETERS[catheter], rate_hz=rate_hz, seed=seed)


def run_in_memory(heart, conditions, *, rate_hz=250.0, catheter="noiseless", seed=0):
    """One run of a heart under other conditions."""
    return recorded(heart, {"run": conditions}, catheter=CATHETERS[catheter], rate_hz=rate_hz, seed=seed)["run"]


def signals_and_beats(run, channels=ALL_CHANNELS, **facts):
    """What the program makes of a run in memory."""
    declared = facts_of(run, **facts)
    signals = calibrated(recording_of(run, channels), declared)
    return signals, beats_of(signals, declared.chamber)


def nearest_true(run, beats, rate_hz):
    """For each beat found, which true beat begins nearest to it, and by how many seconds it begins late."""
    away_s = beats.start[:, None] / rate_hz - run.truth.beats.start_s
    own = np.abs(away_s).argmin(axis=1)
    return own, away_s[np.arange(own.size), own]
