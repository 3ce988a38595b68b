"""The indices of an acquisition: as they truly are, and as its signals say when everything declared is believed.

Both look at the heart's true instants, so that the difference between two readings is what was done to the signals and declarations,
and not how well anybody finds beats.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping

import numpy as np
from scipy.signal import savgol_filter

from flows.sources.simulated.acquisition import Acquisition, RunPlan
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.declared import Believed, believed
from flows.sources.simulated.recorded import kind_of
from flows.sources.simulated.truth import BeatTruth, stroke_work_line

Indices = dict[tuple[str, str], float]
"""(stage, index) -> value, in the contract's units."""

STEADY = ("HR", "EDV", "ESV", "SV", "EF", "EDP", "ESP", "Pmax", "Ea", "SW", "dPdt_max", "dPdt_min")
SLOPES = ("Ees", "V0", "PRSW", "Ees_Ea")
WINDOW_S = 0.024
"""A cubic over this time smooths both channels and gives dP/dt: Savitzky and Golay 1964 (Anal Chem 36:1627, from memory)."""

ES_ROUNDS = 6


def true_indices(acquisition: Acquisition, chosen: Mapping[str, FloatArray] | None = None) -> Indices:
    """Return what is true of the patient's heart, stage by stage.

    Steady indices are medians over the sound beats of the stage's steady runs; Ees and V0 are the heart's; PRSW is the line of true
    stroke work over the beats of each ramp, those ``chosen`` (instants inside beats by run) where given, and the mean over runs.
    """
    found: Indices = {}
    for stage, plans in _stages(acquisition).items():
        rest = [acquisition.truth[plan.run].beats for plan in plans if kind_of(plan.conditions) == "steady"]
        if rest:
            found |= {(stage, index): value for index, value in _true_steady(rest).items()}
        ramps = [plan.run for plan in plans if kind_of(plan.conditions) == "preload-reduction"]
        if ramps:
            truths = [acquisition.truth[run] for run in ramps]
            ees, v0 = (float(np.mean(values)) for values in ([t.ees_mmhg_per_ml for t in truths], [t.v0_ml for t in truths]))
            work = [recruitable_work_mmhg(acquisition, run, None if chosen is None else chosen.get(run)) for run in ramps]
            found |= {(stage, "Ees"): ees, (stage, "V0"): v0, (stage, "PRSW"): float(np.mean(work))}
            if rest:
                found[stage, "Ees_Ea"] = ees / found[stage, "Ea"]
    return found


def recruitable_work_mmhg(acquisition: Acquisition, run: str, instants_s: Iterable[float] | None = None) -> float:
    """Return the true PRSW of a run over the beats that hold these instants, or else over its ramp; NaN from fewer than three."""
    beats = acquisition.truth[run].beats
    if instants_s is None:
        return stroke_work_line(beats, beats.sound_ramp)[0]
    at_s = np.asarray(list(instants_s))
    held = (beats.start_s[:, None] <= at_s) & (at_s < beats.end_s[:, None])
    return stroke_work_line(beats, np.asarray(held.any(axis=1), dtype=np.bool_))[0]


def read_indices(acquisition: Acquisition, pressure_late_s: float = 0.0) -> Indices:
    """Return what the signals say, stage by stage, to a reader who knows every beat and believes every declaration.

    ``pressure_late_s`` is how late the pressure truly is where nothing says so: end-diastole is looked for in it, and goes with it.
    An index that cannot be read is NaN.
    """
    found: Indices = {}
    with np.errstate(all="ignore"):
        for stage, plans in _stages(acquisition).items():
            of_kind = {
                kind: [_ReadRun(acquisition, plan.run, pressure_late_s) for plan in plans if _is_read_as(acquisition, plan, kind)]
                for kind in ("steady", "preload-reduction")
            }
            lines = [run.end_systolic_line() for run in of_kind["preload-reduction"]]
            v0 = _mean([line[1] for line in lines]) if lines else 0.0
            values = _steady(of_kind["steady"], v0 if np.isfinite(v0) else 0.0) if of_kind["steady"] else {}
            if lines:
                values |= {"Ees": _mean([line[0] for line in lines]), "V0": v0}
                values["PRSW"] = _mean([run.stroke_work_slope() for run in of_kind["preload-reduction"]])
            if "Ees" in values and "Ea" in values:
                values["Ees_Ea"] = values["Ees"] / values["Ea"]
            found |= {(stage, index): value for index, value in values.items()}
    return found


