from dataclasses import replace

import numpy as np
import pytest

from checks.beat import ranges
from checks.check import Verdict
from checks.verdicts import Rules, sentence
from flows.sources.simulated.heart import HEARTS
from metrics.signals.facts import RunFacts
from tests.checks.made_subjects import RAMP, REST, drawn, judged_run, never_improves, of, rejected, rerecorded, simulated, worst

P, F, N = Verdict.PASS, Verdict.FAIL, Verdict.NOT_EVALUATED
LEFT = RunFacts("drawn", "steady", sampling_rate_hz=200.0)
RIGHT = replace(LEFT, chamber="RV")
BETWEEN = {"LV": {}, "RV": {"pmax_mmhg": 28.0, "dpdt_max_mmhg_per_s": 350.0, "sw_mmhg_ml": 1200.0, "edp_mmhg": 5.0}}

RANGES = [
    ("range-pressure", "pmax_mmhg", ranges.PEAK_PRESSURE),
    ("range-edp", "edp_mmhg", ranges.END_DIASTOLIC_PRESSURE),
    ("range-edv", "edv_ml", ranges.END_DIASTOLIC_VOLUME),
    ("range-dpdt-max", "dpdt_max_mmhg_per_s", ranges.STEEPEST_RISE),
    ("range-stroke-work", "sw_mmhg_ml", ranges.STROKE_WORK),
]


def with_quantity(column, values, facts=LEFT):
    """A drawn run of an ordinary heart in which one quantity takes these values, beat by beat."""
    columns = BETWEEN[facts.chamber] | {column: np.asarray(values, dtype=np.float64)}
    return drawn(len(values), facts=facts, **columns)


@pytest.mark.parametrize(("name", "column", "card"), RANGES, ids=[name for name, _, _ in RANGES])
@pytest.mark.parametrize("facts", [LEFT, RIGHT], ids=["LV", "RV"])
def test_on_a_bound_passes_beyond_it_fails_and_no_number_is_not_evaluated(name, column, card, facts):
    limits = card.limits_for(facts.chamber)
    low, high = limits.fail_below, limits.fail_above
    values = [low, high, low - 0.01 * abs(low) - 0.01, high * 1.01, 0.5 * (low + high), np.nan]
    found = of(judged_run(with_quantity(column, values, facts)), name)
    assert found.verdict == (P, P, F, F, P, N)
    assert found.limit[2:4].tolist() == [low, high]


@pytest.mark.parametrize(("name", "column", "card"), RANGES, ids=[name for name, _, _ in RANGES])
def test_a_quantity_that_runs_away_never_improves_its_verdict(name, column, card):
    low, high = card.limits.fail_below, card.limits.fail_above
    middle = 0.5 * (low + high)
    for end in (4.0 * high, middle - 4.0 * (high - low)):
        found = of(judged_run(with_quantity(column, np.linspace(middle, end, 20))), name)
        assert (found.verdict[0], found.verdict[-1]) == (P, F)
        assert never_improves(found.verdict)


def test_stroke_volume_and_ejection_fraction_follow_from_the_two_volumes():
    subject = drawn(5, edv_ml=[120.0, 120.0, 500.0, 120.0, 120.0], esv_ml=[50.0, 119.5, 100.0, 2.0, 140.0])
    verdict = judged_run(subject)
    assert of(verdict, "range-stroke-volume").verdict == (P, F, F, P, F)
    assert of(verdict, "range-ejection-fraction").verdict == (P, F, P, F, F)


def test_a_heart_without_volume_has_no_ejection_fraction_and_none_of_its_beats_counts():
    verdict = judged_run(drawn(4, edv_ml=[0.0, 0.0, 0.0, 120.0], esv_ml=[0.0, 0.0, 0.0, 50.0]))
    assert of(verdict, "range-ejection-fraction").verdict == (N, N, N, P)
    assert verdict.accepted.tolist() == [False, False, False, True]


def test_the_right_ventricle_has_limits_of_its_own():
    low_pressure = {"pmax_mmhg": 15.0, "dpdt_max_mmhg_per_s": 150.0, "sw_mmhg_ml": 60.0}
    assert rejected(drawn(4, facts=RIGHT, **low_pressure)) == {}
    assert set(rejected(drawn(4, **low_pressure))) == {1, 2, 3, 4}
    assert set(rejected(drawn(4, facts=RIGHT))) == set()
    assert worst(drawn(4, facts=RIGHT, pmax_mmhg=200.0), "range-pressure") is F


