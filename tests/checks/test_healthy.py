"""Sound hearts lose no beats and no run: what a naive check would throw away."""

from collections import Counter

import pytest

from checks.check import Level, Verdict
from flows.sources.simulated.heart import HEARTS
from flows.sources.simulated.recorded import ORDINARY
from tests.checks.made_acquisitions import judged, sound
from tests.checks.made_subjects import (
    BREATHING_RAMP,
    COARSE,
    FIBRILLATING,
    FIBRILLATING_RAMP,
    QUANTISED,
    RAMP,
    REFLEX,
    RELEASED,
    REST,
    SINUS_ARRHYTHMIA,
    judged_run,
    simulated,
    solution,
)

CONDITIONS = (REST, RAMP, BREATHING_RAMP, SINUS_ARRHYTHMIA, RELEASED, REFLEX, FIBRILLATING, FIBRILLATING_RAMP)
RECORDERS = ((ORDINARY, 250.0), (QUANTISED, 250.0))
FAST_AND_COARSE = ((ORDINARY, 1000.0), (QUANTISED, 1000.0), (COARSE, 250.0))
LOST_SHARE = 0.005
CLOSED = ("closed-normal", "closed-small", "closed-failing", "closed-stiff", "closed-right", "closed-right-failing")
NAMES = [*(heart.name for heart in HEARTS), *CLOSED]


@pytest.mark.parametrize("heart", NAMES)
def test_a_sound_heart_loses_no_beats_and_fails_no_check_of_a_run(heart):
    beats, lost, failed = 0, Counter(), []
    for conditions in CONDITIONS:
        for catheter, rate_hz in RECORDERS + (FAST_AND_COARSE if conditions in {REST, BREATHING_RAMP, FIBRILLATING} else ()):
            found = judged_run(simulated(heart, conditions, catheter, rate_hz))
            beats += len(found.rejected_by)
            lost.update(name for names in found.rejected_by for name in names)
            failed += [(conditions, rate_hz, check.name) for check in found.failed]
            assert len(found.rejected_by) > 8
    assert not failed
    assert lost.total() <= LOST_SHARE * beats, lost
    solution.cache_clear()


@pytest.mark.parametrize("heart", NAMES)
def test_a_sound_acquisition_fails_no_check_at_all(heart):
    runs, found, findings = judged(sound(heart))
    assert [finding.check.name for finding in findings if finding.verdict is Verdict.FAIL] == []
    assert all(run.is_usable and not run.failed and run.accepted.all() for run in runs.values())
    assert {one.check.level for one in found} == {Level.ACQUISITION}