def read_beats(acquisition: Acquisition, pressure_late_s: float = 0.0) -> dict[str, dict[str, FloatArray]]:
    """Return what the signals say of every beat by run and index, arrays of shape (n_beats,), to a reader as in `read_indices`.

    End-systole is looked for from the heart's true V0; a beat that cannot be read is NaN.
    """
    with np.errstate(all="ignore"):
        return {
            plan.run: _ReadRun(acquisition, plan.run, pressure_late_s).beat_values(
                (plan.heart or acquisition.recipe.heart).v0_ml, only_sound=False
            )
            for plan in acquisition.recipe.runs
        }


def _stages(acquisition: Acquisition) -> dict[str, list[RunPlan]]:
    stages: dict[str, list[RunPlan]] = {}
    for plan in acquisition.recipe.runs:
        stages.setdefault(plan.stage, []).append(plan)
    return stages


def _declared_kind(acquisition: Acquisition, plan: RunPlan) -> str:
    return next((str(run["kind"]) for run in acquisition.manifest["runs"] if run["run"] == plan.run), kind_of(plan.conditions))


def _is_read_as(acquisition: Acquisition, plan: RunPlan, kind: str) -> bool:
    """Return whether a run is declared of a kind and its pressure under a column that its file holds."""
    declared = next((run for run in acquisition.manifest["runs"] if run["run"] == plan.run), None)
    is_there = declared is None or declared["channels"]["pressure"]["column"] in acquisition.columns[plan.run]
    return is_there and _declared_kind(acquisition, plan) == kind


def _mean(values: list[float]) -> float:
    known = [value for value in values if np.isfinite(value)]
    return float(np.mean(known)) if known else float("nan")


def _median(values: Iterable[FloatArray]) -> float:
    pooled = np.concatenate(list(values))
    pooled = pooled[np.isfinite(pooled)]
    return float(np.median(pooled)) if pooled.size else float("nan")


def _true_steady(runs: list[BeatTruth]) -> dict[str, float]:
    per_beat: dict[str, Callable[[BeatTruth], FloatArray]] = {
        "HR": lambda beats: 60.0 / beats.rr_s,
        "EDV": lambda beats: beats.edv_ml,
        "ESV": lambda beats: beats.esv_ml,
        "SV": lambda beats: beats.sv_ml,
        "EF": lambda beats: beats.sv_ml / beats.edv_ml,
        "EDP": lambda beats: beats.edp_mmhg,
        "ESP": lambda beats: beats.esp_mmhg,
        "Pmax": lambda beats: beats.pmax_mmhg,
        "Ea": lambda beats: beats.ea_mmhg_per_ml,
        "SW": lambda beats: beats.sw_mmhg_ml,
        "dPdt_max": lambda beats: beats.dpdt_max_mmhg_per_s,
        "dPdt_min": lambda beats: beats.dpdt_min_mmhg_per_s,
    }
    return {index: _median(value(beats)[beats.sound] for beats in runs) for index, value in per_beat.items()}


def _steady(runs: list[_ReadRun], v0_ml: float) -> dict[str, float]:
    tables = [run.beat_values(v0_ml) for run in runs]
    return {index: _median(table[index] for table in tables) for index in STEADY}


