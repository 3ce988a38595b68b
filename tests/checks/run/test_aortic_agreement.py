from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict
from checks.spoils import PRESSURE_GAIN, PRESSURE_OFFSET
from checks.verdicts import judge_run
from flows.sources.simulated.heart import LEFT_HEARTS
from metrics.signals.recording import Channel, Recording
from tests.checks.made_subjects import (
    BREATHING,
    CHECKS,
    FIBRILLATING,
    OWN_LIMITS,
    RAMP,
    REST,
    declared,
    never_improves,
    prepared,
    simulated,
    solution,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
CHECK = CHECKS["aortic-agreement"]


def with_aorta(heart="normal", conditions=REST, *, gain=1.0, shift_mmhg=0.0, rate_hz=250.0, lost=0.0):
    """A run with the aortic pressure recorded beside it, at a rate of its own, the ventricle's pressure changed."""
    subject = simulated(heart, conditions)
    solved = solution(heart, conditions)
    time_s = np.arange(round(conditions.duration_s * rate_hz)) / rate_hz
    aorta = np.interp(time_s, solved.time_s, solved.aortic_pressure_mmhg)
    aorta[np.random.default_rng(1).random(aorta.size) < lost] = np.nan
    ventricle = subject.recording.channels["pressure"]
    channels = {
        **subject.recording.channels,
        "pressure": replace(ventricle, samples=gain * ventricle.samples + shift_mmhg),
        "aortic_pressure": Channel(aorta, "mm[Hg]", rate_hz),
    }
    return prepared(Recording(subject.facts.run, channels), subject.facts)


def verdict(subject):
    return judge_run(subject, [CHECK], OWN_LIMITS).judged[0].worst()


@pytest.mark.parametrize("heart", [heart.name for heart in LEFT_HEARTS] + ["mitral-leak", "aortic-leak", "bent"])
def test_a_sound_left_ventricle_reaches_the_aortas_pressure(heart):
    assert [verdict(with_aorta(heart, conditions)) for conditions in (REST, RAMP, BREATHING, FIBRILLATING)] == [P, P, P, P]
    solution.cache_clear()


def test_a_wrong_gain_unit_or_zero_of_the_ventricle_is_found():
    assert [verdict(with_aorta(gain=gain)) for gain in (1.08, 1.15, 1.36, 0.86, 0.74)] == [P, S, F, S, F]
    assert verdict(with_aorta(shift_mmhg=40.0)) is F
    assert CHECK.spoils == PRESSURE_GAIN | PRESSURE_OFFSET


def test_a_growing_gain_never_improves_the_verdict():
    assert never_improves([verdict(with_aorta(gain=1.0 + excess)) for excess in (0.0, 0.05, 0.12, 0.18, 0.25, 0.5)])


def test_another_rate_and_lost_samples_do_not_matter():
    assert verdict(with_aorta(rate_hz=100.0)) is P
    assert verdict(with_aorta(rate_hz=1000.0, lost=0.3)) is P
    assert verdict(with_aorta(rate_hz=100.0, gain=1.36)) is F


@pytest.mark.parametrize("condition", ["aortic-stenosis", "outflow-obstruction", "assist-device"])
def test_where_the_two_may_differ_nothing_is_said(condition):
    assert verdict(declared(with_aorta(gain=1.36), conditions=frozenset({condition}))) is N


def test_without_the_channel_or_in_a_right_ventricle_nothing_is_said():
    assert verdict(simulated()) is N
    assert verdict(with_aorta("right", gain=1.36)) is N
    dead = with_aorta()
    channels = {**dead.recording.channels, "aortic_pressure": Channel(np.zeros(4500), "mm[Hg]", 250.0)}
    assert verdict(prepared(Recording("rest", channels), dead.facts)) is N
