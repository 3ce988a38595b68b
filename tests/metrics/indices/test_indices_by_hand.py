import numpy as np
import pytest

from metrics.indices import ALL
from metrics.indices.card import Source, StageBeats, Withheld
from metrics.stats.bootstrap import block_median_interval
from tests.metrics.made_beats import boxes, measured_run

BY_NAME = {index.name: index for index in ALL if index.primary}
EDVS_ML = np.linspace(150.0, 110.0, 9)
STEADY = boxes([130.0] * 7, run="rest")
"""The worked rectangle: Ees 2.5, V0 10, Ea 2, EDV 130."""
RAMP = boxes(EDVS_ML)
STAGE = StageBeats(steady=(STEADY,), preload=(RAMP,), v0_ml=10.0, bsa_m2=2.0)

# by hand: SV = 2.5 x 120 / 4.5, ESP = 2 SV, SW = ESP x SV; the loop crosses the end-systolic line at its upper left corner.
# The cubic through five samples 0.04 s apart sees SV lost in one step as 8/12 SV / 0.04 s of flow; dP/dtmax is 10 ESP
WORKED = {
    "HR": 60.0 / (4.0 / 25.0),
    "EDV": 130.0,
    "ESV": 63.3333333,
    "SV": 66.6666667,
    "EF": 0.512820513,
    "EDP": 0.0,
    "ESP": 133.3333333,
    "Pmax": 133.3333333,
    "Ea": 2.0,
    "SW": 8888.888889,
    "dPdt_max": 1333.333333,
    "dPdt_min": -1200.0,
    "Ees": 2.5,
    "V0": 10.0,
    "Ees_Ea": 1.25,
    "CO": 25.0,
    "EDVI": 65.0,
    "ESVI": 31.6666667,
    "SVI": 33.3333333,
    "CI": 12.5,
    "EaI": 4.0,
    "V100": 50.0,
    "V120": 58.0,
    "PE": 3555.555556,
    "PVA": 12444.44444,
    "efficiency": 0.714285714,
    "PWRmax": 400.0 / 3.0 * 10000.0 / 9.0 * 1.33322e-4,
    "PWRmax_EDV2": 400.0 / 3.0 * 10000.0 / 9.0 * 0.133322 / 16900.0,
    "dPdt_max_EDV": 11.11111111,
}

CURVES = frozenset({"EDPVR_beta", "EDPVR_stiffness", "V20", "V30"})
ELSEWHERE = CURVES | {"PRSW", "Vw", "tau", "Pinf"}
"""What a rectangle does not have: worked further down, or in a file of its own."""


@pytest.mark.parametrize("name", sorted(WORKED))
def test_the_worked_rectangle(name):
    estimate = BY_NAME[name].compute(STAGE)
    assert estimate.value == pytest.approx(WORKED[name], rel=1e-8, abs=1e-8)
    if BY_NAME[name].source is Source.STEADY:
        assert (estimate.fit_low, estimate.fit_high) == pytest.approx((estimate.value, estimate.value))
        assert estimate.beats == 7
    else:
        assert estimate.fit_low <= estimate.value <= estimate.fit_high
        assert estimate.beats == 9


def test_every_index_has_its_hand_worked_answer():
    assert set(WORKED) | ELSEWHERE == set(BY_NAME)


def test_recruitable_work_of_the_worked_line():
    # SW 4900 to 7700 in steps of 700 over EDV 100 to 140 in steps of 10: slope 70, from 30 mL
    run = measured_run(edv_ml=np.arange(140.0, 90.0, -10.0), sw_mmhg_ml=np.arange(7700.0, 4800.0, -700.0))
    estimate = BY_NAME["PRSW"].compute(StageBeats(preload=(run,)))
    assert estimate.value == pytest.approx(70.0)
    assert (estimate.fit_low, estimate.fit_high) == pytest.approx((70.0, 70.0))
    assert estimate.beats == 5
    assert BY_NAME["Vw"].compute(StageBeats(preload=(run,))).value == pytest.approx(30.0)


