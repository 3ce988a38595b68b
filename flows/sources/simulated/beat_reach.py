"""By how much a fault moves the indices of single beats, from the noise-free signals with it and without it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from flows.sources.simulated.acquisition import Acquisition, made
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.corpus import without_noise
from flows.sources.simulated.ladders import Ladder
from flows.sources.simulated.reading import read_beats


@dataclass(frozen=True, slots=True)
class BeatReach:
    """One index of the beat that holds ``instant_s`` of a run: what the noise-free signals say ``sound``, and with the fault ``faulty``."""

    run: str
    instant_s: float
    index: str
    sound: float
    faulty: float

    @property
    def share(self) -> float:
        """Return the size of the change as a fraction of the sound value, infinite for an index that can no longer be read."""
        return abs((self.faulty - self.sound) / self.sound) if self.sound and np.isfinite(self.faulty) else float("inf")


def beats_reached(acquisition: Acquisition, fault: Ladder, severity: float) -> tuple[BeatReach, ...]:
    """Return how far each beat that the fault touches is moved, index by index; empty for a fault that names no beats.

    Where the fault changed when the heart beats, no beat has a twin: it is held against the median of the run's sound beats.
    """
    quiet = made(replace(acquisition.recipe, catheter=without_noise(acquisition.recipe.catheter)))
    injected = fault.inject(quiet, severity)
    touched = sorted({(one.run, at_s) for one in injected.expected if one.run is not None for at_s in one.instants_s})
    if not touched:
        return ()
    before, after = read_beats(quiet), read_beats(injected.acquisition, injected.pressure_late_s)
    found = []
    for run, at_s in touched:
        beats, twins = injected.acquisition.truth[run].beats, quiet.truth[run].beats
        place = int(np.searchsorted(beats.start_s, at_s, side="right")) - 1
        is_paired = np.array_equal(beats.start_s, twins.start_s)
        for index, values in after[run].items():
            sound: FloatArray = before[run][index]
            expected = sound[place] if is_paired else np.nanmedian(sound[twins.sound])
            found.append(BeatReach(run, at_s, index, float(expected), float(values[place])))
    return tuple(found)
