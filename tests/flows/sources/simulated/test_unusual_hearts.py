from dataclasses import replace

import numpy as np
import pytest

from flows.sources.simulated.catheter import Catheter, record
from flows.sources.simulated.circulation import solve
from flows.sources.simulated.heart import HEARTS, LEFT_HEARTS, RIGHT_HEARTS, UNUSUAL_HEARTS, heart_named
from flows.sources.simulated.rhythm import STEP_S, Conditions, Occlusion
from flows.sources.simulated.truth import run_truth

CALM = Conditions(duration_s=8.0, rr_spread=0.0)


def test_seven_hearts_of_each_side_and_four_unusual_ones_tell_apart_by_name():
    assert [heart.chamber for heart in LEFT_HEARTS] == ["LV"] * 7
    assert [heart.chamber for heart in RIGHT_HEARTS] == ["RV"] * 7
    names = [heart.name for heart in HEARTS + UNUSUAL_HEARTS]
    assert len(set(names)) == len(names) == 18
    assert all(heart_named(name).name == name for name in names)


def test_right_hearts_differ_as_their_names_say():
    normal, *others = (run_truth(solve(heart, CALM)) for heart in RIGHT_HEARTS)
    loaded, small, large, fast, failing, stiff = others
    assert loaded.esp_mmhg > 1.5 * normal.esp_mmhg
    assert small.edv_ml < 0.8 * normal.edv_ml < normal.edv_ml < 0.8 * large.edv_ml
    assert fast.heart_rate_per_min > 95
    assert failing.sv_ml / failing.edv_ml < 0.4 < normal.sv_ml / normal.edv_ml
    assert stiff.edp_mmhg > 1.5 * normal.edp_mmhg


def test_a_right_ventricle_ejects_before_its_pressure_has_risen_far():
    # What makes its isovolumic phase short: the pressure it opens its valve against is a third of its peak, not two thirds.
    def opening(name):
        solution = solve(heart_named(name), CALM)
        beats = run_truth(solution).beats
        start = round(beats.start_s[0] / STEP_S)
        at = start + int(np.flatnonzero(solution.outflow_ml_per_s[start:] > 0.0)[0])
        return solution.pressure_mmhg[at] / beats.pmax_mmhg[0]

    assert opening("right") < 0.55 < opening("normal")


def test_a_bent_relation_holds_the_end_systolic_points():
    heart = heart_named("bent")
    truth = run_truth(solve(heart, Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=3.0))))
    beats, ramp = truth.beats, np.asarray(truth.beats.in_ramp)
    stretch = beats.end_systolic_volume_ml[ramp] - heart.v0_ml
    expected = heart.espvr_bend_mmhg_per_ml2 * stretch**2 + heart.ees_mmhg_per_ml * stretch
    np.testing.assert_allclose(beats.esp_mmhg[ramp], expected, rtol=1e-9)
    # The chord of a curve that flattens is less steep than its slope at V0, and crosses the axis further left.
    assert 0.5 * heart.ees_mmhg_per_ml < truth.ees_mmhg_per_ml < heart.ees_mmhg_per_ml
    assert truth.v0_ml < heart.v0_ml


def test_without_a_ramp_a_bent_relation_has_no_line():
    assert np.isnan(run_truth(solve(heart_named("bent"), CALM)).ees_mmhg_per_ml)


@pytest.mark.parametrize(("name", "valve"), [("mitral-leak", "inflow"), ("aortic-leak", "outflow"), ("tricuspid-leak", "inflow")])
def test_a_leak_breaks_the_isovolumic_phases_and_costs_forward_flow(name, valve):
    heart = heart_named(name)
    leaking, tight = (solve(one, CALM) for one in (heart, replace(heart, inlet_leak=0.0, outlet_leak=0.0)))
    back = {"inflow": leaking.inflow_ml_per_s, "outflow": leaking.outflow_ml_per_s}[valve]
    per_beat = -np.clip(back, None, 0.0).mean() * heart.rr_s
    assert 10.0 < per_beat < 50.0
    truth = run_truth(leaking)
    forward = leaking.outflow_ml_per_s.mean() * heart.rr_s
    assert forward == pytest.approx(truth.sv_ml - per_beat, rel=0.12)
    assert truth.sv_ml > run_truth(tight).sv_ml
    # While both valves should be shut the volume moves.
    start = round(truth.beats.start_s[1] / STEP_S)
    before_opening = slice(start, start + int(np.flatnonzero(leaking.outflow_ml_per_s[start:] > 0.0)[0]))
    assert np.ptp(leaking.volume_ml[before_opening]) > (0.2 if name != "tricuspid-leak" else 0.02)
    assert heart.conditions


def test_an_aberrant_beat_is_on_time_wide_and_weak():
    solution = solve(heart_named("normal"), Conditions(duration_s=10.0, rr_spread=0.0, aberrant_s=(5.0,)))
    truth = run_truth(solution)
    beats = truth.beats
    odd = beats.aberrant.index(True)
    assert sum(beats.aberrant) == 1
    assert not any(beats.premature)
    assert beats.rr_s == pytest.approx(np.full(len(beats), beats.rr_s[0]))
    assert beats.start_s[odd] == pytest.approx(5.0, abs=beats.rr_s[0])
    assert beats.dpdt_max_mmhg_per_s[odd] < 0.85 * truth.dpdt_max_mmhg_per_s
    assert beats.sv_ml[odd] < truth.sv_ml
    assert not beats.sound[odd]
    signals = record(solution, Catheter(), 1000.0, np.random.default_rng(0))

    def width_s(beat):
        near = np.abs(signals.time_s - beats.r_s[beat]) < 0.1
        lead = signals.ecg_mv[near]
        return (lead > 0.5 * lead.max()).sum() / 1000.0

    assert width_s(odd) > 1.5 * width_s(odd - 1)


def test_filling_that_falls_lets_the_volume_fall():
    falling = run_truth(solve(heart_named("normal"), Conditions(duration_s=20.0, filling_trend_per_s=-0.02))).beats
    assert falling.edv_ml[-1] < 0.92 * falling.edv_ml[0]
    assert np.all(np.diff(np.convolve(falling.edv_ml, np.ones(5) / 5, "valid")) < 0.0)


def test_fibrillation_can_be_less_irregular():
    def spread(irregularity):
        rr_s = run_truth(
            solve(heart_named("normal"), Conditions(duration_s=20.0, fibrillating=True, irregularity=irregularity), 4)
        ).beats.rr_s
        return rr_s.std() / rr_s.mean()

    assert spread(0.05) < 0.5 * spread(0.22)