class _ReadRun:
    """One run as believed, cut at the true instants of its sound beats."""

    def __init__(self, acquisition: Acquisition, run: str, late_s: float) -> None:
        self.signals: Believed = believed(acquisition, run)
        self.beats = acquisition.truth[run].beats
        signals = self.signals
        step_s = float(np.median(np.diff(signals.true_s)))
        points = max(5, 2 * round(0.5 * WINDOW_S / step_s) + 1)
        # The clock may run wrong: a slope in mmHg/s is one of the declared second.
        self.pace = step_s / float(np.median(np.diff(signals.clock_s)))
        self.pressure: FloatArray = savgol_filter(signals.pressure_mmhg, points, 3, mode="nearest")
        self.rate: FloatArray = savgol_filter(signals.pressure_mmhg, points, 3, deriv=1, delta=step_s, mode="nearest") * self.pace
        self.volume: FloatArray = savgol_filter(signals.volume_ml, points, 3, mode="nearest")
        self.starts, self.ends = self.beats.start_s + late_s, self.beats.end_s + late_s
        low, high = np.searchsorted(signals.true_s, (self.starts, self.ends))
        self.spans = list(zip(low.tolist(), high.tolist(), strict=True))
        ramp = self.beats.sound_ramp
        self.ramp = ramp if ramp.any() else self.beats.sound

    def end_systoles(self, v0_ml: float) -> tuple[FloatArray, FloatArray]:
        """Return pressure and volume at the largest P/(V - V0) of each beat, NaN for a beat with samples missing."""
        pressure, volume = np.full(len(self.spans), np.nan), np.full(len(self.spans), np.nan)
        for beat, (low, high) in enumerate(self.spans):
            above = self.volume[low:high] - v0_ml
            elastance = np.where(above > 0.0, self.pressure[low:high] / above, -np.inf)
            if elastance.size and not np.isnan(elastance).any():
                at = low + int(elastance.argmax())
                pressure[beat], volume[beat] = self.pressure[at], self.volume[at]
        return pressure, volume

    def end_systolic_line(self) -> tuple[float, float]:
        """Return slope and volume-axis intercept of the ramp's end-systolic points, V0 found by turns (Kono 1984, from memory)."""
        line = (float("nan"), 0.0)
        for _ in range(ES_ROUNDS):
            pressure, volume = self.end_systoles(line[1])
            line = _line(volume[self.ramp], pressure[self.ramp])
            if not np.isfinite(line[1]):
                break
        return line

    def stroke_work_slope(self) -> float:
        values = self.beat_values(0.0, only_sound=False)
        return _line(values["EDV"][self.ramp], values["SW"][self.ramp])[0]

    def beat_values(self, v0_ml: float, *, only_sound: bool = True) -> dict[str, FloatArray]:
        """Return each steady index beat by beat."""
        signals, beats = self.signals, self.beats
        step_s = float(signals.true_s[1] - signals.true_s[0])
        # Up to the end of relaxation: a step of the volume while the heart fills is no end of systole.
        systole = np.round((beats.end_systole_s - beats.start_s + 0.12) / step_s).astype(np.int64).tolist()
        count = len(self.spans)
        esv, pmax, work, rise, fall = (np.full(count, np.nan) for _ in range(5))
        for beat, (low, high) in enumerate(self.spans):
            if high - low < 8:
                continue
            pressure, volume, rate = self.pressure[low:high], self.volume[low:high], self.rate[low:high]
            esv[beat], pmax[beat] = volume[: max(2, systole[beat])].min(), pressure.max()
            turned_p, turned_v = np.roll(pressure, -1), np.roll(volume, -1)
            work[beat] = 0.5 * float(np.sum(volume * turned_p - turned_v * pressure))
            rise[beat], fall[beat] = rate.max(), rate.min()
        esp, _ = self.end_systoles(v0_ml)
        edv, edp = (np.interp(self.starts, signals.true_s, channel) for channel in (self.volume, self.pressure))
        next_r_s, r_s = (np.interp(at_s, signals.true_s, signals.clock_s) for at_s in (beats.r_s + beats.rr_s, beats.r_s))
        stroke = edv - esv
        values = {"HR": 60.0 / (next_r_s - r_s), "EDV": edv, "ESV": esv, "SV": stroke, "EF": stroke / edv, "EDP": edp, "ESP": esp}
        values |= {"Pmax": pmax, "Ea": esp / stroke, "SW": work, "dPdt_max": rise, "dPdt_min": fall}
        return {index: value[self.beats.sound] if only_sound else value for index, value in values.items()}


def _line(volume_ml: FloatArray, height: FloatArray) -> tuple[float, float]:
    known = np.isfinite(volume_ml) & np.isfinite(height)
    if int(known.sum()) < 3 or np.ptp(volume_ml[known]) == 0.0:
        return float("nan"), float("nan")
    slope, intercept = np.polyfit(volume_ml[known], height[known], 1)
    return float(slope), float(-intercept / slope) if slope else float("nan")
