"""Worked values of relaxation and of the end-diastolic curve, rows of the same kind as in `test_worked_values`."""

import numpy as np
import pytest

from metrics.indices.diastolic_curve import exponential_curve, power_curve
from metrics.indices.single_beat_diastole import klotz_curve
from metrics.signals.falls import Falls, half_time, matsubara, raff_glantz, weiss
from metrics.stats.curves import exponential, logistic
from tests.outside.test_worked_values import MARKS, Worked

TIME_S = np.arange(16) * 0.004
WEISS_1976 = "Weiss 1976, J Clin Invest 58:751"
RAFF = "Raff and Glantz 1981, Circ Res 48:813"
MATSUBARA = "Matsubara 1995, Circulation 92:2318"
HALF = "half-time, table 2 of PMC8024231"
EDPVR = "end-diastolic curve, table 2 of PMC8024231"
KLOTZ = "Klotz 2006, Am J Physiol 291:H403"
CONTROL = np.arange(80.0, 131.0, 10.0)


def fall(pressure):
    """One fall of these pressures, 4 ms apart."""
    return Falls(TIME_S[None], pressure[None], np.ones((1, TIME_S.size), dtype=bool), np.array([""], dtype=object))


def exact(p0, pinf, tau_s):
    return fall((p0 - pinf) * np.exp(-TIME_S / tau_s) + pinf)


def logistic_fall():
    return fall(logistic(TIME_S[None], np.array([[150.0, 1.0 / 0.025, -5.0]]))[0][0])


def milliseconds(measure, falling):
    return 1e3 * float(measure(falling).tau_s[0])


def at_4_ms():
    return float(logistic_fall().pressure_mmhg[0, 1])


def passive(part):
    """The exponential with offset through 0.5 exp(0.03 V) + 2 at 80 to 130 mL."""
    curve = exponential_curve(CONTROL, 0.5 * np.exp(0.03 * CONTROL) + 2.0)
    if part == "beta":
        return curve.beta_per_ml()
    height, slope, bend = curve.parameters
    if part == "alpha":
        return float(slope / bend * np.exp(-bend * curve.middle_ml))
    return float(height - slope / bend)


def without_offset(part):
    """0.5 exp(0.03 V) at 80 to 130 mL, read where it is 0.5 exp(3)."""
    curve = exponential_curve(CONTROL, 0.5 * np.exp(0.03 * CONTROL))
    if part == "pressure":
        return float(exponential(np.array([[100.0 - curve.middle_ml]]), curve.parameters[None])[0][0, 0])
    return curve.stiffness_mmhg_per_ml(0.5 * np.exp(3.0))


def klotz(volume_ml, pressure_mmhg, part, **constants):
    curve = klotz_curve(np.array([volume_ml]), np.array([pressure_mmhg]), **constants)
    if part == "alpha":
        return float(np.exp(curve.log_factor[0]))
    return float(getattr(curve, part)[0])


def klotz_rows():
    """The three worked points, at the constant they were worked with."""
    worked = (
        (120.0, 12.0, 63.36, 140.1527434, 5.9023717, 6.413287e-12),
        (150.0, 20.0, 72.0, 159.884353, 6.353712, 2.983817e-13),
        (180.0, 25.0, 81.0, 183.882102, 5.248223, 3.645580e-11),
    )
    for vm, pm, *expected in worked:
        for part, value in zip(("v0_ml", "v30_ml", "exponent", "alpha"), expected, strict=True):
            yield Worked(
                f"single-beat {part} through {vm:g} mL, {pm:g} mmHg",
                lambda vm=vm, pm=pm, part=part: klotz(vm, pm, part, an_mmhg=27.8),
                value,
                1e-6 * value,
                KLOTZ,
            )


