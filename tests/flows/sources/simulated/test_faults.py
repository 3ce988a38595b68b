import copy
from datetime import UTC, datetime

import numpy as np
import pytest

from flows.sources.simulated import faults, signal_faults
from flows.sources.simulated.acquisition import ECG, PRESSURE, TIME, VOLUME, Identity, Recipe, RunPlan, made
from flows.sources.simulated.heart import heart_named
from flows.sources.simulated.ladders import LADDERS
from flows.sources.simulated.package import acquisition_files
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.study.manifest import read_manifest

SOUND = made(
    Recipe(
        Identity("tarn", "harbour", "H-1", "visit-1", "H-1-visit-1", datetime(2026, 2, 2, 9, 0, tzinfo=UTC)),
        heart_named("normal"),
        (
            RunPlan("rest", Conditions(duration_s=20.0), 0.4),
            RunPlan("ramp", Conditions(duration_s=11.0, occlusion=Occlusion(onset_s=2.0)), 0.5),
        ),
    )
)


def declared(injected, run: str):
    return next(one for one in injected.acquisition.manifest["runs"] if one["run"] == run)


def change(injected, run: str, column: str):
    return injected.acquisition.columns[run][column] - SOUND.columns[run][column]


@pytest.mark.parametrize("ladder", LADDERS, ids=lambda ladder: ladder.name)
def test_every_fault_leaves_a_package_the_contract_accepts_and_the_sound_one_alone(ladder):
    manifest, columns = copy.deepcopy(SOUND.manifest), copy.deepcopy(dict(SOUND.columns))
    injected = ladder.inject(SOUND, ladder.severities[-1])
    files = acquisition_files(injected.acquisition)
    read_manifest(files["acquisition.json"], file="acquisition.json", protocol=None, files=list(files))
    assert injected.expected
    assert {one.run for one in injected.expected} <= {None, *SOUND.columns}
    assert files != acquisition_files(SOUND)
    assert manifest == SOUND.manifest
    for run, values in columns.items():
        for name in values:
            np.testing.assert_array_equal(values[name], SOUND.columns[run][name])


@pytest.mark.parametrize("ladder", LADDERS, ids=lambda ladder: ladder.name)
def test_instants_lie_inside_true_beats(ladder):
    injected = ladder.inject(SOUND, ladder.severities[-1])
    for expected in injected.expected:
        if expected.instants_s:
            beats = injected.acquisition.truth[expected.run].beats
            for instant in expected.instants_s:
                assert ((beats.start_s < instant) & (instant < beats.end_s)).sum() == 1


def test_a_drift_stands_in_signals_and_readings_alike():
    injected = faults.zero_drift(SOUND, 7.0)
    pressure = injected.acquisition.manifest["calibration"]["pressure"]
    assert pressure["zero_after"]["mmhg"] - pressure["zero_before"]["mmhg"] == pytest.approx(7.0)
    assert change(injected, "rest", PRESSURE) == pytest.approx(7.0 / 1.25 * 0.4, abs=0.1)
    assert change(injected, "ramp", PRESSURE).mean() == pytest.approx(7.0 / 1.25 * 0.5, abs=0.1)


def test_without_a_zero_nothing_tells_the_offset():
    injected = faults.zero_missing(SOUND, 4.0)
    assert set(injected.acquisition.manifest["calibration"]["pressure"]) == {"points"}
    assert change(injected, "rest", PRESSURE) == pytest.approx(4.0)


def test_a_gain_shows_in_the_points():
    injected = faults.gain_shown(SOUND, 0.25)
    points = injected.acquisition.manifest["calibration"]["pressure"]["points"]
    assert points[1]["read_mmhg"] - points[0]["read_mmhg"] == pytest.approx(125.0)
    ratio = injected.acquisition.columns["rest"][PRESSURE].max() / SOUND.columns["rest"][PRESSURE].max()
    assert ratio == pytest.approx(1.25, abs=0.01)


def test_volume_faults_leave_the_reference_true():
    for injected in (faults.volume_gain_wrong(SOUND, 0.5), faults.parallel_volume_wrong(SOUND, 30.0)):
        assert injected.acquisition.manifest == SOUND.manifest
    assert change(faults.parallel_volume_wrong(SOUND, 30.0), "ramp", VOLUME) == pytest.approx(30.0)
    np.testing.assert_allclose(
        faults.volume_gain_wrong(SOUND, 0.5).acquisition.columns["rest"][VOLUME], 1.5 * SOUND.columns["rest"][VOLUME], rtol=1e-12
    )


@pytest.mark.parametrize(
    ("inject", "gone", "left"), [(faults.alpha_missing, "alpha", "alpha_vc_ml"), (faults.alpha_vc_missing, "alpha_vc_ml", "alpha")]
)
def test_a_raw_volume_without_one_constant(inject, gone, left):
    injected = inject(SOUND, 0.8)
    volume = injected.acquisition.manifest["calibration"]["volume"]
    assert gone not in volume
    assert left in volume
    assert declared(injected, "rest")["channels"]["volume"]["calibrated"] is False


def test_a_fluid_filled_line_rings_and_keeps_the_mean():
    injected = faults.fluid_filled(SOUND, 12.0)
    rung, plain = injected.acquisition.columns["rest"][PRESSURE], SOUND.columns["rest"][PRESSURE]
    assert rung[500:].mean() == pytest.approx(plain[500:].mean(), rel=0.02)
    assert rung.max() > plain.max() + 2.0
    assert injected.acquisition.manifest["sensors"]["pressure"]["kind"] == "fluid-filled"


