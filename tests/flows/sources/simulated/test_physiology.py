"""What a premature beat, an inotrope and a bent relation do to a heart, whichever way it is filled."""

from dataclasses import replace
from datetime import UTC, datetime

import numpy as np
import pytest

from flows.sources.simulated import rhythm
from flows.sources.simulated.acquisition import Identity, Recipe, made, rest_and_ramp
from flows.sources.simulated.circulation import solve
from flows.sources.simulated.heart import heart_named, inotrope
from flows.sources.simulated.reading import true_indices
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.sources.simulated.truth import run_truth

CALM_RAMP = Conditions(duration_s=12.0, rr_spread=0.0, occlusion=Occlusion(onset_s=2.0))
DISTURBED = Conditions(duration_s=14.0, rr_spread=0.0, premature_s=(6.0,))
HEARTS = ("normal", "closed-normal", "failing", "closed-failing", "right", "closed-right")


def ramp(heart):
    return run_truth(solve(heart, CALM_RAMP)).beats


def dpdt_at(beats, edv_ml):
    """What dP/dtmax the heart has at a filling, from the line through the beats of a ramp (it is nearly straight)."""
    slope, at_zero = np.polyfit(beats.edv_ml, beats.dpdt_max_mmhg_per_s, 1)
    return slope * edv_ml + at_zero


@pytest.fixture(scope="module", params=HEARTS)
def disturbed(request):
    heart = heart_named(request.param)
    beats = run_truth(solve(heart, DISTURBED)).beats
    return heart, beats, beats.premature.index(True)


def test_a_premature_beat_finds_the_ventricle_unfilled_and_unready(disturbed):
    heart, beats, early = disturbed
    assert beats.edv_ml[early] < 0.97 * beats.edv_ml[0]
    # Weaker than so little filling explains: the force itself has not come back.
    assert beats.dpdt_max_mmhg_per_s[early] < 0.95 * dpdt_at(ramp(heart), beats.edv_ml[early])
    assert beats.ees_mmhg_per_ml[early] < 0.95 * heart.ees_mmhg_per_ml
    assert beats.sv_ml[early] < 0.7 * beats.sv_ml[0]


def test_the_pause_makes_up_for_what_came_early(disturbed):
    _, beats, early = disturbed
    assert beats.rr_s[early - 1] < 0.7 * beats.rr_s[0]
    assert beats.rr_s[early - 1] + beats.rr_s[early] == pytest.approx(2.0 * beats.rr_s[0], abs=0.003)


def test_the_beat_after_the_pause_is_potentiated_beyond_what_fills_it(disturbed, monkeypatch):
    heart, beats, early = disturbed
    after = early + 1
    assert beats.edv_ml[after] > beats.edv_ml[0]
    assert beats.dpdt_max_mmhg_per_s[after] > 1.04 * beats.dpdt_max_mmhg_per_s[0]
    assert beats.sv_ml[after] > 1.1 * beats.sv_ml[0]
    # The same pause, the same filling and the same arteries without the surplus of force: what is missing is the potentiation.
    monkeypatch.setattr(rhythm, "POTENTIATION", 0.0)
    plain = run_truth(solve(heart, DISTURBED)).beats
    assert plain.edv_ml[after] == pytest.approx(beats.edv_ml[after], rel=1e-4)
    assert beats.dpdt_max_mmhg_per_s[after] > 1.05 * plain.dpdt_max_mmhg_per_s[after]
    assert beats.sv_ml[after] > 1.02 * plain.sv_ml[after]
    # The surplus of force fades from beat to beat.
    surplus = beats.ees_mmhg_per_ml[after : after + 3] / heart.ees_mmhg_per_ml - 1.0
    assert surplus[0] > 0.05
    assert (np.diff(surplus) < 0.0).all()
    assert beats.ees_mmhg_per_ml[-1] == heart.ees_mmhg_per_ml


@pytest.mark.parametrize("name", HEARTS)
def test_an_inotrope_strengthens_at_the_same_filling(name):
    heart = heart_named(name)
    before, under = ramp(heart), ramp(inotrope(heart, rate=1.0))
    shared_ml = np.linspace(max(before.edv_ml.min(), under.edv_ml.min()), min(before.edv_ml.max(), under.edv_ml.max()), 4)
    assert np.ptp(shared_ml) > 20.0
    assert (dpdt_at(under, shared_ml) > 1.15 * dpdt_at(before, shared_ml)).all()
    assert under.sv_ml[0] > 1.05 * before.sv_ml[0]
    assert run_truth(solve(inotrope(heart), Conditions(duration_s=6.0))).heart_rate_per_min == pytest.approx(
        1.15 * heart.heart_rate_per_min, rel=0.02
    )


def test_an_acquisition_of_two_stages_has_a_truth_for_each():
    heart = heart_named("closed-normal")
    identity = Identity("tarn", "harbour", "P-1", "visit-1", "P-1-visit-1", datetime(2026, 2, 2, 9, 0, tzinfo=UTC))
    plans = rest_and_ramp() + rest_and_ramp("infusion", 0.75, inotrope(heart))
    found = made(Recipe(identity, heart, plans))
    assert {run["stage"] for run in found.manifest["runs"]} == {"baseline", "infusion"}
    truth = true_indices(found)
    assert truth["infusion", "Ees"] == pytest.approx(1.45 * truth["baseline", "Ees"], rel=1e-6)
    assert truth["infusion", "V0"] == pytest.approx(truth["baseline", "V0"], abs=1e-6)
    for index in ("dPdt_max", "HR", "PRSW", "ESP"):
        assert truth["infusion", index] > truth["baseline", index]
    assert truth["infusion", "SV"] * truth["infusion", "HR"] > 1.08 * truth["baseline", "SV"] * truth["baseline", "HR"]
    # What comes back is what the veins let through: a faster heart is fuller of beats, and each of them less full.
    assert truth["infusion", "EDV"] < truth["baseline", "EDV"]


@pytest.mark.parametrize("name", ["normal", "closed-normal"])
def test_a_bent_relation_is_less_steep_the_fuller_the_ventricle(name):
    heart = replace(heart_named(name), ees_mmhg_per_ml=3.6, espvr_bend_mmhg_per_ml2=-0.012)
    truth = run_truth(solve(heart, CALM_RAMP))
    beats = truth.beats
    ramp_points = np.asarray(beats.in_ramp)
    volume, pressure = beats.end_systolic_volume_ml[ramp_points], beats.esp_mmhg[ramp_points]
    stretch = volume - heart.v0_ml
    np.testing.assert_allclose(pressure, heart.espvr_bend_mmhg_per_ml2 * stretch**2 + heart.ees_mmhg_per_ml * stretch, rtol=1e-9)
    full, spare = (np.polyfit(volume[half], pressure[half], 1)[0] for half in (slice(None, 4), slice(-4, None)))
    assert full < spare < heart.ees_mmhg_per_ml
    assert truth.ees_mmhg_per_ml < heart.ees_mmhg_per_ml
