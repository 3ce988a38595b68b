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


NAMES = ("reference-stroke-volume", "reference-volumes")


def stroke(factor, **reference):
    """The verdict on volumes multiplied, against a reference of 120 and 50 mL."""
    values = {"source": "CMR", "edv_ml": 120.0, "esv_ml": 50.0, "sv_ml": 70.0, "sv_sd_ml": 4.0} | reference
    return found(NAMES[0], ReferenceVolumes(**values), steady(factor * 120.0, factor * 50.0)).worst()


def shifted(ml, factor=1.0, **reference):
    """The verdict on volumes multiplied and shifted, against a reference of 120 and 50 mL."""
    values = {"source": "CMR", "edv_ml": 120.0, "esv_ml": 50.0, "sv_ml": 70.0, "sv_sd_ml": 4.0} | reference
    return found(NAMES[1], ReferenceVolumes(**values), steady(factor * 120.0 + ml, factor * 50.0 + ml)).worst()


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


def test_a_factor_counts_once_it_is_beyond_what_the_reference_does_not_know():
    assert [stroke(factor) for factor in (1.0, 1.04, 0.96, 1.1, 0.9, 1.4)] == [P, P, P, F, F, F]
    assert [stroke(1.12, sv_sd_ml=sd_ml) for sd_ml in (1.0, 4.0, 12.0)] == [F, F, P]


def test_a_factor_between_its_two_limits_is_suspect_where_volumes_are_large_enough_to_tell_it():
    reference = ReferenceVolumes("CMR", 120.0, 120.0, None, 2.0)
    assert found(NAMES[0], reference, steady(120.0, 120.0)).worst() is N
    limits = replace(CHECKS[NAMES[0]].limits, suspect_above=0.08, fail_above=0.2)
    subject = AcquisitionSubject(AcquisitionFacts(reference=ReferenceVolumes("CMR", 120.0, 50.0, 70.0, 2.0)), (steady(132.0, 55.0),))
    assert judge(CHECKS[NAMES[0]], subject, limits).worst() is S


def test_a_stroke_volume_alone_tells_a_large_factor():
    alone = {"edv_ml": None, "esv_ml": None}
    assert [stroke(factor, **alone) for factor in (1.1, 1.2, 1.4)] == [P, F, F]
    assert shifted(30.0, **alone) is N


def test_a_reference_of_two_volumes_has_a_stroke_volume_too():
    assert stroke(1.0, sv_ml=None) is P
    assert stroke(1.2, sv_ml=None) is F


def test_without_an_uncertainty_the_methods_usual_one_is_taken():
    assert [stroke(factor, sv_sd_ml=None) for factor in (1.0, 1.04, 1.2)] == [P, P, F]


@pytest.mark.parametrize("missing", [{"sv_ml": None, "edv_ml": None}, {"sv_ml": None, "esv_ml": None}, {"sv_ml": 0.0}])
def test_a_reference_without_a_stroke_volume_says_nothing(missing):
    assert stroke(2.0, **missing) is N


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


def test_a_large_shift_is_told_from_a_factor_and_a_large_factor_from_a_shift():
    assert [shifted(ml) for ml in (0.0, 3.0, 30.0, -30.0)] == [P, P, F, F]
    assert [shifted(0.0, factor) for factor in (0.7, 1.4)] == [P, P]
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0, 4.0)
    assert found(NAMES[0], reference, steady(150.0, 80.0)).worst() is P
    both = [found(name, reference, steady(1.5 * 120.0 - 60.0, 1.5 * 50.0 - 60.0)).worst() for name in NAMES]
    assert both == [F, F]


def test_what_cannot_be_told_apart_is_named_together():
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0, 6.0)
    assert [found(name, reference, steady(138.0, 61.0)).worst() for name in NAMES] == [F, F]


@pytest.mark.parametrize(("saline_ml", "expected"), [(0.0, [F, P]), (14.0, [P, F])])
def test_saline_runs_tell_them_apart_where_the_volumes_do_not(monkeypatch, saline_ml, expected):
    monkeypatch.setattr("checks.acquisition.reference.saline_shift_ml", lambda _: (saline_ml, 3.0))
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0, 6.0)
    assert [found(name, reference, steady(138.0, 61.0)).worst() for name in NAMES] == expected
    # Volumes that only a factor and a shift together explain are not forced into either by a witness.
    assert [found(name, reference, steady(150.0, 20.0)).worst() for name in NAMES] == [F, F]


def test_verdicts_on_volumes_do_not_change_with_the_unit():
    for litres in (1.0, 1e-3):
        reference = ReferenceVolumes("CMR", 120.0 * litres, 50.0 * litres, 70.0 * litres)
        assert found(NAMES[0], reference, steady(156.0 * litres, 65.0 * litres)).worst() is F
        assert found(NAMES[1], reference, steady(121.0 * litres, 51.0 * litres)).worst() is P


def test_the_beats_own_scatter_counts_with_the_references():
    reference = ReferenceVolumes("CMR", 120.0, 50.0, 70.0, 3.0)
    scatter = np.resize([60.0, -60.0, 0.0, 60.0, -60.0], 10)
    assert found(NAMES[0], reference, steady(135.0, 56.0)).worst() is F
    assert found(NAMES[0], reference, steady(135.0 + scatter, 56.0 + scatter)).worst() is P


def test_a_growing_gain_or_shift_never_improves_the_verdict():
    assert never_improves([stroke(1.0 + excess) for excess in np.linspace(0.0, 1.0, 41)])
    assert never_improves([shifted(ml) for ml in np.linspace(0.0, 90.0, 31)])


def test_a_shift_and_a_gain_are_told_with_value_and_limit():
    told = found(NAMES[0], ReferenceVolumes("CMR", 120.0, 50.0, 70.0), steady(144.0, 60.0))
    assert "20%" in sentence(told, 0)
    assert "5%" in sentence(told, 0)


@pytest.mark.parametrize(("missing", "expected"), [((), P), (("preload-reduction",), F), (("steady", "infusion"), F)])
def test_runs_the_protocol_demands_must_be_there(missing, expected):
    check = CHECKS["required-runs"]
    judged = judge(check, AcquisitionSubject(AcquisitionFacts(missing_required=missing)), check.limits)
    assert judged.worst() is expected
    if missing:
        assert str(len(missing)) in sentence(judged, 0)
