"""Sound acquisitions unlike the usual ones fail no check and lose no index, and what naive checks trip over has a test each.

| Trap | Held by |
|---|---|
| cycle length | `beat/test_rhythm.py` |
| loop closure | `beat/test_closure.py` |
| isovolumic change, landmark order, regurgitation | `beat/test_landmarks_and_ranges.py`, and the leaking valves below |
| pressures across a narrow valve | `run/test_aortic_agreement.py` |
| steadiness of correlated beats | `tests/metrics/stats/test_trends.py`, and breathing below |
| adequacy of failing hearts | `run/test_preload.py`, `test_healthy.py`, and a failing one below |
| reflex against sinus arrhythmia and fibrillation | `tests/metrics/signals/test_preload_window.py`, and below |
| replicates | `acquisition/test_replicates_agree.py` |
| zero drift | `acquisition/test_pressure_calibration.py`, and drifting zeros below |
| flat line and rails | `beat/test_signal_gaps.py`, `run/test_clipping.py`, and the coarse converter below |
| soft ranges in an occlusion | `beat/test_landmarks_and_ranges.py` |
| channel delay | `run/test_course_ladders.py`, and slow, failing and right hearts below |
| sampling rate | `run/test_time.py` |
| spoiling | `test_spoils.py` |
| intervals | `tests/metrics/stats/test_lines.py` |

No check reads how far a beat lies from the end-systolic line of its run.
"""

import json
from dataclasses import dataclass, replace

import numpy as np
import pytest

from checks import ALL
from checks.check import Level
from checks.run.steadiness import change_of_edp, change_of_preload
from flows.assess import assess
from flows.sources.simulated.acquisition import TIME, VOLUME, Recipe, RunPlan, made
from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.heart import UNUSUAL_HEARTS, heart_named
from flows.sources.simulated.package import csv_bytes
from flows.sources.simulated.rhythm import Breathing, Conditions, Occlusion
from flows.study.manifest import read_manifest
from tests.checks.made_acquisitions import IDENTITY, MAY_BE_OUT_OF_REACH, PROTOCOL, judged, sound
from tests.checks.made_subjects import drawn, simulated

BEAT_CHECKS = {check.name for check in ALL if check.level is Level.BEAT}
TWELVE_BITS = {"pressure_step_mmhg": 350 / 4096, "volume_step_ml": 500 / 4096}
RAW = {"volume_gain": 0.8, "volume_shift_ml": 45.0}
BIT_LOUD = {"pressure_noise_mmhg": 0.4, "volume_noise_ml": 0.9, "ecg_noise_mv": 0.02}
QUIET = {"pressure_noise_mmhg": 0.2, "volume_noise_ml": 0.3, "ecg_noise_mv": 0.005}


@dataclass(frozen=True)
class Site:
    """A heart, the breath at rest and in the occlusion, what records them, and what is declared of it."""

    heart: str
    changes: dict[str, float]
    catheter: dict[str, float]
    rate_hz: float
    breath: Breathing | None = None
    rr_spread: float = 0.012
    with_ecg: bool = True
    with_zero_sd: bool = True
    volume_apart: bool = False


SITES = {
    "slow right heart, volume late as declared": Site(
        "right-stiff", {"heart_rate_per_min": 57.0, "activation_scale": 0.79}, RAW | BIT_LOUD | {"volume_delay_s": 0.015}, 250.0
    ),
    "slow stiff heart, deep sinus arrhythmia, 200 Hz, no ECG": Site(
        "stiff",
        {"heart_rate_per_min": 46.0, "activation_scale": 0.75, "relaxation_exponent": 21.0},
        {**BIT_LOUD, "drift_mmhg_per_hour": -0.8},
        200.0,
        Breathing(17.0, 0.10, 0.09),
        with_ecg=False,
    ),
    "failing heart, volume at half the rate, 12 bits": Site(
        "closed-failing",
        {"heart_rate_per_min": 90.0, "relaxation_exponent": 21.0},
        RAW | QUIET | TWELVE_BITS,
        400.0,
        Breathing(15.0, 0.08, 0.05),
        rr_spread=0.02,
        volume_apart=True,
    ),
    "fast right heart, zeros that drift, true volume": Site(
        "closed-right-fast",
        {"heart_rate_per_min": 136.0, "activation_scale": 0.77, "relaxation_exponent": 11.0},
        {**QUIET, "drift_mmhg_per_hour": 0.8},
        500.0,
        with_zero_sd=False,
    ),
    "leaking valve, slow relaxation, deep breath in the occlusion": Site(
        "aortic-leak", {"activation_scale": 1.14, "relaxation_exponent": 9.0}, RAW | BIT_LOUD, 250.0, Breathing(11.6, 0.16, 0.10)
    ),
    "small heart at 2000 Hz, late pressure as declared": Site(
        "closed-small", {"activation_scale": 1.15, "relaxation_exponent": 25.0}, QUIET | {"pressure_delay_s": 0.015}, 2000.0
    ),
}