def test_pressure_in_kilopascal_called_mmhg_is_no_ventricle():
    subject = simulated()
    pressure = subject.recording.channels["pressure"].samples * 0.133322387415
    found = judged_run(rerecorded(subject, pressure=pressure))
    assert of(found, "pressure-units").worst() is F
    assert set(of(found, "range-pressure").verdict) == {N}
    assert np.array_equal(found.accepted, judged_run(subject).accepted)


def test_volume_in_litres_called_ml_is_no_ventricle():
    subject = simulated()
    found = judged_run(rerecorded(subject, volume=subject.recording.channels["volume"].samples * 1e-3))
    assert of(found, "volume-units").worst() is F
    assert set(of(found, "range-edv").verdict) == {N}


@pytest.mark.parametrize("heart", [heart.name for heart in HEARTS])
def test_no_simulated_heart_is_out_of_range_even_during_an_occlusion(heart):
    for conditions in (REST, RAMP):
        verdict = judged_run(simulated(heart, conditions))
        names = [judged.check.name for judged in verdict.judged if judged.check.name.startswith("range-")]
        assert len(names) >= 7
        assert all(set(of(verdict, name).verdict) == {P} for name in names)


def test_a_beat_out_of_range_is_told_with_value_unit_and_limit():
    found = of(judged_run(with_quantity("pmax_mmhg", [120.0, 400.0, 120.0])), "range-pressure")
    assert sentence(found, 1) == "peak pressure of 400 mmHg lies beyond what a ventricle does (limit 320)"


def test_a_protocol_may_move_a_bound_of_a_range():
    subject = with_quantity("pmax_mmhg", [120.0, 180.0, 120.0])
    assert set(rejected(subject, Rules({"range-pressure": {"fail_above": 150.0}}))) == {2}


ORDER = {"dpdt_max_at": 10, "dpdt_min_at": 80, "esv_at": 60}


def landmarks(facts=LEFT, **places):
    """The verdict on a beat whose landmarks lie so many samples after its beginning; None: not found."""
    start = np.arange(4) * 200
    at = {name: start + place if place is not None else np.full(4, -1) for name, place in (ORDER | places).items()}
    return of(judged_run(drawn(4, facts=facts, **at)), "landmarks")


def test_landmarks_in_their_order_pass():
    assert set(landmarks().verdict) == {P}
    assert set(landmarks(esv_at=80).verdict) == {P}
    assert set(landmarks(esv_at=0).verdict) == {P}


@pytest.mark.parametrize(
    "places", [{"dpdt_max_at": 90}, {"dpdt_min_at": 205}, {"dpdt_max_at": 0}, {"esv_at": 90}, {"esv_at": -1}, {"dpdt_min_at": 5}]
)
def test_landmarks_out_of_order_fail(places):
    assert landmarks(**places).verdict[1:] == (F, F, F)


def test_the_right_ventricle_may_eject_past_its_steepest_fall():
    assert set(landmarks(esv_at=120).verdict) == {F}
    assert set(landmarks(RIGHT, esv_at=120).verdict) == {P}


@pytest.mark.parametrize("missing", ["dpdt_max_at", "dpdt_min_at", "esv_at"])
def test_a_landmark_that_was_not_found_leaves_the_beat_unjudged_and_so_rejected(missing):
    assert set(landmarks(**{missing: None}).verdict) == {N}
    subject = drawn(4, **{missing: np.full(4, -1)})
    lost = judged_run(subject)
    assert all("landmarks" in names for names in lost.rejected_by)
    told = [finding for finding in lost.findings if finding.check.name == "landmarks"]
    assert [(finding.beat, finding.decisive, finding.action) for finding in told] == [(beat, True, "reject") for beat in (1, 2, 3, 4)]


def test_the_more_landmarks_are_misplaced_the_larger_the_count():
    counts = [landmarks(**places).value[1] for places in ({}, {"esv_at": 90}, {"esv_at": 90, "dpdt_max_at": 95})]
    assert counts == [0.0, 1.0, 2.0]
    assert sentence(landmarks(esv_at=90), 0) == "1 of the beat's landmarks stand in the wrong order"
