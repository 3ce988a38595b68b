import csv
import hashlib
import io
import json
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone

import numpy as np
import pytest

from flows.sources.simulated.acquisition import Identity, Recipe, RunPlan, made, rest_and_ramp
from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.heart import heart_named
from flows.sources.simulated.package import MANIFEST, acquisition_files, csv_text, write_package
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.study.manifest import read_manifest

IDENTITY = Identity("tarn", "harbour", "H-1", "visit-1", "H-1-visit-1", datetime(2026, 2, 2, 9, 0, tzinfo=timezone(timedelta(hours=1))))
RUNS = (
    RunPlan("rest", Conditions(duration_s=5.0), 0.4),
    RunPlan("ramp", Conditions(duration_s=9.0, occlusion=Occlusion(onset_s=2.0, deflation_s=8.0)), 0.5),
)
RECIPE = Recipe(IDENTITY, heart_named("normal"), RUNS)
SENT_AT = datetime(2026, 2, 3, tzinfo=UTC)


@pytest.fixture(scope="module")
def acquisition():
    return made(RECIPE)


def test_the_manifest_keeps_the_contract(acquisition):
    manifest = read_manifest(acquisition_files(acquisition)["acquisition.json"], file="acquisition.json", protocol=None)
    assert manifest.acquisition == "H-1-visit-1"
    assert manifest.recorded_at == IDENTITY.recorded_at
    assert [run.kind for run in manifest.runs] == ["steady", "preload-reduction"]
    assert manifest.runs[1].manoeuvre == "caval-balloon"
    assert [(event.at_s, event.kind) for event in manifest.runs[1].events] == [(2.0, "occlusion-on"), (8.0, "occlusion-off")]
    for run in manifest.runs:
        assert (run.ended_at - run.started_at).total_seconds() == pytest.approx(5.0 if run.kind == "steady" else 9.0)
        assert run.heart_rate_per_min == pytest.approx(68.0, abs=3.0)


def test_the_reference_measured_the_same_heart(acquisition):
    reference, truth = acquisition.manifest["calibration"]["volume"]["reference"], acquisition.truth["rest"]
    assert reference["edv_ml"] == pytest.approx(truth.edv_ml, rel=0.03)
    assert reference["sv_ml"] == pytest.approx(reference["edv_ml"] - reference["esv_ml"], abs=0.11)


def test_raw_volume_comes_with_its_gain_and_parallel_volume():
    catheter = Catheter(volume_gain=0.8, volume_shift_ml=40.0, volume_delay_s=0.012)
    raw = made(replace(RECIPE, catheter=catheter, raw_volume=True, runs=RUNS[:1]))
    manifest = read_manifest(acquisition_files(raw)["acquisition.json"], file="acquisition.json", protocol=None)
    volume = manifest.runs[0].channels.volume
    assert volume.is_raw
    assert volume.delay_ms == pytest.approx(12.0)
    calibration = manifest.calibration.volume
    undone = (raw.columns["rest"]["v_ventricle"] - calibration.alpha_vc_ml) / calibration.alpha
    assert undone.max() == pytest.approx(raw.truth["rest"].beats.edv_ml.max(), rel=0.01)


def test_zeros_and_points_undo_the_sensor():
    catheter = Catheter(pressure_gain=1.04, pressure_shift_mmhg=0.7, zero_error_mmhg=1.0, drift_mmhg_per_hour=1.6)
    facts = made(replace(RECIPE, catheter=catheter, runs=RUNS[:1])).manifest["calibration"]["pressure"]
    gain = (facts["points"][1]["read_mmhg"] - facts["points"][0]["read_mmhg"]) / 100.0
    zeros = [(facts[name]["mmhg"] - facts["points"][0]["read_mmhg"]) / gain for name in ("zero_before", "zero_after")]
    hours = [datetime.fromisoformat(facts[name]["at"]) for name in ("zero_before", "zero_after")]
    assert gain == pytest.approx(1.04)
    assert zeros == pytest.approx([1.0, 1.0 + 1.6 * (hours[1] - hours[0]).total_seconds() / 3600.0], abs=0.02)


def test_channels_can_be_left_out():
    bare = made(replace(RECIPE, runs=RUNS[:1], with_ecg=False, with_time=False, reference=None, bsa_m2=None))
    files = acquisition_files(bare)
    manifest = read_manifest(files["acquisition.json"], file="acquisition.json", protocol=None)
    assert manifest.runs[0].channels.ecg is None
    assert manifest.runs[0].channels.time is None
    assert manifest.calibration.volume.reference is None
    assert files["rest.csv"].splitlines()[0] == b"p_ventricle,v_ventricle"


def test_csv_holds_the_samples_and_empty_cells_for_missing_ones():
    text = csv_text({"t_s": np.array([0.0, 0.004]), "p_ventricle": np.array([8.126, np.nan]), "ecg": np.array([0.1, -0.0004])})
    rows = list(csv.reader(io.StringIO(text)))
    assert rows == [["t_s", "p_ventricle", "ecg"], ["0.0000", "8.13", "0.100"], ["0.0040", "", "-0.000"]]


def test_a_package_lists_the_checksum_of_every_other_file(tmp_path, acquisition):
    write_package(tmp_path / "one", acquisition, SENT_AT)
    listed = dict(line.split("  ")[::-1] for line in (tmp_path / "one" / MANIFEST).read_text().splitlines())
    others = {path.name for path in (tmp_path / "one").iterdir()} - {MANIFEST}
    assert set(listed) == others == {"acquisition.json", "rest.csv", "ramp.csv"}
    for name, digest in listed.items():
        assert hashlib.sha256((tmp_path / "one" / name).read_bytes()).hexdigest() == digest
    assert {path.stat().st_mtime for path in (tmp_path / "one").iterdir()} == {SENT_AT.timestamp()}


def test_a_package_still_arriving_has_no_checksums(tmp_path, acquisition):
    write_package(tmp_path / "one", acquisition, SENT_AT, complete=False)
    assert {path.name for path in (tmp_path / "one").iterdir()} == {"acquisition.json", "rest.csv", "ramp.csv"}


def test_rest_and_ramp_name_their_stage():
    rest, ramp = rest_and_ramp("infusion", 0.8)
    assert (rest.run, ramp.run) == ("infusion-rest", "infusion-ramp")
    assert (rest.stage, ramp.stage) == ("infusion", "infusion")
    assert rest.conditions.occlusion is None
    assert ramp.conditions.occlusion is not None
    assert ramp.hour > rest.hour + rest.conditions.duration_s / 3600.0


def test_a_kind_of_run_that_is_not_there_is_said(acquisition):
    assert acquisition.run_of_kind("steady") == "rest"
    with pytest.raises(LookupError, match="saline"):
        acquisition.run_of_kind("saline")


def test_the_same_recipe_makes_the_same_bytes(acquisition):
    assert acquisition_files(made(RECIPE)) == acquisition_files(acquisition)
    assert acquisition_files(made(replace(RECIPE, seed=1))) != acquisition_files(acquisition)
    assert json.loads(acquisition_files(acquisition)["acquisition.json"])["format"] == 1
