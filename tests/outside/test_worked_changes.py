"""Worked values of single-beat elastance, of changes between stages, and of certified fits, rows as in `test_worked_values`."""

import numpy as np
import pytest

from metrics.indices import single_beat
from metrics.indices.card import StageBeats
from metrics.indices.changes import BOX, CAUSES
from metrics.stats.lines import deming, least_squares
from metrics.stats.shapley import shapley_parts
from metrics.stats.trends import trend_per_s
from tests.metrics.made_beats import SLOW_HZ, cosine_run
from tests.outside.test_certified_curves import SETS, fitted
from tests.outside.test_certified_line import CERTIFIED, X, Y
from tests.outside.test_worked_values import MARKS, PEARSON_X, PEARSON_Y, Worked

TAKEUCHI = "Takeuchi 1991, Circulation 83:202"
BRIMIOULLE = "Brimioulle 2003, Am J Physiol 284:H1625"
SHAPLEY = "Shapley 1953, Contributions to the Theory of Games 2:307"
SEN = "Sen 1968, J Am Stat Assoc 63:1379"
NIST = "NIST Statistical Reference Datasets"
PEARSON = "Pearson 1901, Philos Mag (6) 2:559"
RISING = (1.2, 1.0, 1.5, 1.4, 1.9, 1.8, 2.2, 2.0, 2.5, 2.4)

BEFORE, AFTER = np.array([2.5, 10.0, 2.0, 130.0]), np.array([1.5, 10.0, 2.4, 150.0])
SPLIT = {
    "SV": ("mL", (-16.414908, -5.802663, 9.397058), -12.820513),
    "ESP": ("mmHg", (-36.178848, 11.576254, 20.500029), -4.102564),
    "SW": ("mmHg mL", (-4425.568842, -49.892041, 2545.151876), -1930.309007),
}


def left():
    """Beats of a slow heart, so that no smoothing reaches its end-systole: A 200, EDP 10, ESP 110 mmHg, SV 70 mL."""
    return StageBeats(steady=(cosine_run(period_s=4.0, rate_hz=SLOW_HZ),))


def right():
    """The same with Pmax 90 and ESP 30 mmHg."""
    return StageBeats(steady=(cosine_run(amplitude=90.0, edp=0.0, esp=30.0, period_s=4.0, rate_hz=SLOW_HZ),), chamber="RV")


def part(index, cause):
    return float(shapley_parts(BOX[index], BEFORE, AFTER)[CAUSES.index(cause)])


def norris(name):
    slope, constant, var_slope, var_constant, _ = least_squares(X, Y)
    residual_sd = float(np.sqrt(np.sum((Y - constant - slope * X) ** 2) / 34.0))
    every = {"slope": slope, "constant": constant, "slope_sd": np.sqrt(var_slope), "constant_sd": np.sqrt(var_constant)}
    return float((every | {"residual_sd": residual_sd})[name])


TABLE = (
    Worked("isovolumic source of a cosine, mmHg", lambda: float(single_beat.source_pressure(left().steady[0])[0]), 210.0, 1e-5, TAKEUCHI),
    Worked("its single-beat Ees, mmHg/mL", lambda: single_beat.elastance(left()).value, 1.428571, 1e-6, TAKEUCHI),
    Worked("single-beat Ees, right ventricle, mmHg/mL", lambda: single_beat.elastance(right()).value, 0.857143, 1e-6, BRIMIOULLE),
    Worked("single-beat Ees/Ea, right ventricle", lambda: single_beat.coupling(right()).value, 2.0, 1e-6, BRIMIOULLE),
    *(
        Worked(f"change of {index} put down to {cause}, {unit}", lambda index=index, cause=cause: part(index, cause), value, 1e-6, SHAPLEY)
        for index, (unit, parts, _) in SPLIT.items()
        for cause, value in zip(("Ees", "Ea", "EDV"), parts, strict=True)
    ),
    *(
        Worked(
            f"change of {index}, all parts, {unit}", lambda index=index: sum(part(index, cause) for cause in CAUSES), whole, 1e-6, SHAPLEY
        )
        for index, (unit, _, whole) in SPLIT.items()
    ),
    Worked("trend of ten rising values", lambda: trend_per_s(np.arange(10.0), np.array(RISING)), 0.1625, 1e-9, SEN),
    Worked("constant of Pearson's points", lambda: deming(PEARSON_X, PEARSON_Y, 1.0)[1], 5.7840438, 5e-8, PEARSON, value="memory"),
    Worked("their ordinary slope", lambda: least_squares(PEARSON_X, PEARSON_Y)[0], -0.539577, 5e-7, PEARSON),
    Worked("their inverse slope", lambda: 1.0 / least_squares(PEARSON_Y, PEARSON_X)[0], -0.565889, 5e-7, PEARSON),
    *(
        Worked(f"Norris, {name.replace('_', ' ')}", lambda name=name: norris(name), value, 1e-9 * abs(value), NIST, value="memory")
        for name, value in CERTIFIED.items()
    ),
    *(
        Worked(
            f"{certified.name}, parameter {place + 1}",
            lambda certified=certified, place=place: float(fitted(certified).parameters[0][place]),
            value,
            1e-7 * abs(value),
            NIST,
            value="read" if certified.name == "Misra1a" else "memory",
        )
        for certified in SETS
        for place, value in enumerate(certified.parameters)
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
