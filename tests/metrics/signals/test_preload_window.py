import numpy as np
import pytest

from flows.sources.simulated.rhythm import Breathing, Conditions, Occlusion
from metrics.signals.facts import RunFacts
from metrics.signals.preload import preload_window
from tests.bench.accuracy_of_clean import facts_of
from tests.metrics.made_beats import made_beats
from tests.metrics.recorded_hearts import heart_runs, nearest_true, run_in_memory, signals_and_beats

RATE_HZ = 250.0
REST, FALL, RISE = [120.0] * 8, list(np.linspace(117.0, 80.0, 12)), list(np.linspace(85.0, 120.0, 6))
EDV_ML = REST + FALL + RISE
COUNT = len(EDV_ML)
NADIR = len(REST) + len(FALL) - 2
"""One beat before the smallest load: a median of 5 beats rounds off a nadir as sharp as this one."""


def window(edv_ml=EDV_ML, *, rr_s=0.8, rate_hz=RATE_HZ, **facts):
    beats = made_beats(len(edv_ml), rr_s=rr_s, rate_hz=rate_hz, edv_ml=edv_ml)
    return preload_window(beats, RunFacts("ramp", "preload-reduction", **facts), rate_hz)


def on(beat, rr_s=0.8):
    """An occlusion that begins just before a beat."""
    return ((beat * rr_s - 0.05, "occlusion-on"),)


def test_a_declared_onset_is_believed_and_the_nadir_ends_the_window():
    found = window(events=on(8))
    assert (found.onset_at, found.last_at, found.found_by, found.ended_by) == (8, NADIR, "event", "nadir")
    assert np.flatnonzero(found.inside).tolist() == list(range(8, NADIR + 1))


def test_an_event_inside_a_beat_begins_the_window_with_the_next():
    assert window(events=((8 * 0.8 - 0.3, "occlusion-on"),)).onset_at == 8
    assert window(events=((8 * 0.8 + 0.1, "occlusion-on"),)).onset_at == 9


def test_events_are_timed_by_the_signals_not_by_the_declared_rate():
    for rate_hz in (100.0, 1000.0):
        assert window(events=on(8), rate_hz=rate_hz, sampling_rate_hz=360.0).onset_at == 8


def test_an_onset_not_declared_is_found_from_the_load():
    found = window()
    assert found.found_by == "load"
    assert abs(found.onset_at - 8) <= 1
    assert found.last_at == NADIR


def test_an_onset_declared_after_the_nadir_is_no_onset():
    assert window(events=on(23)).found_by == "load"
    assert window(events=((1e6, "occlusion-on"),)).found_by == "load"


@pytest.mark.parametrize("declared", [1, 14])
def test_an_event_timed_by_another_clock_places_no_window(declared):
    found = window([120.0] * 6 + EDV_ML, events=on(declared + (6 if declared > 8 else 0)))
    assert found.found_by == "load"
    assert abs(found.onset_at - 14) <= 1


def test_of_two_occlusions_the_last_before_the_deepest_load_counts():
    twice = EDV_ML + REST + [value - 3.0 for value in FALL] + RISE
    found = window(twice, events=on(8) + on(COUNT + 8))
    assert found.onset_at == COUNT + 8
    assert COUNT + NADIR - 2 <= found.last_at <= COUNT + NADIR


def test_the_deflation_ends_the_window_before_the_nadir():
    found = window(events=(*on(8), (15 * 0.8 + 0.1, "occlusion-off")))
    assert (found.last_at, found.ended_by) == (14, "deflation")
    late = window(events=(*on(8), (25 * 0.8, "occlusion-off")))
    assert (late.last_at, late.ended_by) == (NADIR, "nadir")
    before = window(events=((2.0, "occlusion-off"), *on(8)))
    assert (before.last_at, before.ended_by) == (NADIR, "nadir")


@pytest.mark.parametrize("quicker", [0.8, 1.25])
def test_the_window_ends_before_heart_rate_leaves_its_band(quicker):
    rr_s = [0.8] * 14 + [0.8 * quicker] * (COUNT - 14)
    found = window(rr_s=rr_s, events=on(8))
    assert (found.last_at, found.ended_by) == (13, "reflex")


def test_a_change_of_heart_rate_within_five_per_cent_is_no_reflex():
    assert window(rr_s=[0.8] * 14 + [0.765] * (COUNT - 14), events=on(8)).ended_by == "nadir"


