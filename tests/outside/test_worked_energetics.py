"""Worked values of energetics, ejection power, curved end-systolic relations and what goes with body size."""

from dataclasses import replace

import numpy as np
import pytest

from metrics.indices import ALL
from metrics.indices.card import RunBeats, StageBeats
from metrics.indices.coupling_prediction import crossing
from metrics.indices.end_systolic_curve import relation_through
from metrics.indices.power import WATT
from tests.metrics.made_beats import boxes, made_beats, made_signals, measured_run
from tests.outside.test_worked_values import MARKS, PRESSURE_MMHG, VOLUME_ML, Worked

RATE_HZ = 250.0


def rectangle(name, estimator=None, edp_mmhg=0.0):
    """An index of the rectangle Ees 2.5, V0 10, Ea 2, EDV 130, in a body of 2 m2, and of a ramp of such rectangles."""
    rest = boxes([130.0] * 5, run="rest", edp_mmhg=edp_mmhg)
    stage = StageBeats(steady=(rest,), preload=(boxes(np.linspace(150.0, 110.0, 9)),), v0_ml=10.0, bsa_m2=2.0)
    card = next(card for card in ALL if card.name == name and (card.primary if estimator is None else card.estimator == estimator))
    return card.compute(stage).value


def work_intercept():
    run = measured_run(edv_ml=np.arange(140.0, 90.0, -10.0), sw_mmhg_ml=np.arange(7700.0, 4800.0, -700.0))
    return next(card for card in ALL if card.name == "Vw").compute(StageBeats(preload=(run,))).value


def even_ejection(name):
    """An index of beats that lose 400 mL/s at 120 mmHg throughout, from what is called an EDV of 130 mL."""
    beats = made_beats(3, rr_s=0.4, rate_hz=RATE_HZ, edv_ml=[130.0] * 3)
    beats = replace(beats, dpdt_min_at=beats.start + 70)
    signals = made_signals(np.full(301, 120.0), 1000.0 - 400.0 / RATE_HZ * np.arange(301), rate_hz=RATE_HZ)
    run = RunBeats("rest", signals, beats, np.ones(3, dtype=bool))
    return next(card for card in ALL if card.name == name).compute(StageBeats(steady=(run,))).value


def kass():
    volume_ml = np.linspace(25.0, 55.0, 8)
    return relation_through(volume_ml, -0.02 * (volume_ml - 10.0) ** 2 + 3.0 * (volume_ml - 10.0), "quadratic")


def parabola_coefficient(power):
    """The parabola through the seven worked points as powers of the volume itself."""
    relation = relation_through(VOLUME_ML, PRESSURE_MMHG, "quadratic")
    about = np.polynomial.Polynomial(relation.curve.coefficients)
    return float(about(np.polynomial.Polynomial([-relation.centre_ml, 1.0])).coef[power])


def logarithm_coefficient(power):
    relation = relation_through(VOLUME_ML, PRESSURE_MMHG, "logarithmic")
    constant, factor = relation.curve.coefficients
    return float(factor if power else constant - factor * np.log(relation.centre_ml))


SUGA = "Suga 1982, Jpn Heart J 23:749"
SUNAGAWA = "Sunagawa 1985, Circ Res 56:586"
SHARIR = "Sharir 1994, Circulation 89:2045"
KASS = "Kass 1989, Circulation 79:167"
NODA = "Noda 1993, Am J Physiol 265:H910"
PRACTICE = "common practice"

