from dataclasses import replace

import numpy as np
import pytest

from flows.sources.simulated.circulation import solve
from flows.sources.simulated.corpus import clean_acquisition, hearts
from flows.sources.simulated.heart import CLOSED_HEARTS, HEARTS, heart_named
from flows.sources.simulated.rhythm import STEP_S, Breathing, Conditions, Occlusion
from flows.sources.simulated.truth import run_truth

REST = {heart.name: solve(heart, Conditions(duration_s=8.0), 3) for heart in CLOSED_HEARTS}
EVERY = [pytest.param(heart, id=heart.name) for heart in CLOSED_HEARTS]
RELEASED = Conditions(duration_s=22.0, rr_spread=0.0, occlusion=Occlusion(onset_s=3.0, deflation_s=12.0))
NORMAL, RIGHT = heart_named("closed-normal"), heart_named("closed-right")


def stressed_volume_ml(solution):
    """All blood beyond what each part holds unstretched."""
    heart, veins, loop = solution.heart, solution.heart.veins, solution.loop
    unstretched = heart.v0_ml + veins.atrial_unstressed_ml + veins.unstressed_ml
    return solution.volume_ml + loop.atrial_volume_ml + loop.venous_volume_ml + loop.arterial_volume_ml - unstretched


def venous_pressure_mmhg(solution):
    veins = solution.heart.veins
    return (solution.loop.venous_volume_ml - veins.unstressed_ml) / veins.compliance_ml_per_mmhg


@pytest.mark.parametrize(
    "heart",
    [NORMAL, RIGHT, replace(NORMAL, inlet_leak=10.0, outlet_leak=4.0)],
    ids=["left", "right", "leaky"],
)
def test_no_blood_is_made_or_lost_whatever_happens(heart):
    happens = replace(RELEASED, breathing=Breathing(), premature_s=(6.0,), filling_trend_per_s=-0.01)
    for conditions in (happens, Conditions(duration_s=8.0, fibrillating=True)):
        total = stressed_volume_ml(solve(heart, conditions, 2))
        np.testing.assert_allclose(total, heart.veins.stressed_volume_ml, rtol=1e-6)


def test_each_heart_has_a_twin_and_the_twin_the_same_ventricle():
    assert len({heart.name for heart in HEARTS + CLOSED_HEARTS}) == 2 * len(HEARTS)
    for twin, closed in zip(HEARTS, CLOSED_HEARTS, strict=True):
        assert heart_named(closed.name) is closed
        same = {"name": twin.name, "veins": None, "peripheral_resistance": twin.peripheral_resistance}
        assert replace(closed, **same) == twin
        assert REST[closed.name].loop is not None
    assert solve(HEARTS[0], Conditions(duration_s=1.0)).loop is None


def test_every_third_heart_of_a_study_is_in_a_closed_loop():
    twelve = hearts(12)
    assert [heart.veins is not None for heart in twelve] == [False, False, True] * 4
    assert {heart.chamber for heart in twelve if heart.veins is not None} == {"LV", "RV"}
    acquisition, truth = clean_acquisition("closed-small", 250.0, 1, ramps=1, salines=1)
    assert {run["kind"] for run in acquisition.manifest["runs"]} == {"steady", "preload-reduction", "saline"}
    assert truth["baseline", "Ees"] == heart_named("small").ees_mmhg_per_ml


@pytest.mark.parametrize("heart", EVERY)
def test_closed_hearts_lie_in_the_ranges_published_for_their_chamber(heart):
    truth = run_truth(REST[heart.name])
    atrium = REST[heart.name].filling_pressure_mmhg
    assert 0.3 <= truth.sv_ml / truth.edv_ml <= 0.7
    if heart.chamber == "LV":
        assert 85 <= truth.edv_ml <= 200
        assert 40 <= truth.sv_ml <= 100
        assert 5 <= truth.edp_mmhg <= 18
        assert 80 <= truth.esp_mmhg <= (140 if heart.name != "closed-high-afterload" else 180)
        assert 900 <= truth.dpdt_max_mmhg_per_s <= 2500
        assert 5 <= atrium.mean() <= 16
    else:
        assert 20 <= truth.pmax_mmhg <= 70
        assert 3 <= truth.edp_mmhg <= 12
        assert 150 <= truth.dpdt_max_mmhg_per_s <= 800
        assert 2 <= atrium.mean() <= 12


@pytest.mark.parametrize("heart", EVERY)
def test_the_end_systolic_relation_is_that_of_the_ventricle(heart):
    beats = run_truth(REST[heart.name]).beats
    np.testing.assert_allclose(beats.esp_mmhg, heart.ees_mmhg_per_ml * (beats.end_systolic_volume_ml - heart.v0_ml), rtol=1e-9)


@pytest.mark.parametrize("heart", [NORMAL, RIGHT], ids=["left", "right"])
def test_at_rest_as_much_comes_back_as_goes_out_and_pressure_falls_all_the_way(heart):
    solution = solve(heart, Conditions(duration_s=20.0, rr_spread=0.0))
    beats = run_truth(solution).beats
    whole = slice(round(beats.start_s[0] / STEP_S), round(beats.end_s[-1] / STEP_S))
    out, back, through = (
        flow[whole].mean() for flow in (solution.outflow_ml_per_s, solution.loop.venous_return_ml_per_s, solution.inflow_ml_per_s)
    )
    assert back == pytest.approx(out, rel=0.01)
    assert through == pytest.approx(out, rel=0.01)
    pressures = solution.aortic_pressure_mmhg, venous_pressure_mmhg(solution), solution.filling_pressure_mmhg
    arteries, veins, atrium = (pressure[whole].mean() for pressure in pressures)
    assert arteries > veins > atrium > 0.0
    assert veins - atrium == pytest.approx(back * heart.veins.resistance, rel=0.01)


