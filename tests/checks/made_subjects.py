"""What the checks look at, made for tests: simulated runs recorded in memory, and runs drawn beat by beat."""

import functools
from dataclasses import replace

import numpy as np

from checks import ALL
from checks.check import Verdict
from checks.subject import RunSubject
from checks.verdicts import Rules, judge_run
from flows.sources.simulated.catheter import Catheter, record
from flows.sources.simulated.circulation import solve
from flows.sources.simulated.heart import heart_named
from flows.sources.simulated.recorded import ORDINARY
from flows.sources.simulated.rhythm import Breathing, Conditions, Occlusion
from flows.sources.simulated.truth import run_truth
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals, calibrated
from metrics.signals.facts import PressureCalibration, RunFacts, ZeroReading
from metrics.signals.landmarks import beats_of
from metrics.signals.recording import Channel, Recording

OWN_LIMITS = Rules({})
CALIBRATED = PressureCalibration(points=((0.0, 0.0), (100.0, 100.0)), zeros=(ZeroReading(0.1, -1200.0), ZeroReading(0.3, 3000.0)))
CHECKS = {check.name: check for check in ALL}
SEVERITY = {Verdict.PASS: 0, Verdict.SUSPECT: 1, Verdict.FAIL: 2}

QUANTISED = Catheter(pressure_step_mmhg=0.1, volume_step_ml=0.1)
COARSE = Catheter(pressure_step_mmhg=1.0, volume_step_ml=1.0)

REST = Conditions(duration_s=18.0)
RAMP = Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=4.0))
RELEASED = Conditions(duration_s=18.0, occlusion=Occlusion(onset_s=4.0, deflation_s=14.0))
BREATHING = Conditions(duration_s=18.0, breathing=Breathing())
BREATHING_RAMP = Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=4.0), breathing=Breathing())
SINUS_ARRHYTHMIA = Conditions(duration_s=18.0, breathing=Breathing(sinus_depth=0.15))
FIBRILLATING = Conditions(duration_s=18.0, fibrillating=True)
FIBRILLATING_RAMP = Conditions(duration_s=14.0, fibrillating=True, occlusion=Occlusion(onset_s=4.0))
REFLEX = Conditions(duration_s=18.0, occlusion=Occlusion(onset_s=4.0, reflex=0.25))

RATE_HZ = 200.0
BEAT_SAMPLES = 200


@functools.cache
def solution(heart, conditions, seed=0):
    """A heart solved once for all recordings of it."""
    return solve(heart_named(heart), conditions, seed)


@functools.cache
def truth(heart, conditions, seed=0):
    return run_truth(solution(heart, conditions, seed))


@functools.cache
def simulated(heart="normal", conditions=REST, catheter=ORDINARY, rate_hz=250.0, seed=0):
    """A run as a site would have recorded and declared it, with nothing wrong."""
    solved = solution(heart, conditions, seed)
    signals = record(solved, catheter, rate_hz, np.random.default_rng([seed, 1]))
    known = truth(heart, conditions, seed).beats
    occlusion = conditions.occlusion
    events = () if occlusion is None else ((occlusion.onset_s, "occlusion-on"),)
    if occlusion is not None and occlusion.deflation_s is not None:
        events += ((occlusion.deflation_s, "occlusion-off"),)
    before = known.start_s < (np.inf if occlusion is None else occlusion.onset_s)
    facts = RunFacts(
        run="rest" if occlusion is None else "ramp",
        kind="steady" if occlusion is None else "preload-reduction",
        chamber=solved.heart.chamber,
        stage="baseline",
        manoeuvre=None if occlusion is None else "caval-balloon",
        sampling_rate_hz=rate_hz,
        duration_s=conditions.duration_s,
        heart_rate_per_min=round(60.0 / float(np.mean(known.rr_s[before]))),
        rhythm="atrial-fibrillation" if conditions.fibrillating else "sinus",
        events=events,
        pressure=CALIBRATED,
    )
    units = {"pressure": "mm[Hg]", "volume": "mL", "ecg": "mV"}
    samples = {"pressure": signals.pressure_mmhg, "volume": signals.volume_ml, "ecg": signals.ecg_mv}
    channels = {name: Channel(samples[name], unit, rate_hz, signals.time_s) for name, unit in units.items()}
    return prepared(Recording(facts.run, channels), facts)


def prepared(recording, facts):
    """A recording calibrated and cut into beats."""
    try:
        signals = calibrated(recording, facts)
    except ValueError as error:
        return RunSubject(facts, recording, trouble=str(error))
    return RunSubject(facts, recording, signals, beats_of(signals, facts.chamber))


