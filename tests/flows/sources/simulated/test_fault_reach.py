import json
from dataclasses import replace

import numpy as np
import pytest

from flows.sources.simulated import calibration_faults, heart_faults, identity_faults, noise_faults, run_faults
from flows.sources.simulated.acquisition import ECG, PRESSURE, TIME, VOLUME, made
from flows.sources.simulated.corpus import clean_acquisition, faulty
from flows.sources.simulated.declared import believed
from flows.sources.simulated.faults import with_facts
from flows.sources.simulated.forms import WEIGHTS, as_conductance, as_segments, at_lower_rate, segment
from flows.sources.simulated.ladders import ACQUISITION_LADDERS, BEAT_LADDERS, LADDERS, RUN_LADDERS
from flows.sources.simulated.package import csv_bytes, csv_text
from flows.study.manifest import read_manifest

EVERY = (*ACQUISITION_LADDERS, *RUN_LADDERS, *BEAT_LADDERS)
SLOPES = {"Ees", "V0", "PRSW", "Ees_Ea"}
ENDS = {"EDP", "ESP", "Pmax", "Ea", "Ees_Ea"}
PRESSURE_SCALE = {"EDP", "ESP", "Pmax", "Ea", "SW", "dPdt_max", "dPdt_min", "Ees", "PRSW"}
VOLUME_SCALE = {"EDV", "ESV", "SV", "Ea", "SW", "Ees"}
VOLUME_SHIFT = {"EDV", "ESV", "EF", "V0"}
CLOCK = {"HR", "dPdt_max", "dPdt_min"}

REACHES = {
    "zero-missing": ENDS | {"V0"},
    "points-missing": PRESSURE_SCALE,
    "alpha-wrong": VOLUME_SCALE | {"V0"},
    "alpha-vc-wrong": VOLUME_SHIFT,
    "alpha-vc-sign-wrong": VOLUME_SHIFT,
    "calibration-stale": VOLUME_SCALE,
    "replicate-differs": {"Ees", "PRSW", "Ees_Ea"},
    "pressure-sent-in-kpa": PRESSURE_SCALE,
    "pressure-sent-in-cmh2o": PRESSURE_SCALE,
    "clock-misdeclared": CLOCK,
    "clock-stretched": CLOCK,
}
"""What the grossest severity moves by more than 5 %, no more and no less, where arithmetic says."""

HARMLESS = {
    "zero-drift",
    "offset-shown",
    "rezeroed",
    "gain-shown",
    "saline-disagrees",
    "reference-gain-wrong",
    "reference-offset-wrong",
    "run-copied",
    "run-copied-with-new-noise",
    "run-copied-with-new-ecg",
    "rate-misdeclared",
    "end-misdeclared",
    "ecg-hum-60",
    "ecg-noisy",
    "volume-late-as-declared",
    "respiration-undeclared",
}
"""What is declared undoes it, or no index is read from it: a query, and no wrong number."""


@pytest.fixture(scope="module")
def sound():
    return clean_acquisition("normal", 250.0, 1)[0]


@pytest.fixture(scope="module", params=EVERY, ids=lambda ladder: ladder.name)
def climbed(request, sound):
    severities = request.param.severities
    return request.param, faulty(sound, request.param, severities[0]), faulty(sound, request.param, severities[-1])


def moved(found, beyond=0.05):
    return {one.index for one in found.reached if one.share > beyond and not (one.index == "V0" and abs(one.change) < 3.0)}


def named(name):
    return next(ladder for ladder in EVERY if ladder.name == name)


def test_every_ladder_has_six_steps_and_a_name_of_its_own():
    assert all(len(ladder.severities) == len(set(ladder.severities)) == 6 for ladder in EVERY)
    assert len({ladder.name for ladder in EVERY}) == len(EVERY) > 70
    assert all(list(one.severities) in (sorted(one.severities), sorted(one.severities, reverse=True)) for one in EVERY)
    assert set(LADDERS).isdisjoint(EVERY)


def test_the_first_step_is_harmless_and_the_last_reaches_what_it_should(climbed):
    ladder, harmless, gross = climbed
    assert moved(harmless) == set() or ladder.name == "alpha-vc-missing", "without its declaration a parallel volume stays in"
    if ladder.name in REACHES:
        assert moved(gross, 0.08) == REACHES[ladder.name]
    elif ladder.name in HARMLESS:
        assert moved(gross, 0.07) == set()