def package(site, folder):
    """The manifest and files of a site's acquisition."""
    occlusion = Occlusion(onset_s=3.0, deflation_s=11.0)
    runs = (
        RunPlan("rest", Conditions(duration_s=20.0, rr_spread=site.rr_spread, breathing=site.breath), 0.35),
        RunPlan("ramp", Conditions(duration_s=14.0, rr_spread=site.rr_spread, breathing=site.breath, occlusion=occlusion), 0.45),
    )
    heart = replace(heart_named(site.heart), **site.changes)
    is_raw = "volume_gain" in site.catheter
    acquisition = made(
        Recipe(IDENTITY, heart, runs, Catheter(**site.catheter), site.rate_hz, 7, raw_volume=is_raw, with_ecg=site.with_ecg, reference=None)
    )
    declared, files = json.loads(json.dumps(acquisition.manifest)), {}
    if not site.with_zero_sd:
        del declared["calibration"]["pressure"]["zero_sd_mmhg"]
    for run in declared["runs"]:
        columns = dict(acquisition.columns[run["run"]])
        if site.volume_apart:
            apart = {name: columns[name][::2] for name in (TIME, VOLUME)}
            del columns[VOLUME]
            name = f"{run['run']}-volume.csv"
            run["channels"]["volume"] |= {"file": name, "sampling_rate_hz": site.rate_hz / 2.0}
            files[name] = csv_bytes(apart)
        files[run["file"]] = csv_bytes(columns)
    for name, content in files.items():
        (folder / name).write_bytes(content)
    manifest = read_manifest(json.dumps(declared).encode(), file="acquisition.json", protocol=PROTOCOL)
    return manifest, {name: folder / name for name in files}


@pytest.mark.parametrize("name", SITES)
def test_a_sound_acquisition_unlike_the_usual_ones_fails_nothing_and_keeps_every_index(name, tmp_path):
    manifest, files = package(SITES[name], tmp_path)
    found = assess(files, manifest, PROTOCOL)
    failed = {(row["check"], row["run"], row["value"]) for row in found.rejections if row["verdict"] == "fail"}
    assert {one for one in failed if one[0] not in BEAT_CHECKS} == set()
    assert sum(beat["verdict"] == "rejected" for beat in found.beats) <= 1
    assert {row["index"] for row in found.indices if row["primary"] and row["status"] != "published"} <= MAY_BE_OUT_OF_REACH


@pytest.mark.parametrize("heart", [heart.name for heart in UNUSUAL_HEARTS])
def test_a_heart_that_breaks_a_rule_of_thumb_fails_no_check(heart):
    runs, _, findings = judged(sound(heart))
    assert [finding.check.name for finding in findings if finding.verdict.value == "fail"] == []
    assert all(run.is_usable and not run.failed and run.accepted.all() for run in runs.values())


@pytest.mark.parametrize("sinus_depth", [0.06, 0.10])
@pytest.mark.parametrize("breaths_per_min", [9.0, 14.0])
def test_sinus_arrhythmia_is_no_reflex(sinus_depth, breaths_per_min):
    conditions = Conditions(
        duration_s=14.0, occlusion=Occlusion(onset_s=4.0), breathing=Breathing(breaths_per_min, 0.15, sinus_depth), rr_spread=0.02
    )
    window = simulated("normal", conditions).window
    assert window.inside.sum() >= 8


@pytest.mark.parametrize("spread", [0.04, 0.08])
def test_a_rhythm_that_varies_by_itself_keeps_its_window(spread):
    windows = [simulated("normal", Conditions(14.0, spread, occlusion=Occlusion(onset_s=4.0)), seed=seed).window for seed in range(6)]
    assert sum(window.ended_by == "reflex" for window in windows) <= 1


def test_breath_is_no_trend_wherever_the_run_begins_in_it():
    place = np.arange(24.0) * 0.8
    for breath_s in (3.3, 4.3, 5.4):
        for phase in np.linspace(0.0, 2.0 * np.pi, 9):
            swing = np.sin(2.0 * np.pi * place / breath_s + phase)
            noise = np.random.default_rng(3).standard_normal((2, 24))
            run = drawn(24, edv_ml=93.0 + 5.0 * swing + 0.4 * noise[0], edp_mmhg=10.0 + 1.5 * swing + 0.2 * noise[1], rr_s=0.8)
            assert change_of_preload(run).value < 0.02
            assert change_of_edp(run).value < 0.03
