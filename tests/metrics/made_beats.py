"""Beats made up by hand: no signal behind them, or the simplest one."""

import numpy as np

from metrics.indices.card import RunBeats
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals

SLOW_HZ = 25.0
"""So slow that no smoothing reaches from one sample to the next: what is put in is what is read."""


def made_beats(count, *, rr_s=0.8, rate_hz=250.0, **columns):
    """Beats at even steps, or those of ``rr_s`` where it is a list; every other column is NaN unless given."""
    lengths = np.full(count, rr_s) if np.isscalar(rr_s) else np.asarray(rr_s, dtype=np.float64)
    edges = np.round(np.concatenate([[0.0], np.cumsum(np.nan_to_num(lengths, nan=0.8))]) * rate_hz).astype(np.int64)
    places = {name: np.full(count, -1, dtype=np.int64) for name in ("dpdt_max_at", "dpdt_min_at", "esv_at", "r_at")}
    values = {
        name: np.full(count, np.nan)
        for name in ("edv_ml", "esv_ml", "edp_mmhg", "pmax_mmhg", "dpdt_max_mmhg_per_s", "dpdt_min_mmhg_per_s", "sw_mmhg_ml")
    }
    given = {name: np.asarray(column) for name, column in columns.items()}
    return Beats("pressure", edges[:-1], edges[1:], **(places | {"rr_s": lengths} | values | given))


def made_signals(pressure, volume, *, pressure_noise=0.0, volume_noise=0.0, rate_hz=SLOW_HZ):
    """Signals that are what they are given."""
    pressure, volume = (np.asarray(samples, dtype=np.float64) for samples in (pressure, volume))
    nothing = np.zeros(pressure.size)
    return Signals(rate_hz, pressure, volume, nothing, nothing.astype(bool), pressure_noise, volume_noise, {})


def boxes(edvs_ml, *, ees=2.5, v0_ml=10.0, ea=2.0, edp_mmhg=0.0, run="ramp", **noises):
    """A run of rectangular loops, one for each end-diastolic volume: where the end-systolic and the arterial line cross.

    Each beat has four samples: end-diastole, the aortic valve's opening, end-systole, and the end of relaxation.
    """
    edv = np.asarray(edvs_ml, dtype=np.float64)
    sv = ees * (edv - v0_ml) / (ees + ea)
    esv, esp = edv - sv, ea * sv
    low = np.full(edv.size, edp_mmhg)
    pressure = np.append(np.column_stack([low, esp, esp, low]).ravel(), edp_mmhg)
    volume = np.append(np.column_stack([edv, edv, esv, esv]).ravel(), edv[-1])
    start = 4 * np.arange(edv.size)
    beats = made_beats(
        edv.size,
        rr_s=4.0 / SLOW_HZ,
        rate_hz=SLOW_HZ,
        dpdt_max_at=start + 1,
        dpdt_min_at=start + 2,
        esv_at=start + 2,
        edv_ml=edv,
        esv_ml=esv,
        edp_mmhg=low,
        pmax_mmhg=esp,
        dpdt_max_mmhg_per_s=10.0 * esp,
        dpdt_min_mmhg_per_s=-9.0 * esp,
        sw_mmhg_ml=(esp - edp_mmhg) * sv,
    )
    return RunBeats(run, made_signals(pressure, volume, **noises), beats, np.ones(edv.size, dtype=bool), "caval-balloon")


def cosine_run(count=6, *, amplitude=200.0, edp=10.0, period_s=0.4, esp=110.0, edv=120.0, sv=70.0, rate_hz=250.0):
    """Beats whose isovolumic parts are one exact cosine, cut off at ``esp`` while the ventricle ejects."""
    contraction, rising, falling = (round(share * period_s * rate_hz) for share in (1.0, 0.15, 0.825))
    length = 2 * contraction
    pressure, volume = np.full(length, edp), np.full(length, edv)
    pressure[: contraction + 1] = edp + 0.5 * amplitude * (1.0 - np.cos(2.0 * np.pi * np.arange(contraction + 1) / rate_hz / period_s))
    pressure[rising + 1 : falling] = esp
    volume[falling : contraction + 20] = edv - sv
    volume[rising + 1 : falling] = np.linspace(edv, edv - sv, falling - rising - 1)
    start = length * np.arange(count)
    columns = {"edv_ml": edv, "esv_ml": edv - sv, "edp_mmhg": edp, "pmax_mmhg": esp, "sw_mmhg_ml": esp * sv}
    beats = made_beats(
        count,
        rr_s=length / rate_hz,
        rate_hz=rate_hz,
        dpdt_max_at=start + rising,
        dpdt_min_at=start + falling,
        esv_at=start + falling,
        **{name: np.full(count, value) for name, value in columns.items()},
    )
    signals = made_signals(np.append(np.tile(pressure, count), edp), np.append(np.tile(volume, count), edv), rate_hz=rate_hz)
    return RunBeats("rest", signals, beats, np.ones(count, dtype=bool))


def measured_run(run="ramp", manoeuvre="caval-balloon", **columns):
    """A run known by its beats' columns alone, as many beats as the columns are long."""
    count = len(next(iter(columns.values())))
    beats = made_beats(count, **columns)
    flat = np.zeros(int(beats.end[-1]) + 1)
    return RunBeats(run, made_signals(flat, flat), beats, np.ones(count, dtype=bool), manoeuvre)