def test_a_missing_ramp_and_a_shallow_one():
    assert list(faults.ramp_missing(SOUND).acquisition.columns) == ["rest"]
    shallow = faults.occlusion_shallow(SOUND, 0.9).acquisition.truth["ramp"].beats
    assert shallow.edv_ml.min() > 0.9 * shallow.edv_ml.max()
    deep = SOUND.truth["ramp"].beats
    assert deep.edv_ml.min() < 0.75 * deep.edv_ml.max()


def test_premature_beats_are_named_with_the_beats_after_them():
    injected = faults.premature_beats(SOUND, 0.6)
    early, after = injected.expected
    beats = injected.acquisition.truth["rest"].beats
    assert [early.check, after.check] == ["cycle-length", "post-premature"]
    assert len(early.instants_s) == len(after.instants_s) == 2
    named = [int(np.searchsorted(beats.end_s, instant)) for instant in early.instants_s]
    assert all(beats.premature[beat] for beat in named)
    assert [int(np.searchsorted(beats.end_s, instant)) for instant in after.instants_s] == [beat + 1 for beat in named]
    assert not any(SOUND.truth["rest"].beats.premature)


def test_rates_and_clocks_that_lie():
    assert declared(faults.rate_misdeclared(SOUND, 1.25), "rest")["sampling_rate_hz"] == pytest.approx(312.5)
    clock = faults.clock_misdeclared(SOUND, 1.25)
    assert TIME not in clock.acquisition.columns["ramp"]
    assert "time" not in declared(clock, "ramp")["channels"]
    assert {one.check for one in clock.expected} == {"duration", "heart-rate-agreement", "clock-agreement"}
    rate = faults.heart_rate_misdeclared(SOUND, 1.5)
    assert declared(rate, "rest")["heart_rate_per_min"] == pytest.approx(1.5 * 68.0, abs=5.0)
    late = declared(signal_faults.end_misdeclared(SOUND, 10.0), "rest")
    assert (datetime.fromisoformat(late["ended_at"]) - datetime.fromisoformat(late["started_at"])).total_seconds() == pytest.approx(30.0)


def test_a_column_is_misnamed_in_one_run_only():
    injected = faults.column_misnamed(SOUND)
    assert declared(injected, "rest")["channels"]["pressure"]["column"] not in injected.acquisition.columns["rest"]
    assert declared(injected, "ramp")["channels"]["pressure"]["column"] == PRESSURE


def test_lost_samples_leave_a_jump_in_the_stamps_of_the_beats_named():
    injected = signal_faults.samples_lost(SOUND, 1.2)
    stamps = injected.acquisition.columns["rest"][TIME]
    at = int(np.diff(stamps).argmax())
    assert np.diff(stamps)[at] == pytest.approx(1.204)
    beats = SOUND.truth["rest"].beats
    gone = [(stamps[at] < end) and (start < stamps[at + 1]) for start, end in zip(beats.start_s, beats.end_s, strict=True)]
    assert sum(gone) == len(injected.expected[0].instants_s) >= 2
    assert all(values.size == stamps.size for values in injected.acquisition.columns["rest"].values())


def test_scattered_samples_are_missing_by_their_share():
    columns = signal_faults.samples_scattered(SOUND, 0.2).acquisition.columns["rest"]
    assert np.isnan(columns[PRESSURE]).mean() == pytest.approx(0.2, abs=0.01)
    np.testing.assert_array_equal(np.isnan(columns[PRESSURE]), np.isnan(columns[VOLUME]))
    assert not np.isnan(columns[ECG]).any()


def test_stamps_stand_twice_or_run_backwards():
    repeated = np.diff(signal_faults.stamps_repeated(SOUND, 0.4).acquisition.columns["rest"][TIME])
    assert (repeated == 0.0).sum() == 50
    assert (repeated >= 0.0).all()
    backwards = np.diff(signal_faults.time_backwards(SOUND, 2.0).acquisition.columns["rest"][TIME])
    assert (backwards < 0.0).sum() == 1


def test_frozen_signals_stand_still_for_their_time():
    injected = signal_faults.flat_line(SOUND, 1.0)
    for column in (PRESSURE, VOLUME):
        still = np.diff(injected.acquisition.columns["rest"][column]) == 0.0
        longest = max(len(run) for run in "".join("x" if one else " " for one in still).split())
        assert longest == pytest.approx(249, abs=1)
    np.testing.assert_array_equal(injected.acquisition.columns["ramp"][PRESSURE], SOUND.columns["ramp"][PRESSURE])


def test_a_rail_cuts_every_run_that_reaches_it():
    injected = signal_faults.pressure_clipped(SOUND, 0.2)
    assert {one.run for one in injected.expected} == {"rest", "ramp"}
    top = injected.acquisition.columns["rest"][PRESSURE]
    assert (top == top.max()).sum() > 100
    untouched = signal_faults.volume_clipped(SOUND, 0.0)
    assert untouched.expected == ()


def test_a_step_of_volume_opens_two_loops():
    injected = signal_faults.volume_stepped(SOUND, 25.0)
    moved = np.round(change(injected, "rest", VOLUME), 6)
    assert set(np.unique(moved)) == {0.0, 25.0}
    edges_s = SOUND.columns["rest"][TIME][np.flatnonzero(np.diff(moved))]
    beats = SOUND.truth["rest"].beats
    opened = beats.middle_s[[int(np.searchsorted(beats.end_s, edge)) for edge in edges_s]]
    assert injected.expected[0].instants_s == pytest.approx(tuple(opened))


def test_units_mixed_up():
    kpa = signal_faults.pressure_in_kpa(SOUND).acquisition.columns["rest"][PRESSURE]
    assert kpa.max() == pytest.approx(SOUND.columns["rest"][PRESSURE].max() * 0.1333, rel=1e-3)
    assert signal_faults.volume_times(SOUND, 10.0).acquisition.columns["rest"][VOLUME].max() > 1000.0