def test_what_is_declared_stays_readable_and_the_sound_one_is_left_alone(climbed, sound):
    ladder, _, gross = climbed
    manifest = read_manifest(json.dumps(gross.acquisition.manifest).encode(), file="acquisition.json", protocol=None)
    assert {run.run for run in manifest.runs} == set(gross.acquisition.columns)
    for run in manifest.runs:
        named = {signal.column for signal in run.channels.signals().values()}
        assert (named <= set(gross.acquisition.columns[run.run])) is (ladder.name != "columns-misnamed" or run.kind == "saline")
    again = made(sound.recipe)
    assert again.manifest == sound.manifest
    for run, columns in again.columns.items():
        for name, values in columns.items():
            np.testing.assert_array_equal(sound.columns[run][name], values)
    assert gross.acquisition is not sound
    assert gross.expected or ladder.name in {"volume-late-as-declared", "ecg-hum-60", "ecg-noisy"}


def test_beats_named_are_beats_of_their_run(climbed):
    _, _, gross = climbed
    for expected in gross.expected:
        if expected.instants_s:
            beats = gross.acquisition.truth[expected.run].beats
            held = [((beats.start_s < at_s) & (at_s < beats.end_s)).sum() for at_s in expected.instants_s]
            assert held == [1] * len(held)


@pytest.mark.parametrize("name", [ladder.name for ladder in BEAT_LADDERS if ladder.name not in {"premature-beats", "aberrant-beats"}])
def test_a_fault_of_beats_changes_the_beats_it_names_and_no_others(sound, name):
    gross = faulty(sound, named(name), named(name).severities[-1])
    for expected in gross.expected:
        beats, columns = sound.truth[expected.run].beats, gross.acquisition.columns[expected.run]
        differs = np.zeros(columns[PRESSURE].size, dtype=bool)
        for column in (PRESSURE, VOLUME):
            differs |= ~np.isclose(columns[column], sound.columns[expected.run][column], rtol=0.0, atol=0.02)
        at_s = np.flatnonzero(differs) / 250.0
        touched = {float(m) for m, a, b in zip(beats.middle_s, beats.start_s, beats.end_s, strict=True) if ((a < at_s) & (at_s < b)).any()}
        assert touched == set(expected.instants_s)
        assert len(touched) == 3


def test_the_truth_of_the_patient_stays_whoever_was_recorded(sound):
    swapped = faulty(sound, named("subject-swapped"), 1.0)
    truth = clean_acquisition("normal", 250.0, 1)[1]
    assert swapped.truth == truth
    assert swapped.other is not None
    assert swapped.other.recipe.identity.subject != sound.recipe.identity.subject
    assert {"EDV", "SV", "Ees"} <= moved(swapped)
    for run, columns in swapped.acquisition.columns.items():
        np.testing.assert_array_equal(columns[PRESSURE], swapped.other.columns[run][PRESSURE])
    fibrillating = faulty(sound, named("rhythm-undeclared"), 0.26)
    assert fibrillating.acquisition.manifest["rhythm"] == "sinus"
    assert fibrillating.truth != truth


def test_a_copied_run_is_the_same_samples_unless_something_was_done_again(sound):
    plain, noisy, own_ecg = (
        inject(sound, 1.0).acquisition.columns["ramp-2"]
        for inject in (identity_faults.run_copied, identity_faults.run_copied_with_new_noise, identity_faults.run_copied_with_new_ecg)
    )
    first, second = sound.columns["ramp-1"], sound.columns["ramp-2"]
    for column in (PRESSURE, VOLUME, ECG):
        np.testing.assert_array_equal(plain[column], first[column])
    assert 0.3 < (noisy[PRESSURE] - first[PRESSURE]).std() < 0.5
    np.testing.assert_array_equal(own_ecg[ECG], second[ECG])
    half = identity_faults.run_copied(sound, 0.5).acquisition
    middle = half.columns["ramp-2"][PRESSURE].size // 2
    np.testing.assert_array_equal(half.columns["ramp-2"][PRESSURE][middle + 1 :], second[PRESSURE][middle + 1 :])
    beats = half.truth["ramp-2"].beats
    assert (np.diff(beats.start_s) > 0.3).all()


def test_a_rest_sent_as_an_occlusion_holds_no_ramp(sound):
    broken = identity_faults.rest_as_ramp(sound, 1.0).acquisition
    assert np.ptp(broken.truth["ramp-1"].beats.edv_ml) < 5.0
    assert not any(broken.truth["ramp-1"].beats.in_ramp)


def test_the_mains_stand_where_they_should_in_the_spectrum(sound):
    added = noise_faults.pressure_hum_60(sound, 5.0).acquisition.columns["rest"][PRESSURE] - sound.columns["rest"][PRESSURE]
    power = np.abs(np.fft.rfft(added))
    assert np.fft.rfftfreq(added.size, 1.0 / 250.0)[power.argmax()] == pytest.approx(60.0, abs=0.1)
    assert added.max() == pytest.approx(5.0, rel=0.02)


