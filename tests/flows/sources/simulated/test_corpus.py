import csv
import io
import json
from dataclasses import replace

import numpy as np
import pytest

from flows.sources.simulated import faults, signal_faults
from flows.sources.simulated.acquisition import PRESSURE, VOLUME, made
from flows.sources.simulated.corpus import (
    SALINE,
    Reach,
    Shelf,
    clean_acquisition,
    clean_recipe,
    faulty,
    hearts,
    reached,
    usual_catheter,
    without_noise,
)
from flows.sources.simulated.declared import believed, declared_run
from flows.sources.simulated.faults import with_facts
from flows.sources.simulated.ladders import Ladder
from flows.sources.simulated.package import csv_bytes, csv_text
from flows.sources.simulated.reading import SLOPES, STEADY, read_indices, recruitable_work_mmhg, true_indices
from flows.sources.simulated.rhythm import Breathing, Conditions
from flows.study.manifest import read_manifest

KINDS = ("normal", "right", "failing")
STAGE = "baseline"


def clean(heart="normal", rate_hz=250.0, **options):
    return clean_acquisition(heart, rate_hz, 1, **options)[0]


def quiet(heart="normal", rate_hz=250.0):
    recipe = clean(heart, rate_hz).recipe
    return made(replace(recipe, catheter=without_noise(recipe.catheter)))


def ladder(inject):
    return Ladder("one", inject, "1", (0.0,))


def moved(inject, severity, heart="normal"):
    return {reach.index: reach for reach in reached(clean(heart), ladder(inject), severity)}


def test_twelve_hearts_are_six_kinds_of_each_side():
    twelve = hearts(12)
    assert [heart.chamber for heart in twelve] == ["LV", "RV"] * 6
    assert len({heart.name for heart in twelve}) == 12
    with pytest.raises(ValueError, match="14 hearts"):
        hearts(15)


def test_catheters_differ_and_stay_usual():
    drawn = [usual_catheter(seed) for seed in range(40)]
    assert usual_catheter(3) == drawn[3]
    assert len(set(drawn)) == 40
    assert all(abs(one.pressure_gain - 1.0) < 0.02 and 0.7 < one.volume_gain < 0.9 for one in drawn)
    assert all(abs(1.25 * one.drift_mmhg_per_hour) < 2.0 for one in drawn)


@pytest.mark.parametrize("heart", KINDS)
def test_without_noise_the_reading_is_the_truth(heart):
    acquisition = quiet(heart)
    truth, reading = true_indices(acquisition), read_indices(acquisition)
    assert set(truth) == set(reading) == {(STAGE, index) for index in (*STEADY, *SLOPES)}
    for key, value in truth.items():
        assert reading[key] == pytest.approx(value, rel=0.02, abs=0.05), key


def test_noise_hardly_moves_the_reading():
    acquisition, truth = clean_acquisition("normal", 1000.0, 1)
    reading = read_indices(acquisition)
    assert max(abs(reading[key] / value - 1.0) for key, value in truth.items() if key[1] != "V0") < 0.05


def test_a_clean_acquisition_keeps_the_contract_and_holds_every_kind_of_run():
    acquisition = clean(conditions={"rest": Conditions(duration_s=20.0, breathing=Breathing())})
    manifest = read_manifest(declarations(acquisition), file="acquisition.json", protocol=None)
    assert [run.kind for run in manifest.runs] == ["steady", "preload-reduction", "preload-reduction", "saline", "saline"]
    assert manifest.runs[0].respiration == "free"
    assert [event.kind for event in manifest.runs[3].events] == ["injection"]
    assert len(manifest.calibration.pressure.points) == 4
    assert [run.run for run in read_manifest(declarations(clean(ramps=1, salines=0)), file="", protocol=None).runs] == ["rest", "ramp-1"]


def declarations(acquisition):

    return json.dumps(acquisition.manifest).encode()


def test_leaking_hearts_say_so():
    assert clean("mitral-leak").manifest["subject_facts"]["conditions"] == ["mitral-regurgitation"]