TABLE = (
    Worked(
        "tau, zero asymptote, of 60 exp(-t / 48 ms), ms",
        lambda: milliseconds(weiss, exact(60.0, 0.0, 0.048)),
        48.0,
        1e-9,
        WEISS_1976,
        "read",
    ),
    Worked("its half-time over ln 2, ms", lambda: milliseconds(half_time, exact(60.0, 0.0, 0.048)), 48.0, 0.09, HALF, "read"),
    Worked("its tau, free asymptote, ms", lambda: milliseconds(raff_glantz, exact(60.0, 0.0, 0.048)), 48.0, 1e-6, RAFF, "read"),
    Worked(
        "tau, free asymptote, of 75 exp(-t / 50 ms) - 5, ms",
        lambda: milliseconds(raff_glantz, exact(70.0, -5.0, 0.05)),
        50.0,
        1e-6,
        RAFF,
        "read",
    ),
    Worked("its asymptote, mmHg", lambda: float(raff_glantz(exact(70.0, -5.0, 0.05)).asymptote_mmhg[0]), -5.0, 1e-6, RAFF, "read"),
    Worked("its tau, zero asymptote, ms", lambda: milliseconds(weiss, exact(70.0, -5.0, 0.05)), 43.60022, 5e-6, WEISS_1976, "read"),
    Worked("its logistic time constant, ms", lambda: milliseconds(matsubara, exact(70.0, -5.0, 0.05)), 24.3, 0.048, MATSUBARA),
    Worked(
        "tau, zero asymptote, of 45 exp(-t / 50 ms) + 5, ms",
        lambda: milliseconds(weiss, exact(50.0, 5.0, 0.05)),
        60.39392,
        5e-6,
        WEISS_1976,
        "read",
    ),
    *(
        Worked(
            f"tau, zero asymptote, of 60 exp(-t / 48 ms) {error:+g} mmHg, ms",
            lambda error=error: milliseconds(weiss, exact(60.0 + error, error, 0.048)),
            expected,
            0.05,
            WEISS_1976,
            "read",
        )
        for error, expected in ((2.0, 51.1), (5.0, 55.7), (-2.0, 44.9), (-5.0, 40.1))
    ),
    Worked(
        "logistic time constant of 150 / (1 + exp(t / 25 ms)) - 5, ms",
        lambda: milliseconds(matsubara, logistic_fall()),
        25.0,
        1e-6,
        MATSUBARA,
    ),
    Worked("that logistic after 4 ms, mmHg", at_4_ms, 64.01277, 5e-6, MATSUBARA),
    Worked("tau, free asymptote, of that logistic, ms", lambda: milliseconds(raff_glantz, logistic_fall()), 53.256, 5e-4, RAFF, "read"),
    Worked("asymptote of that logistic, mmHg", lambda: float(raff_glantz(logistic_fall()).asymptote_mmhg[0]), -24.06, 5e-3, RAFF, "read"),
    Worked("beta of 0.5 exp(0.03 V) + 2, /mL", lambda: passive("beta"), 0.03, 1e-9, EDPVR, "read"),
    Worked("its alpha, mmHg", lambda: passive("alpha"), 0.5, 1e-6, EDPVR, "read"),
    Worked("its offset, mmHg", lambda: passive("offset"), 2.0, 1e-6, EDPVR, "read"),
    Worked("0.5 exp(0.03 V) at 100 mL, mmHg", lambda: without_offset("pressure"), 10.042768, 5e-7, EDPVR, "read"),
    Worked("its slope there, mmHg/mL", lambda: without_offset("slope"), 0.301283, 5e-7, EDPVR, "read"),
    *klotz_rows(),
    Worked("single-beat V30 through 120 mL, 12 mmHg, An 27.78", lambda: klotz(120.0, 12.0, "v30_ml"), 140.1327220, 5e-7, KLOTZ, "memory"),
    Worked("its exponent", lambda: klotz(120.0, 12.0, "exponent"), 5.9078085, 5e-7, KLOTZ, "memory"),
)


@pytest.mark.parametrize("worked", TABLE, ids=lambda worked: worked.quantity)
def test_worked_value(worked):
    assert worked.by() == pytest.approx(worked.expected, rel=0.0, abs=worked.within)


def test_every_row_says_where_it_comes_from():
    for worked in TABLE:
        assert worked.source
        assert worked.method in MARKS
        assert worked.value in MARKS
        assert worked.within <= 2e-3 * abs(worked.expected)
    assert len({worked.quantity for worked in TABLE}) == len(TABLE)


@pytest.mark.parametrize(("volume_ml", "pressure_mmhg"), [(120.0, 12.0), (150.0, 20.0), (180.0, 25.0)])
def test_a_single_beat_curve_goes_through_its_beat(volume_ml, pressure_mmhg):
    curve = klotz_curve(np.array([volume_ml]), np.array([pressure_mmhg]))
    assert curve.volume_at_ml(pressure_mmhg)[0] == pytest.approx(volume_ml)


def test_a_power_is_found_on_its_own_points():
    curve = power_curve(CONTROL, 8.0 * (CONTROL / 100.0) ** 3)
    assert curve.volume_at_ml(8.0) == pytest.approx(100.0)
    assert curve.stiffness_mmhg_per_ml(8.0) == pytest.approx(0.24)
