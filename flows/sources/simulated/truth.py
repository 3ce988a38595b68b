"""What is true of a simulated run, beat by beat, read from the noise-free solution on its fine grid."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.circulation import Solution
from flows.sources.simulated.rhythm import STEP_S, seconds

UPSTROKE_SHARE = 0.1
"""End-diastole is the last instant before dP/dt exceeds this share of the beat's maximum."""


@dataclass(frozen=True, slots=True)
class BeatTruth:
    """The complete beats of a run, arrays of shape (n_beats,), from one end-diastole to the next.

    ``in_ramp`` marks beats from the onset of an occlusion to the smallest end-diastolic volume.
    ``ees_mmhg_per_ml`` is each beat's own end-systolic elastance: that of the heart times the beat's force.
    """

    start_s: FloatArray
    end_systole_s: FloatArray
    end_s: FloatArray
    r_s: FloatArray
    rr_s: FloatArray
    premature: tuple[bool, ...]
    ees_mmhg_per_ml: FloatArray
    edv_ml: FloatArray
    esv_ml: FloatArray
    edp_mmhg: FloatArray
    esp_mmhg: FloatArray
    end_systolic_volume_ml: FloatArray
    pmax_mmhg: FloatArray
    sw_mmhg_ml: FloatArray
    dpdt_max_mmhg_per_s: FloatArray
    dpdt_min_mmhg_per_s: FloatArray
    in_ramp: tuple[bool, ...]
    aberrant: tuple[bool, ...]

    def __len__(self) -> int:
        """Return the number of complete beats."""
        return int(self.start_s.size)

    @property
    def sv_ml(self) -> FloatArray:
        """Return end-diastolic minus smallest volume, shape (n_beats,)."""
        return self.edv_ml - self.esv_ml

    @property
    def sound(self) -> NDArray[np.bool_]:
        """Return which beats are neither premature nor conducted another way, shape (n_beats,)."""
        return ~np.logical_or(self.premature, self.aberrant)

    @property
    def sound_ramp(self) -> NDArray[np.bool_]:
        """Return which sound beats belong to the ramp, shape (n_beats,)."""
        return np.asarray(self.sound & np.asarray(self.in_ramp), dtype=np.bool_)

    @property
    def ea_mmhg_per_ml(self) -> FloatArray:
        """Return end-systolic pressure over stroke volume, shape (n_beats,), NaN for a beat that ejected nothing."""
        return self.esp_mmhg / np.where(self.sv_ml > 0.0, self.sv_ml, np.nan)

    @property
    def middle_s(self) -> FloatArray:
        """Return the instant in the middle of each beat, shape (n_beats,)."""
        return 0.5 * (self.start_s + self.end_s)


@dataclass(frozen=True, slots=True)
class RunTruth:
    """What is true of a run as a whole; medians are over its sound beats.

    Where the end-systolic relation is bent, Ees and V0 are the straight line through the true end-systolic points of the ramp.
    ``prsw_mmhg`` and ``vw_ml`` are the straight line of true stroke work on true end-diastolic volume over the ramp, NaN without one.
    """

    beats: BeatTruth
    chamber: str
    ees_mmhg_per_ml: float
    v0_ml: float
    ea_mmhg_per_ml: float
    heart_rate_per_min: float
    edv_ml: float
    esv_ml: float
    sv_ml: float
    edp_mmhg: float
    esp_mmhg: float
    pmax_mmhg: float
    sw_mmhg_ml: float
    dpdt_max_mmhg_per_s: float
    dpdt_min_mmhg_per_s: float
    prsw_mmhg: float
    vw_ml: float


def run_truth(solution: Solution) -> RunTruth:
    """Return what is true of a solved run.

    Raises ValueError when the run holds no complete beat.
    """
    beats = beat_truth(solution)
    sound = beats.sound
    ramp = beats.sound_ramp
    slope, volume_axis = stroke_work_line(beats, ramp)
    heart = solution.heart
    ees, v0 = heart.ees_mmhg_per_ml, heart.v0_ml
    if heart.espvr_bend_mmhg_per_ml2:
        ees, v0 = _line(beats.end_systolic_volume_ml[ramp], beats.esp_mmhg[ramp])
    return RunTruth(
        beats=beats,
        chamber=solution.heart.chamber,
        ees_mmhg_per_ml=ees,
        v0_ml=v0,
        ea_mmhg_per_ml=float(np.nanmedian(beats.ea_mmhg_per_ml[sound])),
        heart_rate_per_min=60.0 / float(np.median(beats.rr_s[sound])),
        edv_ml=float(np.median(beats.edv_ml[sound])),
        esv_ml=float(np.median(beats.esv_ml[sound])),
        sv_ml=float(np.median(beats.sv_ml[sound])),
        edp_mmhg=float(np.median(beats.edp_mmhg[sound])),
        esp_mmhg=float(np.median(beats.esp_mmhg[sound])),
        pmax_mmhg=float(np.median(beats.pmax_mmhg[sound])),
        sw_mmhg_ml=float(np.median(beats.sw_mmhg_ml[sound])),
        dpdt_max_mmhg_per_s=float(np.median(beats.dpdt_max_mmhg_per_s[sound])),
        dpdt_min_mmhg_per_s=float(np.median(beats.dpdt_min_mmhg_per_s[sound])),
        prsw_mmhg=slope,
        vw_ml=volume_axis,
    )


