import numpy as np
import pytest

from checks.check import Verdict
from checks.run.standstill import FLAT_S
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.ladders import RUN_LADDERS
from flows.sources.simulated.recorded import NOISELESS
from tests.checks.made_acquisitions import judged
from tests.checks.made_subjects import (
    COARSE,
    FIBRILLATING,
    QUANTISED,
    RAMP,
    REST,
    judged_run,
    never_improves,
    of,
    rerecorded,
    simulated,
    solution,
    worst,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
NAMES = ("pressure", "volume")
CHECKS = tuple(f"{name}-{check}" for name in NAMES for check in ("flat", "dropout"))
LADDERS = {ladder.name: ladder for ladder in RUN_LADDERS}


def stopped(subject, name, share):
    samples = subject.recording.channels[name].samples.copy()
    samples[round((1.0 - share) * samples.size) :] = samples[round((1.0 - share) * samples.size) - 1]
    return rerecorded(subject, **{name: samples})


def held(subject, name, seconds, every_s=3.0):
    channel = subject.recording.channels[name]
    samples, length = channel.samples.copy(), round(seconds * channel.sampling_rate_hz)
    for first in range(100, samples.size - length, round(every_s * channel.sampling_rate_hz)):
        samples[first : first + length] = samples[first]
    return rerecorded(subject, **{name: samples})


@pytest.mark.parametrize("catheter", [NOISELESS, QUANTISED, COARSE])
@pytest.mark.parametrize("heart", ["normal", "failing", "right"])
def test_plateaus_of_a_coarse_converter_are_no_standstill(heart, catheter):
    for conditions in (REST, RAMP, FIBRILLATING):
        found = judged_run(simulated(heart, conditions, catheter))
        assert [of(found, check).worst() for check in CHECKS] == [P] * 4
    solution.cache_clear()


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize(("share", "expected"), [(0.0, P), (0.15, P), (0.25, S), (0.6, S), (0.85, F), (1.0, F)])
def test_a_channel_that_stops_for_good(share, expected, name):
    found = judged_run(stopped(simulated(), name, share) if share else simulated())
    assert of(found, f"{name}-flat").worst() is expected
    if share:
        assert (share * 18.0 >= FLAT_S) is (expected is not P)
        other = "volume" if name == "pressure" else "pressure"
        assert {of(found, f"{other}-{check}").worst() for check in ("flat", "dropout")} == {P}


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize(("seconds", "expected"), [(0.04, P), (0.12, S), (0.6, S), (1.2, S), (2.4, F)])
def test_pieces_of_a_held_value(seconds, expected, name):
    found = judged_run(held(simulated(), name, seconds))
    assert of(found, f"{name}-dropout").worst() is expected
    assert of(found, f"{name}-flat").worst() is P


@pytest.mark.parametrize("name", NAMES)
def test_beats_that_hold_a_piece_go_and_the_others_stay(name):
    subject = held(simulated(), name, 0.2)
    found = judged_run(subject)
    lost = [place for place, names in enumerate(found.rejected_by) if "held-signal" in names]
    pieces_s = np.arange(100, 18 * 250 - 50, 750) / 250.0
    whole = [int(np.searchsorted(subject.start_s(), at_s, side="right")) - 1 for at_s in pieces_s]
    assert set(lost) <= {beat + step for beat in whole for step in (0, 1)}
    assert len(lost) >= len(whole) // 2
    assert of(found, "beats-accepted").worst() is P
    assert {worst(simulated(), "held-signal"), worst(simulated("right", RAMP, COARSE), "held-signal")} == {P}


@pytest.mark.parametrize("name", NAMES)
def test_a_channel_cut_off_at_a_rail_is_not_held(name):
    samples = simulated().recording.channels[name].samples
    cut = rerecorded(simulated(), **{name: np.minimum(samples, np.quantile(samples, 0.75))})
    assert worst(cut, "held-signal") is P
    assert worst(cut, f"{name}-dropout") is P


def test_what_is_left_of_a_volume_that_fell_out_withholds_no_pressure():
    check = of(judged_run(stopped(simulated(), "volume", 0.9)), "volume-flat").check
    assert not check.spoils & {"EDP", "Pmax", "dPdt_max", "HR"}
    assert {"SV", "EDV", "SW", "Ees"} <= check.spoils


def test_missing_samples_are_another_check():
    subject = simulated()
    samples = subject.recording.channels["pressure"].samples.copy()
    samples[500:1500] = np.nan
    assert {worst(rerecorded(subject, pressure=samples), check) for check in CHECKS} == {P}


def test_a_channel_that_is_not_there_is_not_evaluated():
    subject = simulated()
    only = {name: channel for name, channel in subject.recording.channels.items() if name != "volume"}
    recording = type(subject.recording)(subject.recording.run, only)
    found = judged_run(type(subject)(subject.facts, recording, subject.signals, subject.beats))
    assert [of(found, f"volume-{check}").worst() for check in ("flat", "dropout")] == [N, N]


@pytest.mark.parametrize(
    ("ladder", "check"),
    [
        ("pressure-gone", "pressure-flat"),
        ("volume-gone", "volume-flat"),
        ("pressure-held", "pressure-dropout"),
        ("volume-held", "volume-dropout"),
    ],
)
def test_a_growing_fault_never_improves_the_verdict_and_a_gross_one_is_found(ladder, check):
    acquisition, _ = clean_acquisition("normal", ramps=1, salines=0)
    found = []
    for severity in LADDERS[ladder].severities:
        runs, _, _ = judged(LADDERS[ladder].inject(acquisition, severity).acquisition)
        found.append([of(verdict, check).worst() for verdict in runs.values()])
    for climbs in zip(*found, strict=True):
        assert climbs[0] is P
        assert climbs[-1] in {F, N}
        assert climbs[-2] in {S, F}
        assert F in climbs
        assert never_improves(climbs[:-1])