def test_a_change_of_heart_rate_within_ten_per_cent_is_no_reflex_in_a_rhythm_that_varies():
    rr_s = [0.8, 0.84] * 7 + [0.78, 0.82] * ((COUNT - 14) // 2 + 1)
    assert window(rr_s=rr_s[:COUNT], events=on(8)).ended_by == "nadir"


def test_the_window_ends_where_the_rise_of_heart_rate_began():
    rising = [0.8 / (1.0 + 0.01 * number) for number in range(COUNT - 12)]
    found = window(rr_s=[0.8] * 12 + rising, events=on(8))
    assert found.ended_by == "reflex"
    assert found.last_at == 14


def test_one_premature_beat_ends_no_window():
    rr_s = [0.8] * COUNT
    rr_s[13], rr_s[14] = 0.5, 1.1
    found = window(rr_s=rr_s)
    assert (found.last_at, found.ended_by) == (NADIR, "nadir")


def test_declared_fibrillation_is_never_cut_for_its_rate():
    rr_s = np.random.default_rng(3).uniform(0.5, 1.2, COUNT)
    assert window(rr_s=rr_s, rhythm="atrial-fibrillation").ended_by == "nadir"
    assert window(rr_s=[0.8] * 12 + [0.5] * (COUNT - 12), rhythm="atrial-fibrillation").ended_by == "nadir"


def test_a_reflex_at_the_very_onset_leaves_one_beat():
    found = window(rr_s=[0.8] * 8 + [0.5] * (COUNT - 8), events=on(8))
    assert found.ended_by == "reflex"
    assert found.inside.sum() == found.last_at - found.onset_at + 1 >= 1


def test_beats_without_a_volume_are_bridged():
    edv_ml = np.array(EDV_ML)
    edv_ml[[0, 1, 2, 3, 10, 11, 12, 13, 14, 15, 16]] = np.nan
    found = window(edv_ml, events=on(8))
    assert found.onset_at == 8
    assert NADIR - 2 <= found.last_at <= NADIR


def test_runs_too_short_or_without_volume_have_no_window():
    assert window([]) is None
    assert window([120.0, 100.0]) is None
    assert window([np.nan] * 10) is None


def test_a_steady_run_has_a_window_all_the_same():
    found = window([120.0] * 10)
    assert found.inside.any()


def true_ramp(run):
    return np.flatnonzero(np.asarray(run.truth.beats.in_ramp))


@pytest.mark.parametrize("heart", ["normal", "small", "fast", "failing", "right", "right-loaded"])
@pytest.mark.parametrize("catheter", ["noiseless", "noisy"])
@pytest.mark.parametrize("is_declared", [True, False])
def test_the_ramp_of_a_simulated_heart(heart, catheter, is_declared):
    run = heart_runs(heart, catheter=catheter)["ramp"]
    signals, beats = signals_and_beats(run)
    found = preload_window(beats, facts_of(run, **({} if is_declared else {"events": ()})), signals.sampling_rate_hz)
    own, _ = nearest_true(run, beats, 250.0)
    true = true_ramp(run)
    assert abs(own[found.onset_at] - true[0]) <= (0 if is_declared else 3)
    assert true[-1] - own[found.last_at] <= 3  # near its floor the load moves less than noise does
    assert found.ended_by == "nadir"


def test_the_reflex_of_a_simulated_heart():
    run = run_in_memory("normal", Conditions(duration_s=22.0, occlusion=Occlusion(onset_s=5.0, reflex=0.5, reflex_delay_s=5.0)))
    signals, beats = signals_and_beats(run)
    found = preload_window(beats, facts_of(run), signals.sampling_rate_hz)
    assert found.ended_by == "reflex"
    last_s = beats.start[found.last_at] / 250.0
    assert 9.0 < last_s < 13.5
    rest_s = np.median(beats.rr_s[: found.onset_at])
    assert np.abs(rest_s / np.median(beats.rr_s[found.last_at - 4 : found.last_at + 1]) - 1.0) < 0.1


def test_the_deflation_of_a_simulated_heart():
    run = run_in_memory("normal", Conditions(duration_s=18.0, occlusion=Occlusion(onset_s=4.0, deflation_s=11.0)))
    signals, beats = signals_and_beats(run)
    for events in (run.events, run.events[:1], ()):
        found = preload_window(beats, facts_of(run, events=events), signals.sampling_rate_hz)
        assert beats.end[found.last_at] / 250.0 < 13.0
        assert found.inside.sum() >= 5


def test_breathing_through_an_occlusion():
    run = run_in_memory("normal", Conditions(duration_s=18.0, occlusion=Occlusion(onset_s=5.0), breathing=Breathing()))
    signals, beats = signals_and_beats(run)
    found = preload_window(beats, facts_of(run), signals.sampling_rate_hz)
    assert beats.start[found.onset_at] / 250.0 == pytest.approx(5.0, abs=1.0)
    assert found.inside.sum() >= 8
