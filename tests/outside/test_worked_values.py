"""Worked values: what a published method gives for numbers anybody can redo.

One row a value. To add one, append a `Worked`: the quantity, how this program computes it, what is expected, within what, whose method
it is, and how the method or value came here: ``read`` in the source named, from ``memory`` of it, or ``computed`` apart from this
program (by hand, or with numpy and scipy alone). A value that is only what the program itself once gave does not belong here.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest

from metrics.indices import ALL
from metrics.indices.card import StageBeats
from metrics.indices.end_systole import end_systole
from metrics.signals.calibrate import calibrated_pressure_mmhg, calibrated_volume_ml
from metrics.signals.facts import PressureCalibration, VolumeCalibration, ZeroReading
from metrics.signals.filters import slope_per_s
from metrics.signals.landmarks import loop_areas
from metrics.signals.r_waves import running_peak, thresholds
from metrics.stats.lines import deming, interval_of, least_squares
from metrics.stats.medians import median_interval
from tests.metrics.made_beats import boxes, made_beats, made_signals, measured_run

MARKS = ("read", "memory", "computed")


@dataclass(frozen=True)
class Worked:
    """One worked value; ``by`` returns what the program makes of it."""

    quantity: str
    by: Callable[[], float]
    expected: float
    within: float
    source: str
    method: str = "memory"
    value: str = "computed"


def volume(recorded, unit="mL", **calibration):
    return float(calibrated_volume_ml(np.array([recorded]), unit, VolumeCalibration(**calibration))[0])


def pressure(recorded, at_s=0.0, **calibration):
    return float(calibrated_pressure_mmhg(np.array([recorded]), np.array([at_s]), PressureCalibration(**calibration))[0])


def ellipse(count):
    turn = 2.0 * np.pi * np.arange(count) / count
    return float(loop_areas(60.0 + 50.0 * np.sin(turn), 100.0 + 30.0 * np.cos(turn), np.array([0]), np.array([count - 1]))[0])


def chosen_volume(v0_ml):
    signals = made_signals([98.0, 100.0, 96.0], [52.0, 50.0, 49.0])
    beats = made_beats(1, dpdt_max_at=[0], dpdt_min_at=[2], edv_ml=[110.0], esv_ml=[49.0])
    return float(end_systole(signals, beats, v0_ml).volume_ml[0])


def index(name):
    """An index of the rectangle Ees 2.5, V0 10, Ea 2, EDV 130 and of a ramp of such rectangles."""
    ramp = boxes(np.linspace(150.0, 110.0, 9))
    stage = StageBeats(steady=(boxes([130.0] * 5, run="rest"),), preload=(ramp,), v0_ml=10.0)
    return next(card for card in ALL if card.name == name).compute(stage).value


def recruitable_work():
    run = measured_run(edv_ml=np.arange(140.0, 90.0, -10.0), sw_mmhg_ml=np.arange(7700.0, 4800.0, -700.0))
    return next(card for card in ALL if card.name == "PRSW").compute(StageBeats(preload=(run,))).value


VOLUME_ML = np.array([62.0, 58.0, 55.0, 50.0, 46.0, 43.0, 39.0])
PRESSURE_MMHG = np.array([118.0, 112.0, 101.0, 93.0, 80.0, 74.0, 62.0])
PEARSON_X = np.array([0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4])
PEARSON_Y = np.array([5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5])


def espvr(part):
    slope, constant, var_slope, var_constant, covariance = least_squares(VOLUME_ML, PRESSURE_MMHG)
    line = interval_of(slope, constant, np.array([[var_slope, covariance], [covariance, var_constant]]), VOLUME_ML.size)
    return getattr(line, part)


def steepest_sine():
    time_s = np.arange(1000) / 250.0
    return float(slope_per_s(60.0 + 60.0 * np.sin(2.0 * np.pi * 1.25 * time_s), 250.0).max())


BAAN = "Baan 1984, Circulation 70:812"
PRACTICE = "common practice"
PAN = "Pan and Tompkins 1985, IEEE Trans Biomed Eng 32:230"
SUGA = "Suga and Sagawa 1974, Circ Res 35:117"
SUNAGAWA = "Sunagawa 1985, Circ Res 56:586"
KONO = "Kono 1984, Circulation 70:1057"
DEMING = "Deming 1943, Statistical Adjustment of Data"
SALINE = {"alpha": 0.8, "alpha_vc_ml": 45.0, "electrode_spacing_cm": 1.0, "blood_resistivity_ohm_cm": 150.0}
DRIFT = {"zeros": (ZeroReading(0.5, 0.0), ZeroReading(3.5, 3600.0))}

TABLE = (
    Worked("conductance 0.90 S to volume, mL", lambda: volume(900.0, "mS", **SALINE), 112.5, 1e-9, BAAN, "read"),
    Worked(
        "raw 180 mL by two reference volumes, mL",
        lambda: volume(180.0, calibrated=False, alpha=0.8, alpha_vc_ml=68.0),
        140.0,
        1e-9,
        PRACTICE,
    ),
    Worked(
        "raw 120 mL by two reference volumes, mL",
        lambda: volume(120.0, calibrated=False, alpha=0.8, alpha_vc_ml=68.0),
        65.0,
        1e-9,
        PRACTICE,
    ),
    Worked("two-point pressure, mmHg", lambda: pressure(0.75, points=((0.0, 0.1), (100.0, 1.1))), 65.0, 1e-9, PRACTICE),
    Worked("pressure less a drifting zero, mmHg", lambda: pressure(12.0, 1200.0, **DRIFT), 10.5, 1e-9, PRACTICE),
    Worked("first R-wave threshold", lambda: thresholds(1.0, 0.2)[0], 0.4, 1e-12, PAN, "read"),
    Worked("running signal peak", lambda: running_peak(1.0, 1.6), 1.075, 1e-12, PAN, "read"),
    Worked("SV of the rectangle, mL", lambda: index("SV"), 66.6667, 5e-5, SUNAGAWA, "read"),
    Worked("ESV of the rectangle, mL", lambda: index("ESV"), 63.3333, 5e-5, SUNAGAWA, "read"),
    Worked("ESP of the rectangle, mmHg", lambda: index("ESP"), 133.3333, 5e-5, SUNAGAWA, "read"),
    Worked("EF of the rectangle", lambda: index("EF"), 0.512821, 5e-7, PRACTICE),
    Worked("SW of the rectangle, mmHg mL", lambda: index("SW"), 8888.889, 5e-4, SUGA),
    Worked("Ea of the rectangle, mmHg/mL", lambda: index("Ea"), 2.0, 1e-9, "Sunagawa 1983, Am J Physiol 245:H773"),
    Worked("Ees of a ramp of rectangles, mmHg/mL", lambda: index("Ees"), 2.5, 1e-9, SUGA),
    Worked("V0 of a ramp of rectangles, mL", lambda: index("V0"), 10.0, 1e-6, SUGA),
    Worked("Ees/Ea of the rectangle", lambda: index("Ees_Ea"), 1.25, 1e-9, SUNAGAWA, "read"),
    Worked("ellipse of 720 corners, mmHg mL", lambda: ellipse(720), 4712.3292, 5e-5, "geometry"),
    Worked("ellipse of 8 corners, mmHg mL", lambda: ellipse(8), 4242.6407, 5e-5, "geometry"),
    *(
        Worked(f"end-systolic volume for V0 {v0_ml:g} mL", lambda v0_ml=v0_ml: chosen_volume(v0_ml), expected, 1e-12, KONO)
        for v0_ml, expected in ((0.0, 50.0), (10.0, 50.0), (20.0, 50.0), (30.0, 49.0))
    ),
    Worked("end-systolic line, least squares, mmHg/mL", lambda: espvr("slope"), 2.4483584, 5e-8, PRACTICE),
    Worked("its V0, mL", lambda: espvr("axis_intercept"), 13.085766, 5e-7, PRACTICE),
    Worked("its standard error, mmHg/mL", lambda: espvr("slope_se"), 0.0972263, 5e-8, PRACTICE),
    Worked("its lower bound, mmHg/mL", lambda: espvr("slope_low"), 2.198430, 5e-7, PRACTICE),
    Worked("its upper bound, mmHg/mL", lambda: espvr("slope_high"), 2.698287, 5e-7, PRACTICE),
    Worked("lower bound of V0, mL", lambda: espvr("intercept_low"), 8.7597, 5e-5, "Fieller 1954, J R Stat Soc B 16:175"),
    Worked("upper bound of V0, mL", lambda: espvr("intercept_high"), 16.6253, 5e-5, "Fieller 1954, J R Stat Soc B 16:175"),
    Worked("Fieller's g", lambda: espvr("fieller_g"), 0.01042, 5e-6, "Fieller 1954, J R Stat Soc B 16:175"),
    *(
        Worked(
            f"end-systolic line, noise ratio {ratio:g}, mmHg/mL",
            lambda ratio=ratio: deming(VOLUME_ML, PRESSURE_MMHG, ratio)[0],
            expected,
            5e-8,
            DEMING,
        )
        for ratio, expected in ((0.25, 2.4668958), (1.0, 2.4649190), (4.0, 2.4599588))
    ),
    Worked(
        "slope of Pearson's points",
        lambda: deming(PEARSON_X, PEARSON_Y, 1.0)[0],
        -0.5455612,
        5e-8,
        "Pearson 1901, Philos Mag (6) 2:559",
        "memory",
        "memory",
    ),
    Worked("PRSW of five works, mmHg", recruitable_work, 70.0, 1e-9, "Glower 1985, Circulation 71:994"),
    Worked(
        "steepest slope of 60 + 60 sin(2 pi 1.25 t), mmHg/s", steepest_sine, 471.2389, 1e-3, "Savitzky and Golay 1964, Anal Chem 36:1627"
    ),
    Worked(
        "lower bound of the median of 1 to 20",
        lambda: median_interval(np.arange(1.0, 21.0))[1],
        6.0,
        0.0,
        "Conover 1999, Practical Nonparametric Statistics",
    ),
)


@pytest.mark.parametrize("worked", TABLE, ids=lambda worked: worked.quantity)
def test_worked_value(worked):
    assert worked.by() == pytest.approx(worked.expected, rel=0.0, abs=worked.within)


def test_every_row_says_where_it_comes_from():
    for worked in TABLE:
        assert worked.source
        assert worked.method in MARKS
        assert worked.value in MARKS
        assert worked.within <= 1e-3 * abs(worked.expected)
    assert len({worked.quantity for worked in TABLE}) == len(TABLE)