def stroke_work_line(beats: BeatTruth, chosen: NDArray[np.bool_]) -> tuple[float, float]:
    """Return slope (mmHg) and volume-axis intercept (mL) of true stroke work on true end-diastolic volume over the chosen beats.

    ``chosen`` has shape (n_beats,); with fewer than three beats both are NaN. The relation is not exactly straight in this model, so
    compare with an estimate over the same beats.
    """
    return _line(beats.edv_ml[chosen], beats.sw_mmhg_ml[chosen])


def _line(volume_ml: FloatArray, height: FloatArray) -> tuple[float, float]:
    """Return slope and volume-axis intercept, NaN from fewer than three points."""
    if volume_ml.size < 3:
        return np.nan, np.nan
    slope, intercept = np.polyfit(volume_ml, height, 1)
    return float(slope), float(-intercept / slope)


def beat_truth(solution: Solution) -> BeatTruth:
    """Return the complete beats of a solved run."""
    pressure, volume = solution.pressure_mmhg, solution.volume_ml
    rate = np.gradient(pressure, STEP_S)
    onset = solution.schedule.onset - solution.first
    whole = np.flatnonzero((onset[:-1] >= 0) & (onset[1:] <= pressure.size)) if onset.size > 1 else np.zeros(0, dtype=np.int64)
    starts = np.asarray([_upstroke(rate, int(onset[beat]), int(onset[beat + 1])) for beat in whole], dtype=np.int64)
    count = max(starts.size - 1, 0)
    if count == 0:
        message = "the run is too short to hold a complete beat"
        raise ValueError(message)
    chosen = whole[:count]
    peak = onset[chosen] + np.asarray([int(solution.activation[onset[b] : onset[b + 1]].argmax()) for b in chosen], dtype=np.int64)
    rows = [_readings(pressure, volume, rate, int(a), int(b), chamber=solution.heart.chamber) for a, b in pairwise(starts)]
    esv, pmax, work, rise, fall = (np.asarray(column) for column in zip(*rows, strict=True))
    r_s = seconds(onset) - solution.heart.electromechanical_delay_s
    begin_s = seconds(starts[:-1])
    return BeatTruth(
        start_s=begin_s,
        end_systole_s=seconds(peak),
        end_s=seconds(starts[1:]),
        r_s=r_s[chosen],
        rr_s=r_s[chosen + 1] - r_s[chosen],
        premature=tuple(solution.schedule.premature[beat] for beat in chosen),
        ees_mmhg_per_ml=solution.heart.ees_mmhg_per_ml * solution.schedule.force[chosen],
        edv_ml=volume[starts[:-1]],
        esv_ml=esv,
        edp_mmhg=pressure[starts[:-1]],
        esp_mmhg=pressure[peak],
        end_systolic_volume_ml=volume[peak],
        pmax_mmhg=pmax,
        sw_mmhg_ml=work,
        dpdt_max_mmhg_per_s=rise,
        dpdt_min_mmhg_per_s=fall,
        in_ramp=_ramp(solution, begin_s, volume[starts[:-1]]),
        aberrant=tuple(solution.schedule.aberrant[beat] for beat in chosen),
    )


def _upstroke(rate: FloatArray, low: int, high: int) -> int:
    """Return the last step before dP/dt exceeds its share of the beat's maximum, looking back from that maximum."""
    steepest = low + int(rate[low:high].argmax())
    below = np.flatnonzero(rate[:steepest] <= UPSTROKE_SHARE * rate[steepest])
    return int(below[-1]) if below.size else 0


def _readings(
    pressure: FloatArray, volume: FloatArray, rate: FloatArray, start: int, end: int, *, chamber: str
) -> tuple[float, float, float, float, float]:
    """Return ESV, peak pressure, loop area, dP/dtmax and dP/dtmin of one beat."""
    p, v, slope = pressure[start : end + 1], volume[start : end + 1], rate[start : end + 1]
    rise = int(slope[: p.size // 2].argmax())
    fall = rise + int(slope[rise:].argmin())
    # A right ventricle may go on ejecting while it relaxes: its smallest volume is looked for up to the next filling.
    systole = v if chamber == "RV" else v[: fall + 1]
    closed_p, closed_v = np.append(p, p[0]), np.append(v, v[0])
    area = 0.5 * float(np.sum(closed_v[:-1] * closed_p[1:] - closed_v[1:] * closed_p[:-1]))
    return float(systole.min()), float(p.max()), area, float(slope[rise]), float(slope[fall])


def _ramp(solution: Solution, start_s: FloatArray, edv_ml: FloatArray) -> tuple[bool, ...]:
    occlusion = solution.conditions.occlusion
    if occlusion is None:
        return (False,) * start_s.size
    last = int(edv_ml.argmin())
    return tuple(at >= occlusion.onset_s and beat <= last for beat, at in enumerate(start_s.tolist()))