def test_steady_indices_are_medians_of_beats_not_ratios_of_medians():
    run = measured_run("rest", edv_ml=[100.0, 120.0, 110.0], esv_ml=[60.0, 50.0, 20.0], rr_s=[0.5, 1.0, 0.8])
    stage = StageBeats(steady=(run,))
    assert BY_NAME["SV"].compute(stage).value == 70.0
    assert BY_NAME["EF"].compute(stage).value == pytest.approx(70.0 / 120.0)
    assert BY_NAME["HR"].compute(stage).value == 75.0
    three = BY_NAME["EDV"].compute(stage)
    # SD 10, neighbours' correlation -2/3 raised by its bias (1 - 2) / 3, so none: 4.3027 errors of a median, sqrt(pi / 2) of a mean's
    half = 4.302653 * np.sqrt(np.pi / 2.0) * 10.0 / np.sqrt(3.0)
    assert (three.value, three.fit_low, three.fit_high, three.beats) == (110.0, pytest.approx(110.0 - half), pytest.approx(110.0 + half), 3)


def test_only_chosen_beats_of_every_steady_run_count():
    one = measured_run("one", edv_ml=[100.0, 900.0, 102.0])
    one.chosen[1] = False
    two = measured_run("two", edv_ml=[104.0, np.nan, 106.0, 108.0])
    estimate = BY_NAME["EDV"].compute(StageBeats(steady=(one, two)))
    assert (estimate.value, estimate.beats) == (104.0, 5)


def test_a_median_of_many_beats_has_the_interval_of_its_blocks():
    values = np.array([10.0, 11.5, 9.0, 10.5, 12.0, 9.5, 11.0, 8.5, 10.2, 11.2, 9.8, 10.8, 8.8, 11.8])
    estimate = BY_NAME["EDP"].compute(StageBeats(steady=(measured_run(edp_mmhg=values),)))
    assert (estimate.value, estimate.fit_low, estimate.fit_high) == block_median_interval(values)


def test_end_systolic_pressure_is_read_with_the_v0_of_the_stage():
    without = StageBeats(steady=(STEADY,))
    assert BY_NAME["ESP"].compute(without).value == pytest.approx(400.0 / 3.0)
    beyond = StageBeats(steady=(STEADY,), v0_ml=500.0)
    assert BY_NAME["Ea"].compute(beyond).value == pytest.approx(2.0)


def test_coupling_joins_both_relative_intervals():
    scattered = boxes(EDVS_ML + np.tile([0.0, 3.0, -2.0], 3))
    scattered.signals.pressure_mmhg[2::12] += 4.0
    rest = boxes([130.0 + 2.0 * (beat % 4) for beat in range(12)], run="rest")
    stage = StageBeats(steady=(rest,), preload=(scattered,), v0_ml=10.0)
    ees, ea, ratio = (BY_NAME[name].compute(stage) for name in ("Ees", "Ea", "Ees_Ea"))
    assert ratio.value == pytest.approx(ees.value / ea.value)
    up = np.hypot((ees.fit_high - ees.value) / ees.value, (ea.value - ea.fit_low) / ea.value)
    down = np.hypot((ees.value - ees.fit_low) / ees.value, (ea.fit_high - ea.value) / ea.value)
    assert up > 0.0
    assert ratio.fit_high - ratio.value == pytest.approx(up * ratio.value)
    assert ratio.value - ratio.fit_low == pytest.approx(down * ratio.value)


@pytest.mark.parametrize("name", sorted(index.name for index in ALL if index.source is not Source.PRELOAD and index.primary))
@pytest.mark.parametrize("count", [0, 2])
def test_fewer_than_three_steady_beats_give_no_number(name, count):
    steady = (boxes([130.0] * count, run="rest"),) if count else ()
    with pytest.raises(Withheld, match=f"{count} accepted steady beats where 3 are needed"):
        BY_NAME[name].compute(StageBeats(steady=steady, preload=(RAMP,), v0_ml=10.0))


@pytest.mark.parametrize("name", ["EDV", "SV", "EF", "SW", "HR"])
def test_beats_without_a_value_do_not_count(name):
    run = measured_run(edv_ml=[100.0, 101.0, np.nan], esv_ml=[50.0, np.nan, 51.0], sw_mmhg_ml=[np.nan] * 3, rr_s=[np.nan, 0.8, 0.8])
    with pytest.raises(Withheld, match="accepted steady beats"):
        BY_NAME[name].compute(StageBeats(steady=(run,)))


