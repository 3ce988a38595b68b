"""Whole acquisitions for the checks, judged in memory: a simulated recipe, its declarations read as a site would send them."""

import functools
import json
from datetime import datetime, timedelta, timezone

from checks import ALL
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import Rules, judge_acquisition
from flows.facts import acquisition_facts, run_facts
from flows.sources.simulated import recorded
from flows.sources.simulated.acquisition import TIME, Identity, Recipe, RunPlan, made
from flows.sources.simulated.circulation import solve
from flows.sources.simulated.heart import heart_named
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.study.manifest import read_manifest
from flows.study.protocol import parse_protocol
from metrics.signals.recording import Channel, Recording
from tests.checks.made_subjects import judged_run, prepared

IDENTITY = Identity("tarn", "harbour", "H-1", "visit-1", "H-1-visit-1", datetime(2026, 2, 2, 9, 0, tzinfo=timezone(timedelta(hours=1))))
PROTOCOL = parse_protocol(
    b'[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n'
    b'[[visits]]\nname = "visit-1"\nrequired_runs = ["steady", "preload-reduction"]\n',
    file="protocol.toml",
)
RUNS = (
    RunPlan("rest", Conditions(duration_s=20.0), 0.35),
    RunPlan("ramp", Conditions(duration_s=12.0, occlusion=Occlusion(onset_s=3.0)), 0.45),
)
UNITS = {"pressure": "mm[Hg]", "volume": "mL", "ecg": "mV", "aortic_pressure": "mm[Hg]"}
OWN_LIMITS = Rules({})

MAY_BE_OUT_OF_REACH = frozenset({"V100", "V120", "V20", "V30", "EDPVR_beta", "EDPVR_stiffness", "dPdt_max_EDV", "tau", "Pinf"})
"""Indices that a sound recording may not show: no curve is read far beyond its points, and a fall too short for a curve, or a slope not
told from none, is withheld for what it is."""


@functools.cache
def sound(heart="normal", runs=RUNS):
    """An acquisition with nothing wrong."""
    return made(Recipe(IDENTITY, heart_named(heart), runs))


def manifest_of(acquisition):
    return read_manifest(json.dumps(acquisition.manifest).encode(), file="acquisition.json", protocol=None)


def judged(acquisition, rules=OWN_LIMITS):
    """The verdicts on each run by name, and what the acquisition checks found."""
    manifest = manifest_of(acquisition)
    runs = {run.run: judged_run(_run(acquisition, manifest, run), rules) for run in manifest.runs}
    spoiled = {name: verdict.spoiled for name, verdict in runs.items()}
    subject = AcquisitionSubject(acquisition_facts(manifest, PROTOCOL), tuple(verdict.subject for verdict in runs.values()), spoiled)
    found, findings = judge_acquisition(subject, ALL, rules)
    return runs, found, findings


def _run(acquisition, manifest, run):
    facts, columns = run_facts(manifest, run), acquisition.columns[run.run]
    signals = run.channels.signals()
    if not all(signal.column in columns for signal in signals.values()):
        return RunSubject(facts, None, trouble=f"{run.file}: there is no such column")
    stamps = columns[TIME] - columns[TIME][0] if run.channels.time is not None else None
    channels = {
        name: Channel(
            columns[signal.column], "mS" if signal.unit == "mS" else UNITS[name], run.sampling_rate_hz, stamps, signal.delay_ms / 1000.0
        )
        for name, signal in signals.items()
    }
    recording = Recording(run.run, channels)
    return RunSubject(facts, recording) if facts.kind == "saline" else prepared(recording, facts)


def solving_once(patch):
    """Let acquisitions made anew from a recipe share the solutions of runs they have in common."""
    patch.setattr(recorded, "solve", functools.lru_cache(maxsize=32)(solve))