def test_a_line_answers_a_step_as_the_books_say():
    # Overshoot of a second-order system of damping ratio z: exp(-pi z / sqrt(1 - z2)); here 0.15, which is 62 %.
    step = np.concatenate([np.zeros(1000), np.ones(1000)])
    answer = noise_faults.led(step, 1000.0, 15.0, 0.15)
    assert answer.max() - 1.0 == pytest.approx(0.621, abs=0.01)
    peaks = np.flatnonzero((answer[1:-1] > answer[:-2]) & (answer[1:-1] > answer[2:]) & (answer[1:-1] > 1.0))
    assert 1000.0 / (peaks[1] - peaks[0]) == pytest.approx(15.0 * np.sqrt(1.0 - 0.15**2), rel=0.02)
    slow = noise_faults.led(step, 1000.0, 20.0, 4.0)
    assert slow.max() < 1.0
    assert slow[-1] == pytest.approx(1.0, abs=0.01)


def test_delays_move_a_channel_and_declared_ones_are_taken_out(sound):
    late = run_faults.volume_late(sound, 40.0).acquisition
    np.testing.assert_allclose(late.columns["rest"][VOLUME][10:], sound.columns["rest"][VOLUME][:-10], atol=1e-9)
    told = run_faults.volume_late_as_declared(sound, 40.0).acquisition
    inner = slice(100, -100)
    np.testing.assert_allclose(believed(told, "rest").volume_ml[inner], believed(sound, "rest").volume_ml[inner], atol=1e-9)


def test_segments_and_conductance_are_the_same_volume(sound):
    parts = as_segments(sound).columns["rest"]
    np.testing.assert_allclose(sum(parts[segment(one)] for one in range(1, len(WEIGHTS) + 1)), sound.columns["rest"][VOLUME])
    for form in (as_segments(sound), as_conductance(sound), at_lower_rate(sound, VOLUME, 2)):
        read_manifest(json.dumps(form.manifest).encode(), file="acquisition.json", protocol=None)
        assert np.abs(believed(form, "rest").volume_ml - believed(sound, "rest").volume_ml).max() < 2.5
    astray = as_segments(sound, 1.0).columns["rest"]
    assert np.corrcoef(astray[segment(5)], astray[segment(1)])[0, 1] < -0.99
    calibrated = made(replace(sound.recipe, raw_volume=False))
    with pytest.raises(ValueError, match="calibrated"):
        as_conductance(calibrated)


def test_litres_and_odd_clocks_keep_their_digits(sound):
    litres = run_faults.volume_sent_in_litres(sound, 1.0).acquisition.columns["rest"]
    for text in (csv_text(litres), csv_bytes(litres).decode()):
        shown = [float(line.split(",")[2]) for line in text.splitlines()[1:]]
        np.testing.assert_allclose(shown, litres[VOLUME], atol=1e-5)
    odd = run_faults.clock_stretched(sound, 1.01).acquisition.columns["rest"]
    stamps = [float(line.split(",")[0]) for line in csv_text(odd).splitlines()[1:]]
    np.testing.assert_allclose(stamps, odd[TIME], atol=1e-7)


def test_the_recorder_started_late_sees_the_deflation_alone(sound):
    late = heart_faults.occlusion_recorded_late(sound, 12.0).acquisition
    beats = late.truth["ramp-1"].beats
    assert beats.edv_ml[-1] > 1.15 * beats.edv_ml[0]
    assert beats.edv_ml.argmin() <= 1
    assert [event["kind"] for event in late.manifest["runs"][1]["events"]] == ["occlusion-off"]


def test_a_reflex_strengthens_and_quickens(sound):
    beats = heart_faults.reflex(sound, 0.3).acquisition.truth["ramp-1"].beats
    assert beats.ees_mmhg_per_ml[-3] > 1.08 * 2.4
    assert beats.rr_s[-3] < 0.9 * beats.rr_s[0]


def test_silent_re_zero_and_declared_one_differ_in_the_event_alone(sound):
    told, silent = (inject(sound, 10.0).acquisition for inject in (calibration_faults.rezeroed, calibration_faults.rezeroed_silently))
    for run, columns in told.columns.items():
        np.testing.assert_array_equal(columns[PRESSURE], silent.columns[run][PRESSURE])

    def without_event(manifest):
        manifest["runs"][1]["events"].pop(0)

    assert with_facts(told, without_event).manifest == silent.manifest
