import numpy as np
import pytest

from checks.check import Verdict
from checks.run.wiring import Fault, loop_direction, wiring
from checks.subject import RunSubject
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.ladders import RUN_LADDERS
from metrics.arrays import span
from metrics.signals.recording import Recording
from tests.checks.made_acquisitions import judged
from tests.checks.made_subjects import BREATHING_RAMP, FIBRILLATING, RAMP, REST, prepared, rerecorded, simulated, worst

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
WIRING = ("swapped-channels", "pressure-inverted", "volume-inverted", "loop-direction")
UNITS = ("pressure-units", "volume-units")
LADDERS = {ladder.name: ladder for ladder in RUN_LADDERS}
FAULTS = {
    "pressure-sent-in-kpa": "pressure-units",
    "volume-sent-in-litres": "volume-units",
    "channels-swapped": "swapped-channels",
    "pressure-inverted": "pressure-inverted",
    "volume-inverted": "volume-inverted",
}
NORMAL, RIGHT = "normal", "right"


def pressure_of(subject):
    return subject.recording.channels["pressure"].samples


def volume_of(subject):
    return subject.recording.channels["volume"].samples


def exchanged(subject):
    return rerecorded(subject, pressure=volume_of(subject), volume=pressure_of(subject))


def upside_down(subject, name):
    samples = subject.recording.channels[name].samples
    return rerecorded(subject, **{name: (2.0 * samples.mean() if name == "volume" else 0.0) - samples})


def without_ecg(subject):
    channels = {name: channel for name, channel in subject.recording.channels.items() if name != "ecg"}
    return prepared(Recording(subject.recording.run, channels), subject.facts)


def verdicts(subject, names):
    return {name: worst(subject, name) for name in names}


@pytest.mark.parametrize("conditions", [REST, RAMP, BREATHING_RAMP, FIBRILLATING])
@pytest.mark.parametrize("heart", ["normal", "fast", "failing", "right", "right-failing"])
def test_a_heart_that_is_wired_rightly_passes_with_much_to_spare(heart, conditions):
    subject = simulated(heart, conditions)
    assert set(verdicts(subject, WIRING + UNITS).values()) == {P}
    assert wiring(subject.signals)[0] > 0.9


@pytest.mark.parametrize("heart", [NORMAL, RIGHT, "fast", "failing", "right-failing"])
@pytest.mark.parametrize("conditions", [REST, RAMP])
@pytest.mark.parametrize(
    ("change", "guilty"),
    [
        (exchanged, "swapped-channels"),
        (lambda subject: upside_down(subject, "pressure"), "pressure-inverted"),
        (lambda subject: upside_down(subject, "volume"), "volume-inverted"),
    ],
)
def test_what_is_wired_wrongly_is_named_and_nothing_else_is(change, guilty, conditions, heart):
    found = verdicts(change(simulated(heart, conditions)), WIRING)
    assert found == {name: F if name == guilty else N for name in WIRING}


def test_a_pressure_upside_down_about_its_mean_is_told_by_the_electrogram():
    subject = simulated()
    samples = pressure_of(subject)
    assert worst(rerecorded(subject, pressure=2.0 * samples.mean() - samples), "pressure-inverted") is F


def test_without_an_electrogram_only_a_negative_pressure_is_surely_upside_down():
    subject = without_ecg(simulated())
    assert set(verdicts(subject, WIRING).values()) == {P}
    assert worst(upside_down(subject, "pressure"), "pressure-inverted") is F
    for change in (exchanged, lambda one: upside_down(one, "volume")):
        assert verdicts(change(subject), WIRING) == {**dict.fromkeys(WIRING, N), "loop-direction": F}


def test_noise_and_delay_turn_no_loop_round():
    subject, rng = simulated(), np.random.default_rng(5)
    volume = volume_of(subject)
    assert worst(rerecorded(subject, volume=volume + 20.0 * rng.standard_normal(volume.size)), "volume-inverted") is P
    assert worst(rerecorded(subject, volume=np.roll(volume, 15)), "volume-inverted") is P
    assert F not in verdicts(rerecorded(subject, volume=100.0 + 20.0 * rng.standard_normal(volume.size)), WIRING).values()


def test_a_channel_that_stands_still_has_no_direction_and_no_unit():
    subject = simulated()
    still = rerecorded(subject, volume=np.full(volume_of(subject).size, 90.0))
    assert set(verdicts(still, (*WIRING, "volume-units")).values()) == {N}
    assert np.isnan(loop_direction(np.ones(1), np.ones(1)))
    assert np.isnan(span(np.empty(0)))


@pytest.mark.parametrize(
    ("heart", "gain", "expected"),
    [(NORMAL, 1.0, P), (NORMAL, 0.3, S), (NORMAL, 0.1333, F), (NORMAL, 1.36, P), (NORMAL, 7.5, F), (RIGHT, 0.35, S), (RIGHT, 0.1333, F)],
)
def test_pressure_in_another_unit(heart, gain, expected):
    subject = simulated(heart)
    assert worst(rerecorded(subject, pressure=gain * pressure_of(subject)), "pressure-units") is expected


@pytest.mark.parametrize(("gain", "expected"), [(0.1, P), (1.0, P), (0.01, F), (0.001, F), (1000.0, F)])
def test_volume_in_another_unit(gain, expected):
    subject = simulated()
    assert worst(rerecorded(subject, volume=gain * volume_of(subject)), "volume-units") is expected


@pytest.mark.parametrize("shift", [-200.0, 40.0])
def test_an_offset_is_no_unit(shift):
    subject = simulated()
    shifted = rerecorded(subject, pressure=pressure_of(subject) + shift, volume=volume_of(subject) + shift)
    assert set(verdicts(shifted, UNITS).values()) == {P}


def test_a_run_without_a_time_base_is_not_evaluated():
    subject = simulated()
    broken = RunSubject(subject.facts, subject.recording, trouble="time runs backwards")
    assert set(verdicts(broken, WIRING + UNITS).values()) == {N}


def test_a_limit_of_the_protocol_may_ask_for_more():
    direction, fault = wiring(simulated().signals)
    assert (direction > 0.9, fault) == (True, None)
    turned = wiring(upside_down(simulated(), "volume").signals)
    assert turned == (pytest.approx(-direction, abs=1e-6), Fault.VOLUME_INVERTED)


@pytest.mark.parametrize("name", FAULTS)
@pytest.mark.parametrize("heart", [NORMAL, RIGHT])
def test_the_runs_that_have_the_fault_are_named_and_no_others(heart, name):
    acquisition, _ = clean_acquisition(heart, ramps=2, salines=0)
    for severity in (0.0, 0.4, 1.0):
        injected = LADDERS[name].inject(acquisition, severity)
        runs, _, _ = judged(injected.acquisition)
        failed = {run: {check.name for check in verdict.failed} & {*WIRING, *UNITS} for run, verdict in runs.items()}
        broken = {expected.run for expected in injected.expected}
        assert failed == {run: {FAULTS[name]} if run in broken else set() for run in runs}
        assert {expected.check for expected in injected.expected} <= {FAULTS[name]}