@pytest.mark.parametrize("heart", EVERY)
def test_the_atrium_contracts_before_the_r_wave_and_in_fibrillation_not_at_all(heart):
    def swell(solution):
        """The atrium's elastance over the quarter of a second before each R wave and up to the onset of contraction."""
        elastance = solution.filling_pressure_mmhg / (solution.loop.atrial_volume_ml - heart.veins.atrial_unstressed_ml)
        r_at = np.round(run_truth(solution).beats.r_s[1:] / STEP_S).astype(int)
        return np.asarray([elastance[at - 500 : at + 81] for at in r_at])

    veins, sinus = heart.veins, swell(REST[heart.name])
    peak_s = (500 - sinus.argmax(axis=1)) * STEP_S
    assert ((peak_s > 0.03) & (peak_s < 0.12)).all()
    np.testing.assert_allclose(sinus.max(axis=1), veins.atrial_elastance_contracted, rtol=1e-3)
    # Relaxed again before the ventricle contracts, 0.04 s after the R wave.
    np.testing.assert_allclose(sinus[:, -1], veins.atrial_elastance, rtol=1e-3)
    still = swell(solve(heart, Conditions(duration_s=5.0, fibrillating=True), 3))
    np.testing.assert_allclose(still, veins.atrial_elastance, rtol=1e-9)


def test_without_its_contraction_less_is_ejected():
    strong, slack = (
        run_truth(solve(replace(NORMAL, veins=replace(NORMAL.veins, atrial_elastance_contracted=contracted)), Conditions(duration_s=6.0)))
        for contracted in (NORMAL.veins.atrial_elastance_contracted, NORMAL.veins.atrial_elastance)
    )
    assert slack.sv_ml < 0.97 * strong.sv_ml
    assert slack.edp_mmhg < strong.edp_mmhg


@pytest.mark.parametrize("heart", EVERY[::4])
def test_an_occlusion_holds_the_blood_back_in_the_veins_until_it_is_released(heart):
    solution = solve(heart, RELEASED, 1)
    beats, loop = run_truth(solution).beats, solution.loop
    before, occluded, after = (slice(round(low / STEP_S), round(high / STEP_S)) for low, high in ((0.0, 3.0), (9.0, 12.0), (19.0, 22.0)))
    back = loop.venous_return_ml_per_s
    assert back[occluded].mean() < 0.75 * back[before].mean()
    assert loop.venous_volume_ml[occluded].mean() > loop.venous_volume_ml[before].mean() + 50.0
    assert back[after].mean() == pytest.approx(back[before].mean(), rel=0.1)
    ramp = np.asarray(beats.in_ramp)
    assert 0.3 < 1.0 - beats.edv_ml.min() / beats.edv_ml[0] < 0.7
    assert ramp.sum() >= 6
    assert np.all(np.diff(beats.edv_ml[ramp]) < 3.0)
    assert beats.edv_ml[-1] == pytest.approx(beats.edv_ml[0], rel=0.08)


@pytest.mark.parametrize("heart", [NORMAL, RIGHT], ids=["left", "right"])
def test_breathing_in_fills_the_ventricle_more_while_its_pressure_reads_less(heart):
    solution = solve(heart, Conditions(duration_s=26.0, rr_spread=0.0, breathing=Breathing(sinus_depth=0.0)))
    beats, chest = run_truth(solution).beats, solution.loop.chest_pressure_mmhg
    assert np.abs(chest).max() == pytest.approx(0.12 * heart.filling_pressure_mmhg, rel=1e-3)
    around = chest[np.round(beats.start_s / STEP_S).astype(int)]
    assert np.corrcoef(beats.edv_ml[1:], around[:-1])[0, 1] < -0.7
    assert np.corrcoef(beats.edp_mmhg, around)[0, 1] > 0.4
    held = run_truth(solve(heart, Conditions(duration_s=12.0, rr_spread=0.0))).beats
    assert np.ptp(beats.edv_ml) > 0.03 * held.edv_ml[0] > 3.0 * np.ptp(held.edv_ml)


def test_an_inlet_that_leaks_raises_the_pressure_in_the_atrium():
    tight, leaking = (solve(replace(NORMAL, inlet_leak=leak), Conditions(duration_s=8.0)) for leak in (0.0, 10.0))
    assert leaking.inflow_ml_per_s.min() < -20.0
    assert leaking.filling_pressure_mmhg.mean() > tight.filling_pressure_mmhg.mean() + 0.5

    def at_end_systole(solution):
        at = np.round(run_truth(solution).beats.end_systole_s / STEP_S).astype(int)
        return solution.filling_pressure_mmhg[at].mean()

    assert at_end_systole(leaking) > at_end_systole(tight) + 2.0


def test_in_fibrillation_a_longer_pause_fills_more():
    beats = run_truth(solve(NORMAL, Conditions(duration_s=30.0, fibrillating=True), 4)).beats
    assert np.corrcoef(beats.rr_s[:-1], beats.edv_ml[1:])[0, 1] > 0.5


@pytest.mark.parametrize("per_s", [-0.01, 0.01])
def test_a_trend_of_the_filling_moves_the_volume_its_way(per_s):
    edv_ml = run_truth(solve(NORMAL, Conditions(duration_s=20.0, rr_spread=0.0, filling_trend_per_s=per_s))).beats.edv_ml
    assert (edv_ml[-1] / edv_ml[0] - 1.0) * np.sign(per_s) > 0.03