SLOPES = sorted(index.name for index in ALL if index.source is not Source.STEADY and index.primary)
LINES = [name for name in SLOPES if name not in CURVES]


def refused(name, *ramps):
    with pytest.raises(Withheld) as caught:
        BY_NAME[name].compute(StageBeats(steady=(STEADY,), preload=ramps, v0_ml=10.0))
    return str(caught.value)


@pytest.mark.parametrize("name", SLOPES)
def test_slopes_need_a_usable_preload_reduction_run(name):
    assert refused(name) == "the stage has no usable preload-reduction run"


@pytest.mark.parametrize("name", SLOPES)
def test_slopes_need_five_beats(name):
    assert refused(name, boxes(EDVS_ML[:4])) == "run ramp: 4 accepted beats in the usable window where 5 are needed"


@pytest.mark.parametrize("name", LINES)
def test_five_beats_bear_a_line(name):
    assert BY_NAME[name].compute(StageBeats(steady=(STEADY,), preload=(boxes(EDVS_ML[:5] - 30.0),), v0_ml=10.0)).value > 0.0


@pytest.mark.parametrize("name", SLOPES)
def test_beats_of_one_load_have_no_slope(name):
    assert refused(name, boxes([120.0] * 8)) == "run ramp: every point has the same load"


def scattered_run(rise):
    """A run whose pressures and works follow its loads hardly or falling."""
    run = boxes(np.linspace(120.0, 116.0, 8))
    run.signals.pressure_mmhg[:-1] = np.repeat(np.where(np.arange(8) % 2, 90.0, 120.0) + rise * np.arange(8), 4)
    run.beats.sw_mmhg_ml[:] = np.where(np.arange(8) % 2, 6000.0, 9000.0) + 50.0 * rise * np.arange(8)
    run.beats.dpdt_max_mmhg_per_s[:] = np.where(np.arange(8) % 2, 900.0, 1200.0) + 10.0 * rise * np.arange(8)
    return run


@pytest.mark.parametrize("name", LINES)
def test_a_slope_that_cannot_be_told_from_zero_is_withheld(name):
    assert "cannot be told from zero (Fieller g" in refused(name, scattered_run(-0.5))


@pytest.mark.parametrize("name", LINES)
def test_a_slope_that_falls_is_withheld(name):
    rising = boxes(np.linspace(130.0, 100.0, 8))
    rising.signals.pressure_mmhg[:] = rising.signals.pressure_mmhg[::-1].copy()
    rising.beats.sw_mmhg_ml[:] = rising.beats.sw_mmhg_ml[::-1].copy()
    rising.beats.dpdt_max_mmhg_per_s[:] = rising.beats.dpdt_max_mmhg_per_s[::-1].copy()
    rising.signals.pressure_mmhg[:] = np.roll(rising.signals.pressure_mmhg, -1)
    assert "not positive" in refused(name, rising)


@pytest.mark.parametrize("v0_ml", [-30.0, -150.0])
def test_a_negative_v0_is_never_a_reason_to_withhold(v0_ml):
    ramp = boxes(EDVS_ML, v0_ml=v0_ml)
    stage = StageBeats(steady=(STEADY,), preload=(ramp,))
    assert BY_NAME["V0"].compute(stage).value == pytest.approx(v0_ml)
    assert BY_NAME["Ees"].compute(stage).value == pytest.approx(2.5)


def test_runs_are_pooled_by_the_mean_of_their_lines_and_a_bad_one_is_left_out():
    steep, flat = boxes(EDVS_ML, ees=3.0, run="one"), boxes(EDVS_ML - 15.0, ees=2.0, v0_ml=20.0, run="two")
    for extra in ((), (boxes([120.0] * 8, run="three"),)):
        stage = StageBeats(preload=(steep, flat, *extra))
        assert BY_NAME["Ees"].compute(stage).value == pytest.approx(2.5)
        assert BY_NAME["V0"].compute(stage).value == pytest.approx(15.0)
        assert BY_NAME["Ees"].compute(stage).beats == 18