def test_saline_meets_the_identity_at_alpha_times_the_parallel_volume():
    steady = replace(SALINE, rr_spread=0.0)
    recipe = clean_recipe("failing", 250.0, 1, conditions={"saline-1": steady})
    acquisition = made(replace(recipe, catheter=without_noise(recipe.catheter)))
    catheter = acquisition.recipe.catheter
    beats, columns = acquisition.truth["saline-1"].beats, acquisition.columns["saline-1"]
    times = np.arange(columns[VOLUME].size) / 250.0
    volume = np.interp(times + catheter.volume_delay_s, times, columns[VOLUME])
    rising = (beats.start_s > 3.0) & (beats.end_s < 8.5)
    largest = np.interp(beats.start_s[rising], times, volume)
    smallest = [volume[(times >= a) & (times <= b)].min() for a, b in zip(beats.start_s[rising], beats.end_s[rising], strict=True)]
    slope, intercept = np.polyfit(largest, smallest, 1)
    assert np.ptp(largest) > 5.0
    assert intercept / (1.0 - slope) == pytest.approx(catheter.volume_shift_ml, abs=0.5)


def test_what_is_believed_has_everything_declared_taken_out():
    acquisition = quiet()
    signals, beats = believed(acquisition, "rest"), acquisition.truth["rest"].beats
    assert np.interp(beats.start_s, signals.true_s, signals.volume_ml) == pytest.approx(beats.edv_ml, abs=0.3)
    assert np.interp(beats.end_systole_s, signals.true_s, signals.pressure_mmhg) == pytest.approx(beats.esp_mmhg, abs=0.3)
    with pytest.raises(LookupError, match="nowhere"):
        declared_run(acquisition.manifest, "nowhere")


def test_units_runs_own_calibration_and_zeros_across_a_break_are_believed():
    acquisition = quiet()
    plain = believed(acquisition, "rest")

    def in_kpa(manifest):
        manifest["runs"][0]["channels"]["pressure"]["unit"] = "kPa"
        manifest["runs"][0]["calibration"] = {"volume": {"alpha": 2.0, "alpha_vc_ml": 10.0}}

    found = believed(with_facts(acquisition, in_kpa), "rest")
    recorded = acquisition.columns["rest"]
    assert found.pressure_mmhg == pytest.approx(recorded[PRESSURE] * 7.50062, rel=1e-5)
    assert found.volume_ml.max() == pytest.approx((recorded[VOLUME].max() - 10.0) / 2.0, abs=0.1)

    def zeroed_within(manifest):
        pressure = manifest["calibration"]["pressure"]
        pressure["zeros"] = [{"at": manifest["runs"][0]["started_at"], "mmhg": pressure["zero_before"]["mmhg"] + 5.0}]
        manifest["runs"][1]["events"].append({"at_s": 0.0, "kind": "re-zero"})

    before = believed(with_facts(acquisition, zeroed_within), "rest").pressure_mmhg
    after = believed(with_facts(acquisition, zeroed_within), "ramp-1").pressure_mmhg
    assert (plain.pressure_mmhg - before).mean() == pytest.approx(5.0, abs=0.3)
    assert after.mean() == pytest.approx(believed(acquisition, "ramp-1").pressure_mmhg.mean(), abs=0.5)


def test_conductance_and_segments_are_believed_too():
    acquisition = quiet()

    def as_segments(manifest):
        volume = manifest["runs"][0]["channels"].pop("volume")
        manifest["runs"][0]["channels"]["segments"] = [volume | {"unit": "mS"}, volume | {"unit": "mS", "column": PRESSURE}]
        manifest["calibration"]["volume"]["segments_used"] = [1]
        manifest["sensors"]["volume"] |= {"electrode_spacing_cm": 2.0, "blood_resistivity_ohm_cm": 250.0}

    found = believed(with_facts(acquisition, as_segments), "rest")
    assert found.volume_ml == pytest.approx(believed(acquisition, "rest").volume_ml)


@pytest.mark.parametrize("heart", KINDS)
def test_constant_errors_reach_what_arithmetic_says(heart):
    gain = moved(lambda sound, excess: faults.Injected(faults.scaled(sound, VOLUME, 1.0 + excess), ()), 0.2, heart)
    assert [gain[index].share for index in ("SV", "SW")] == pytest.approx([0.2, 0.2], abs=0.002)
    assert gain["Ees"].faulty == pytest.approx(gain["Ees"].sound / 1.2, rel=0.005)
    assert gain["PRSW"].share < 0.005
    offset = moved(faults.zero_missing, 5.0, heart)
    assert offset["ESP"].change == pytest.approx(5.0, abs=1.5)
    assert offset["SW"].share < 0.001
    assert offset["Ees"].share < 0.005
    assert offset["dPdt_max"].share < 0.001


