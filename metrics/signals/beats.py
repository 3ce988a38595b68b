"""The beats of one run as arrays over beats: where each landmark lies and what is read there."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from metrics.arrays import FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class Beats:
    """Landmarks of the beats of a run; every array has shape (n_beats,).

    Index arrays count samples of the run's `Signals`; -1 marks a landmark that was not found. Values are NaN where
    their landmark is missing. A beat runs from its end-diastole (``start``) to the next one (``end``, exclusive of the
    next beat's upstroke). ``rr_s`` is R wave to next R wave, or upstroke to next upstroke where no R wave was found.
    """

    detector: str
    start: IntArray
    end: IntArray
    dpdt_max_at: IntArray
    dpdt_min_at: IntArray
    esv_at: IntArray
    r_at: IntArray
    rr_s: FloatArray
    edv_ml: FloatArray
    esv_ml: FloatArray
    edp_mmhg: FloatArray
    pmax_mmhg: FloatArray
    dpdt_max_mmhg_per_s: FloatArray
    dpdt_min_mmhg_per_s: FloatArray
    sw_mmhg_ml: FloatArray

    def __len__(self) -> int:
        """Return the number of beats."""
        return int(self.start.size)

    @property
    def sv_ml(self) -> FloatArray:
        """Return end-diastolic minus end-systolic volume, shape (n_beats,)."""
        return self.edv_ml - self.esv_ml

    @property
    def ef(self) -> FloatArray:
        """Return stroke volume over end-diastolic volume, shape (n_beats,); NaN where that volume is 0."""
        return self.sv_ml / np.where(self.edv_ml == 0.0, np.nan, self.edv_ml)
