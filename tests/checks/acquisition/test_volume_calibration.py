from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict, judge
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import sentence
from metrics.signals.facts import AcquisitionFacts, ReferenceVolumes, RunFacts, VolumeCalibration
from tests.checks.made_subjects import CHECKS, drawn, never_improves

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED


STAGES = (("rest", (120.0, 50.0)), ("infusion", (100.0, 10.0)))


def steady(edv_ml, esv_ml, *, kind="steady", accepted=True, count=10):
    subject = drawn(count, edv_ml=edv_ml, esv_ml=esv_ml, facts=RunFacts("rest", kind, sampling_rate_hz=200.0))
    return RunSubject(subject.facts, subject.recording, subject.signals, subject.beats, np.full(count, accepted))


def found(name, reference, *runs, conditions=()):
    check = CHECKS[name]
    facts = AcquisitionFacts(reference=reference, conditions=frozenset(conditions))
    return judge(check, AcquisitionSubject(facts, tuple(runs)), check.limits)


def stroke(measured_ml, **reference):
    """The verdict on a heart of that stroke volume against a reference of 70 mL."""
    values = {"source": "CMR", "edv_ml": 120.0, "esv_ml": 50.0, "sv_ml": 70.0} | reference
    return found("reference-stroke-volume", ReferenceVolumes(**values), steady(120.0, 120.0 - measured_ml)).worst()


def shifted(ml, gain=1.0):
    """The verdict on volumes shifted against a reference of 120 and 50 mL."""
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0)
    return found("reference-volumes", reference, steady(gain * 120.0 + ml, gain * 50.0 + ml)).worst()


@pytest.mark.parametrize(
    ("calibrated", "alpha", "parallel_ml", "gain_known", "offset_known"),
    [(True, None, None, P, P), (False, 0.8, 40.0, P, P), (False, None, 40.0, F, P), (False, 0.8, None, P, F), (False, None, None, F, F)],
)
def test_a_raw_volume_needs_gain_and_parallel_volume_each_by_itself(calibrated, alpha, parallel_ml, gain_known, offset_known):
    volume = VolumeCalibration(calibrated=calibrated, alpha=alpha, alpha_vc_ml=parallel_ml)
    runs = (RunSubject(RunFacts("one", "steady"), None), RunSubject(RunFacts("two", "steady", volume=volume), None))
    for name, expected in (("volume-gain-known", gain_known), ("volume-offset-known", offset_known)):
        check = CHECKS[name]
        assert judge(check, AcquisitionSubject(AcquisitionFacts(), runs), check.limits).worst() is expected


def test_stroke_volume_to_5_percent_passes_to_10_is_suspect_beyond_fails():
    assert [stroke(70.0 * (1.0 + gap)) for gap in (0.0, 0.04, 0.07, 0.12, -0.07, -0.12)] == [P, P, S, F, S, F]


def test_what_the_reference_itself_does_not_know_is_taken_out_first():
    assert stroke(80.0) is F
    assert stroke(80.0, sv_sd_ml=5.0) is P


def test_a_reference_of_two_volumes_has_a_stroke_volume_too():
    assert stroke(70.0, sv_ml=None) is P
    assert stroke(90.0, sv_ml=None) is F


@pytest.mark.parametrize("missing", [{"sv_ml": None, "edv_ml": None}, {"sv_ml": None, "esv_ml": None}])
def test_a_reference_without_a_stroke_volume_says_nothing(missing):
    assert stroke(140.0, **missing) is N


def test_without_reference_or_accepted_steady_beats_nothing_is_compared():
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0)
    for name in ("reference-stroke-volume", "reference-volumes"):
        assert found(name, None, steady(200.0, 50.0)).worst() is N
        assert found(name, reference).worst() is N
        assert found(name, reference, steady(200.0, 50.0, accepted=False)).worst() is N
        assert found(name, reference, steady(200.0, 50.0, kind="preload-reduction")).worst() is N


def test_the_reference_is_held_against_the_heart_at_rest_not_under_an_infusion():
    rest, infusion = (replace(steady(*volumes), facts=RunFacts(stage, "steady", stage=stage)) for stage, volumes in STAGES)
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0)
    for stage, runs, expected in (
        (None, (rest, infusion), P),
        (None, (infusion, rest), F),
        ("rest", (infusion, rest), P),
        ("infusion", (rest, infusion), F),
        ("recovery", (rest, infusion), P),
    ):
        facts = AcquisitionFacts(reference=reference, reference_stage=stage)
        for name in ("reference-stroke-volume", "reference-volumes"):
            check = CHECKS[name]
            assert judge(check, AcquisitionSubject(facts, runs), check.limits).worst() is expected, (stage, name)


@pytest.mark.parametrize("condition", ["mitral-regurgitation", "aortic-regurgitation", "shunt"])
def test_forward_flow_says_nothing_of_a_leaking_ventricle_but_an_image_does(condition):
    heart = steady(120.0, 20.0)
    for source, expected in (("thermodilution", N), ("Fick", N), ("flow-probe", N), ("CMR", F), ("echocardiography", F)):
        reference = ReferenceVolumes(source, 120.0, 50.0, 70.0)
        assert found("reference-stroke-volume", reference, heart, conditions=[condition]).worst() is expected


def test_a_common_shift_is_found_and_a_wrong_gain_alone_is_not_one():
    assert [shifted(ml) for ml in (0.0, 5.0, 30.0, -30.0)] == [P, P, F, F]
    assert [shifted(0.0, gain) for gain in (0.7, 1.4)] == [P, P]


def test_a_shift_between_its_two_limits_is_suspect():
    limits = CHECKS["reference-volumes"].limits
    assert shifted(120.0 * 0.5 * (limits.suspect_above + limits.fail_above)) is S


def test_verdicts_on_volumes_do_not_change_with_the_unit():
    for litres in (1.0, 1e-3):
        reference = ReferenceVolumes("CMR", 120.0 * litres, 50.0 * litres, 70.0 * litres)
        assert found("reference-stroke-volume", reference, steady(120.0 * litres, 40.0 * litres)).worst() is F
        assert found("reference-volumes", reference, steady(121.0 * litres, 51.0 * litres)).worst() is P


def test_a_growing_gain_or_shift_never_improves_the_verdict():
    assert never_improves([stroke(70.0 * (1.0 + excess)) for excess in np.linspace(0.0, 1.0, 41)])
    assert never_improves([shifted(ml) for ml in np.linspace(0.0, 90.0, 31)])


def test_a_shift_and_a_gain_are_told_with_value_and_limit():
    told = found("reference-stroke-volume", ReferenceVolumes("CMR", 120.0, 50.0, 70.0), steady(120.0, 36.0))
    assert "20%" in sentence(told, 0)
    assert "10%" in sentence(told, 0)


@pytest.mark.parametrize(("missing", "expected"), [((), P), (("preload-reduction",), F), (("steady", "infusion"), F)])
def test_runs_the_protocol_demands_must_be_there(missing, expected):
    check = CHECKS["required-runs"]
    judged = judge(check, AcquisitionSubject(AcquisitionFacts(missing_required=missing)), check.limits)
    assert judged.worst() is expected
    if missing:
        assert str(len(missing)) in sentence(judged, 0)