def test_a_clock_too_fast_reaches_rates_alone():
    found = moved(faults.clock_misdeclared, 2.0)
    assert found["HR"].faulty == pytest.approx(2.0 * found["HR"].sound, rel=0.001)
    assert found["dPdt_max"].faulty == pytest.approx(2.0 * found["dPdt_max"].sound, rel=0.01)
    assert found["SV"].share < 0.02


def test_lost_rows_do_not_shift_the_beats_after_them():
    found = moved(signal_faults.samples_lost, 1.5)
    assert max(reach.share for reach in found.values() if reach.index != "V0") < 0.02


def test_an_index_nobody_can_read_is_reached_without_bound():
    assert Reach(STAGE, "Ees", 2.0, float("nan")).share == float("inf")
    assert Reach(STAGE, "Ees", 2.0, 1.0).change == -1.0
    found = moved(faults.ramp_missing, 1.0)
    assert found["Ees"].share == float("inf")
    assert found["SV"].share == 0.0


def test_a_fault_leaves_the_truth_of_the_patient():
    acquisition, truth = clean_acquisition("normal", 250.0, 1)
    found = faulty(acquisition, ladder(faults.volume_gain_wrong), 0.3)
    assert found.truth == truth
    assert found.expected
    assert found.acquisition.columns["rest"][VOLUME] == pytest.approx(1.3 * acquisition.columns["rest"][VOLUME])


def test_true_recruitable_work_follows_the_beats_asked_for():
    acquisition = clean()
    beats = acquisition.truth["ramp-1"].beats
    ramp = np.flatnonzero(beats.in_ramp)
    whole, early = (recruitable_work_mmhg(acquisition, "ramp-1", beats.middle_s[some]) for some in (ramp, ramp[:5]))
    assert whole == pytest.approx(recruitable_work_mmhg(acquisition, "ramp-1"))
    assert early != pytest.approx(whole, rel=1e-4)
    assert np.isnan(recruitable_work_mmhg(acquisition, "ramp-1", beats.middle_s[:2]))
    assert true_indices(acquisition, {"ramp-1": beats.middle_s[ramp[:5]]})[STAGE, "PRSW"] != true_indices(acquisition)[STAGE, "PRSW"]


def test_quick_csv_holds_the_same_numbers():
    columns = dict(clean().columns["rest"]) | {PRESSURE: clean().columns["rest"][PRESSURE].copy()}
    columns[PRESSURE][5] = np.nan
    quick, slow = (list(csv.reader(io.StringIO(text))) for text in (csv_bytes(columns).decode(), csv_text(columns)))
    assert quick[0] == slow[0]
    assert quick[6][1] == ""
    numbers = [[float(cell or "nan") for cell in row] for row in quick[1:]]
    np.testing.assert_array_equal(numbers, [[float(cell or "nan") for cell in row] for row in slow[1:]])


def test_a_shelf_writes_a_content_once_and_forgets_the_oldest(tmp_path):
    shelf, acquisition = Shelf(tmp_path / "shelf", most=7), clean()
    first = shelf.files(acquisition)
    assert set(first) == {"acquisition.json", *(f"{run}.csv" for run in acquisition.columns)}
    stamps = {path: path.stat().st_mtime_ns for path in first.values()}
    assert shelf.files(acquisition) == first
    assert {path: path.stat().st_mtime_ns for path in first.values()} == stamps
    shown = faults.heart_rate_misdeclared(acquisition, 1.5).acquisition
    assert shelf.files(shown)["rest.csv"] == first["rest.csv"]
    assert shelf.files(shown)["acquisition.json"] != first["acquisition.json"]
    louder = faults.scaled(acquisition, PRESSURE, 2.0)
    kept = shelf.files(louder)
    assert all(path.exists() for path in kept.values())
    assert len(list((tmp_path / "shelf").iterdir())) == 7
    manifest = read_manifest(kept["acquisition.json"].read_bytes(), file="acquisition.json", protocol=None, files=list(kept))
    assert manifest.acquisition == "normal-1-visit-1"
