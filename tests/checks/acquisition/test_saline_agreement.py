from dataclasses import replace

import numpy as np
import pytest

from checks.acquisition.saline_agreement import uncertainty_ml
from checks.check import Verdict
from checks.spoils import VOLUME_OFFSET
from flows.sources.simulated.calibration_faults import alpha_vc_wrong
from flows.sources.simulated.corpus import clean_acquisition
from metrics.signals.saline import SalineIntercept
from tests.checks.made_acquisitions import judged
from tests.checks.made_subjects import CHECKS

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
ONE = SalineIntercept(60.0, 60.5, 59.5, 2.0, 0.6, 0.99, 8)


def verdict(acquisition):
    _, found, _ = judged(acquisition)
    return next(one for one in found if one.check.name == "saline-agreement").worst()


def test_declared_as_shown_passes_and_far_from_shown_fails():
    acquisition, _ = clean_acquisition("normal", 250.0, 3)
    assert verdict(acquisition) is P
    assert verdict(alpha_vc_wrong(acquisition, 4.0).acquisition) in {P, S}
    assert verdict(alpha_vc_wrong(acquisition, 20.0).acquisition) is F
    assert verdict(alpha_vc_wrong(acquisition, -25.0).acquisition) is F
    assert CHECKS["saline-agreement"].spoils == VOLUME_OFFSET


def test_without_saline_runs_nothing_is_said():
    assert verdict(clean_acquisition("normal", 250.0, 3, salines=0)[0]) is N


def test_one_saline_run_is_enough():
    acquisition, _ = clean_acquisition("normal", 250.0, 3, salines=1)
    assert verdict(acquisition) is P
    assert verdict(alpha_vc_wrong(acquisition, 40.0).acquisition) is F


def test_more_runs_that_agree_are_known_better_and_runs_that_do_not_are_known_less():
    assert uncertainty_ml([ONE, ONE]) < uncertainty_ml([ONE])
    apart = [replace(ONE, ml=50.0), replace(ONE, ml=70.0)]
    assert uncertainty_ml(apart) > 20.0
    assert np.isfinite(uncertainty_ml([replace(ONE, beats=5)]))


def test_what_parts_the_two_regressions_is_uncertain():
    assert uncertainty_ml([replace(ONE, es_on_ed_ml=70.0, ed_on_es_ml=50.0)]) == pytest.approx(uncertainty_ml([ONE]) + 9.5)