def rerecorded(subject, facts=None, time_s=None, **samples):
    """The same run with samples of a channel, the time stamps or the facts replaced."""
    facts = subject.facts if facts is None else facts
    channels = {}
    for name, channel in subject.recording.channels.items():
        stamps = channel.time_s if time_s is None else time_s
        channels[name] = replace(channel, samples=samples.get(name, channel.samples), time_s=stamps)
    return prepared(Recording(facts.run, channels), facts)


def declared(subject, **facts):
    """The same run with other facts declared."""
    return replace(subject, facts=replace(subject.facts, **facts))


def drawn(count=12, *, volume_at_ends_ml=None, facts=None, **columns):
    """A run of beats of one second each, drawn by hand: columns of `Beats` may be given, all else is an ordinary LV."""
    start = np.arange(count, dtype=np.int64) * BEAT_SAMPLES
    values = {
        "rr_s": 1.0,
        "edv_ml": 120.0,
        "esv_ml": 50.0,
        "edp_mmhg": 8.0,
        "pmax_mmhg": 120.0,
        "dpdt_max_mmhg_per_s": 1500.0,
        "dpdt_min_mmhg_per_s": -1400.0,
        "sw_mmhg_ml": 7000.0,
    }
    landmarks = {"start": 0, "end": BEAT_SAMPLES, "dpdt_max_at": 10, "dpdt_min_at": 80, "esv_at": 60, "r_at": -8}
    beats = Beats(
        detector="ecg",
        **{name: np.asarray(columns.get(name, start + place), dtype=np.int64) for name, place in landmarks.items()},
        **{name: np.broadcast_to(np.asarray(columns.get(name, value), dtype=np.float64), (count,)) for name, value in values.items()},
    )
    size = count * BEAT_SAMPLES + 20
    at_ends = np.full(count + 1, 120.0) if volume_at_ends_ml is None else np.asarray(volume_at_ends_ml, dtype=np.float64)
    place = np.arange(size) / BEAT_SAMPLES
    # every sample differs from its neighbours, as in a run without a flat stretch; a beat ends at exactly the volume given
    volume = np.interp(place, np.arange(count + 1), at_ends) - 70.0 * np.sin(np.pi * place) ** 2
    pressure = 60.0 + 50.0 * np.sin(2.0 * np.pi * place)
    return drawn_run(pressure, volume, beats, facts)


def drawn_run(pressure, volume, beats, facts=None, *, time_s=None, missing=None):
    """A run from samples and beats given by hand, nothing filtered; sampled at 200 Hz."""
    facts = facts or RunFacts("drawn", "steady", sampling_rate_hz=RATE_HZ, pressure=CALIBRATED)
    time_s = np.arange(pressure.size) / RATE_HZ if time_s is None else time_s
    channels = {"pressure": Channel(pressure, "mm[Hg]", RATE_HZ, time_s), "volume": Channel(volume, "mL", RATE_HZ, time_s)}
    place = np.clip(np.rint(time_s * RATE_HZ), 0, pressure.size - 1).astype(np.int64)
    signals = Signals(
        sampling_rate_hz=RATE_HZ,
        pressure_mmhg=pressure,
        volume_ml=volume,
        dpdt_mmhg_per_s=np.gradient(pressure) * RATE_HZ,
        missing=np.zeros(pressure.size, dtype=bool) if missing is None else missing,
        pressure_noise_mmhg=0.3,
        volume_noise_ml=0.4,
        recorded_at=dict.fromkeys(channels, place),
    )
    return RunSubject(facts, Recording(facts.run, channels), signals, beats)


def judged_run(subject, rules=OWN_LIMITS):
    return judge_run(subject, ALL, rules)


def of(verdict, name):
    """What one check found in a judged run."""
    return next(judged for judged in verdict.judged if judged.check.name == name)


def worst(subject, name, rules=OWN_LIMITS):
    """The gravest verdict of one check on a run."""
    return of(judged_run(subject, rules), name).worst()


def rejected(subject, rules=OWN_LIMITS):
    """Numbers (from 1) of the rejected beats, with the checks that rejected them."""
    return {place + 1: names for place, names in enumerate(judged_run(subject, rules).rejected_by) if names}


def beats_at(subject, instants_s):
    """Numbers (from 1) of the detected beats that hold these instants."""
    starts, ends = subject.beats.start / subject.signals.sampling_rate_hz, subject.beats.end / subject.signals.sampling_rate_hz
    found = set()
    for instant in instants_s:
        found |= set((np.flatnonzero((starts <= instant) & (instant < ends)) + 1).tolist())
    return found


def never_improves(verdicts):
    """Whether each verdict is at least as grave as the one before it."""
    grades = [SEVERITY[verdict] for verdict in verdicts]
    return grades == sorted(grades)
