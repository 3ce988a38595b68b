import json
from dataclasses import replace

import numpy as np
import pytest

from flows.facts import run_facts
from flows.sources.simulated.acquisition import VOLUME
from flows.sources.simulated.corpus import clean_acquisition
from flows.study.manifest import read_manifest
from metrics.signals.facts import RunFacts, VolumeCalibration
from metrics.signals.recording import Channel, Recording
from metrics.signals.saline import extremes_ml, raw_volume_ml, rising_limb, saline_intercept, saline_intercept_of

RATE_HZ = 250.0
RAW = VolumeCalibration(calibrated=False)
NOISY_ED = np.array([150.0, 154.0, 161.0, 164.0, 171.0, 175.0])
NOISY_ES = np.array([113.0, 118.0, 120.0, 122.0, 127.0, 128.0])


def saline_run(heart, run="saline-1", seed=1):
    acquisition, _ = clean_acquisition(heart, RATE_HZ, seed)
    manifest = read_manifest(json.dumps(acquisition.manifest).encode(), file="acquisition.json", protocol=None)
    facts = next(run_facts(manifest, one) for one in manifest.runs if one.run == run)
    recording = Recording(run, {"volume": Channel(acquisition.columns[run][VOLUME], "mL", RATE_HZ)})
    return recording, facts, acquisition.recipe.catheter.volume_shift_ml


def test_an_exact_line_meets_the_identity_at_its_intercept():
    ed = np.array([150.0, 155.0, 160.0, 165.0, 170.0])
    found = saline_intercept(ed, 0.6 * ed + 24.0)
    assert (found.slope, found.r) == pytest.approx((0.6, 1.0))
    assert (found.ml, found.es_on_ed_ml, found.ed_on_es_ml) == pytest.approx((60.0, 60.0, 60.0))
    assert found.spread_ml == pytest.approx(0.0, abs=1e-9)


def test_noisy_points_give_the_worked_values_of_both_regressions():
    found = saline_intercept(NOISY_ED, NOISY_ES)
    assert found.es_on_ed_ml == pytest.approx(64.8218, abs=5e-5)
    assert found.ed_on_es_ml == pytest.approx(60.4118, abs=5e-5)
    assert found.ml == pytest.approx(62.6825, abs=5e-5)
    assert found.r == pytest.approx(0.984628, abs=5e-7)
    assert found.slope * found.r == pytest.approx(0.578548, abs=5e-7)
    assert found.spread_ml == pytest.approx(4.41, abs=0.001)
    assert found.beats == 6
    assert 0.0 < found.se_ml < 30.0


@pytest.mark.parametrize(
    ("ed", "es", "why"),
    [
        (NOISY_ED[:4], NOISY_ES[:4], "4 beats"),
        (NOISY_ED, NOISY_ES[::-1], "do not rise together"),
        (NOISY_ED, np.full(6, 100.0), "do not rise together"),
        (np.full(6, 100.0), NOISY_ES, "do not rise together"),
        (NOISY_ED, 1.1 * NOISY_ED - 60.0, "does not meet the identity"),
        (NOISY_ED, NOISY_ED - 60.0, "does not meet the identity"),
    ],
)
def test_points_that_give_no_intercept_say_why(ed, es, why):
    with pytest.raises(ValueError, match=why):
        saline_intercept(ed, es)


@pytest.mark.parametrize("heart", ["normal", "right", "small", "stiff"])
def test_a_simulated_injection_shows_the_parallel_volume_within_its_uncertainty(heart):
    recording, facts, truth_ml = saline_run(heart)
    found = saline_intercept_of(recording, facts)
    assert found.r > 0.99
    assert 0.3 < found.slope < 0.7
    assert abs(found.ml - truth_ml) < 3.0 * found.se_ml + found.spread_ml


def test_the_injection_is_found_without_its_event():
    recording, facts, truth_ml = saline_run("normal")
    assert saline_intercept_of(recording, replace(facts, events=())).ml == pytest.approx(truth_ml, abs=6.0)


def test_a_run_without_an_injection_gives_no_intercept():
    acquisition, _ = clean_acquisition("normal", RATE_HZ, 1)
    flat = np.tile(acquisition.columns["rest"][VOLUME][:200], 8)
    with pytest.raises(ValueError, match="rise"):
        saline_intercept_of(Recording("x", {"volume": Channel(flat, "mL", RATE_HZ)}), RunFacts("x", "saline", volume=RAW))


def test_gain_scales_the_intercept_and_an_offset_moves_it():
    recording, facts, _ = saline_run("normal")
    sound = saline_intercept_of(recording, facts).ml

    def changed(gain, shift):
        samples = gain * recording.channels["volume"].samples + shift
        return saline_intercept_of(Recording("x", {"volume": Channel(samples, "mL", RATE_HZ)}), facts).ml

    assert changed(1.3, 0.0) == pytest.approx(1.3 * sound, rel=1e-6)
    assert changed(1.0, 25.0) == pytest.approx(sound + 25.0, rel=1e-6)


def test_the_rising_limb_begins_where_the_level_is_left_and_ends_at_the_top():
    ed = np.array([150.0, 150.2, 149.9, 150.1, 152.0, 156.0, 161.0, 165.0, 166.0, 164.0, 160.0])
    limb = rising_limb(ed)
    assert (limb.start, limb.stop) == (3, 8)
    with pytest.raises(ValueError, match="does not rise"):
        rising_limb(ed[::-1][3:])
    with pytest.raises(ValueError, match="no beats"):
        rising_limb(np.empty(0))


def test_beats_are_emptyings_of_the_volume():
    time_s = np.arange(2500) / RATE_HZ
    at_s, ed, es = extremes_ml(120.0 + 30.0 * np.cos(2.0 * np.pi * 1.25 * time_s), RATE_HZ)
    assert np.diff(at_s) == pytest.approx(0.8, abs=0.01)
    assert ed[1:-1] == pytest.approx(150.0, abs=0.5)
    assert es[1:-1] == pytest.approx(90.0, abs=0.5)


def test_conductance_and_segments_become_raw_millilitres():
    conductance = VolumeCalibration(calibrated=False, electrode_spacing_cm=1.0, blood_resistivity_ohm_cm=150.0)
    half = Channel(np.array([300.0, np.nan, 340.0]), "mS", RATE_HZ)
    run = Recording("x", {"segment-1": half, "segment-2": half, "segment-3": half})
    both = raw_volume_ml(run, RunFacts("x", "saline", volume=conductance, segments_used=(1, 2)))
    assert both[0].tolist() == pytest.approx([90.0, 96.0, 102.0])
    assert both[1] == RATE_HZ
    assert raw_volume_ml(run, RunFacts("x", "saline", volume=conductance))[0][0] == pytest.approx(135.0)


@pytest.mark.parametrize(
    ("channels", "volume", "why"),
    [
        ({}, RAW, "no volume"),
        ({"volume": Channel(np.ones(9), "mL", RATE_HZ)}, VolumeCalibration(calibrated=True), "sent calibrated"),
        ({"volume": Channel(np.full(9, np.nan), "mL", RATE_HZ)}, RAW, "holds no value"),
        ({"volume": Channel(np.ones(9), "mS", RATE_HZ)}, RAW, "electrode_spacing_cm"),
    ],
)
def test_a_run_without_raw_volume_says_so(channels, volume, why):
    with pytest.raises(ValueError, match=why):
        raw_volume_ml(Recording("x", channels), RunFacts("x", "saline", volume=volume))