TABLE = (
    Worked("PE of the rectangle, mmHg mL", lambda: rectangle("PE"), 3555.556, 5e-4, SUGA, "read"),
    Worked("PVA of the rectangle, mmHg mL", lambda: rectangle("PVA"), 12444.444, 5e-4, SUGA, "read"),
    Worked("efficiency of the rectangle", lambda: rectangle("efficiency"), 0.714286, 5e-7, SUGA, "read"),
    Worked("SW of the rectangle as a box, mmHg mL", lambda: rectangle("SW", "box"), 8888.889, 5e-4, PRACTICE),
    Worked("SW as a box less filling at 8 mmHg, mmHg mL", lambda: rectangle("SW", "box-less-filling", 8.0), 8355.556, 5e-4, PRACTICE),
    Worked("SW of the rectangle, J", lambda: WATT * rectangle("SW"), 1.185088, 5e-6, PRACTICE),
    Worked("V100 of a ramp of rectangles, mL", lambda: rectangle("V100"), 50.0, 1e-6, PRACTICE),
    Worked("V120 of a ramp of rectangles, mL", lambda: rectangle("V120"), 58.0, 1e-6, PRACTICE),
    Worked("SV foretold by coupling, mL", lambda: crossing(2.5, 10.0, 2.0, 130.0)[0], 66.6667, 5e-5, SUNAGAWA, "read"),
    Worked("ESP foretold by coupling, mmHg", lambda: rectangle("ESP", "coupling-predicted"), 133.3333, 5e-5, SUNAGAWA, "read"),
    Worked("CO of the rectangle at 375 /min, L/min", lambda: rectangle("CO"), 25.0, 1e-9, PRACTICE),
    Worked("SVI of the rectangle in 2 m2, mL/m2", lambda: rectangle("SVI"), 33.3333, 5e-5, PRACTICE),
    Worked("EaI of the rectangle in 2 m2, mmHg m2/mL", lambda: rectangle("EaI"), 4.0, 1e-9, PRACTICE),
    Worked("Vw of five works, mL", work_intercept, 30.0, 1e-9, "Glower 1985, Circulation 71:994"),
    Worked("400 mL/s against 120 mmHg, W", lambda: even_ejection("PWRmax"), 6.399475, 5e-5, SHARIR, "read"),
    Worked("400 mL/s against 120 mmHg from 130 mL, mW/mL2", lambda: even_ejection("PWRmax_EDV2"), 0.378667, 5e-6, SHARIR, "read"),
    Worked("slope of a Kass parabola at 72 mmHg, mmHg/mL", lambda: kass().reading(72.0).slope, 1.8, 1e-9, KASS, "read"),
    Worked("slope of a Kass parabola at its V0', mmHg/mL", lambda: kass().reading(0.0).slope, 3.0, 1e-9, KASS, "read"),
    Worked("V0' of a Kass parabola, mL", lambda: kass().v0_ml, 10.0, 1e-9, KASS, "read"),
    *(
        Worked(f"end-systolic parabola, power {power} of volume", lambda power=power: parabola_coefficient(power), value, within, PRACTICE)
        for power, value, within in ((2, -0.01808817, 5e-9), (1, 4.2765502, 5e-8), (0, -77.153411, 5e-7))
    ),
    Worked(
        "b of the end-systolic parabola, mmHg/mL",
        lambda: relation_through(VOLUME_ML, PRESSURE_MMHG, "quadratic").reading(0.0).slope,
        3.5646355,
        5e-8,
        KASS,
        "read",
    ),
    Worked(
        "V0' of the end-systolic parabola, mL",
        lambda: relation_through(VOLUME_ML, PRESSURE_MMHG, "quadratic").v0_ml,
        19.679016,
        5e-7,
        KASS,
        "read",
    ),
    Worked("a of the end-systolic logarithm, mmHg", lambda: logarithm_coefficient(0), -385.16216, 5e-6, NODA),
    Worked("b of the end-systolic logarithm, mmHg", lambda: logarithm_coefficient(1), 121.93326, 5e-6, NODA),
    Worked(
        "V0 of the end-systolic logarithm, mL",
        lambda: relation_through(VOLUME_ML, PRESSURE_MMHG, "logarithmic").v0_ml,
        float(np.exp(385.16216 / 121.93326)),
        5e-6,
        NODA,
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


def test_efficiency_of_a_rectangle_on_the_volume_axis_depends_on_coupling_alone():
    assert rectangle("efficiency") == pytest.approx(1.0 / (1.0 + 1.0 / (2.0 * rectangle("Ees_Ea"))))
