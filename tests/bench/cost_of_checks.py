"""What the checks of one long acquisition cost, counted in zero-phase passes over its pressure and volume.

Ten minutes at 1 kHz with eight channels: a steady run and two occlusions, five segments beside pressure, time and ECG. One pass is a
low-pass filter of second order run forward and backward over pressure and volume of every run. ``python tests/bench/cost_of_checks.py``
prints the ratios, the dearest checks first; the smallest of several repeats counts, so that whatever else a machine does does not.
"""

from __future__ import annotations

import argparse
import json
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from scipy.signal import butter, sosfiltfilt

from checks import ALL as CHECKS
from checks.check import Check, Level
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import Rules, judge_acquisition, judge_run
from flows.assess import assess, prepared_run
from flows.corrections import whole_of
from flows.facts import acquisition_facts
from flows.sources.simulated.acquisition import Acquisition
from flows.sources.simulated.corpus import Shelf, clean_acquisition
from flows.sources.simulated.forms import as_segments
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.study.manifest import Manifest, read_manifest
from flows.study.protocol import parse_protocol

RATE_HZ = 1000.0
WANTED = 5.0
"""The most that all checks of runs and acquisition may cost, in passes."""

LEAST_REPEATS = 10
"""Of what is compared with the wanted ratio: both sides of it are short, and one busy moment would decide."""

CONDITIONS = {
    "rest": Conditions(duration_s=480.0),
    **{f"ramp-{number}": Conditions(duration_s=60.0, occlusion=Occlusion(onset_s=20.0, deflation_s=32.0)) for number in (1, 2)},
}
PROTOCOL = parse_protocol(b'[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n', file="protocol.toml")


@dataclass(frozen=True, slots=True)
class Cost:
    """Processor seconds for one thing done to the whole acquisition."""

    name: str
    seconds: float


def fastest(do: Callable[[], object], repeats: int) -> float:
    """Return the shortest processor time of several repeats in seconds, so that waiting for others does not count."""
    times = []
    for _ in range(repeats):
        begun = time.process_time()
        do()
        times.append(time.process_time() - begun)
    return min(times)


def one_pass(subjects: list[RunSubject]) -> None:
    """Run one zero-phase low-pass over pressure and volume of every run."""
    sections = butter(2, 50.0, fs=RATE_HZ, output="sos")
    for subject in subjects:
        signals = subject.known_signals()
        for channel in (signals.pressure_mmhg, signals.volume_ml):
            sosfiltfilt(sections, np.nan_to_num(channel))


def fresh(subject: RunSubject) -> RunSubject:
    """Return the subject without anything that was computed from it and kept, but for the steadied volume, which cutting beats needs."""
    signals = replace(subject.known_signals())
    signals.__dict__["steadied_volume_ml"] = subject.known_signals().steadied_volume_ml
    return RunSubject(subject.facts, subject.recording, signals, subject.beats)


def costs(acquisition: Acquisition, repeats: int) -> tuple[float, list[Cost], list[Cost]]:
    """Return the seconds of one pass, those of the levels of checks and of the whole, and those of each check of run and acquisition."""
    manifest = read_manifest(json.dumps(acquisition.manifest).encode(), file="acquisition.json", protocol=PROTOCOL)
    with tempfile.TemporaryDirectory() as folder:
        files = Shelf(Path(folder)).files(acquisition)
        whole = Cost("assess as a whole, reading included", fastest(lambda: assess(files, manifest, PROTOCOL), repeats))
        subjects = [prepared_run(files, manifest, run) for run in manifest.runs]
        reading = Cost(
            "reading, calibrating, cutting into beats", fastest(lambda: [prepared_run(files, manifest, r) for r in manifest.runs], repeats)
        )
    unit_s = fastest(lambda: one_pass(subjects), max(repeats, LEAST_REPEATS))
    of_level = {level: [check for check in CHECKS if check.level is level] for level in Level}
    above = [check for check in CHECKS if check.level is not Level.BEAT]
    levels = [
        Cost("all checks of runs and acquisition", fastest(lambda: _judged(subjects, above, manifest), max(repeats, LEAST_REPEATS))),
        Cost("checks of runs", fastest(lambda: [judge_run(fresh(one), of_level[Level.RUN], Rules({})) for one in subjects], repeats)),
        Cost("checks of beats", fastest(lambda: [judge_run(fresh(one), of_level[Level.BEAT], Rules({})) for one in subjects], repeats)),
        reading,
        whole,
    ]
    each = [Cost(check.name, fastest(lambda check=check: _judged(subjects, [check], manifest), repeats)) for check in above]  # type: ignore[misc]
    return unit_s, levels, sorted(each, key=lambda cost: -cost.seconds)


def _judged(subjects: list[RunSubject], checks: list[Check], manifest: Manifest) -> None:
    """Judge the runs and then the acquisition by what was kept of them, as `flows.assess` does."""
    runs = [judge_run(fresh(subject), checks, Rules({})) for subject in subjects]
    if any(check.level is Level.ACQUISITION for check in checks):
        judge_acquisition(whole_of(AcquisitionSubject(acquisition_facts(manifest, PROTOCOL)), runs), checks, Rules({}))


def main() -> int:
    """Print the ratios."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--repeats", type=int, default=3)
    sys.stderr.write("recording ten minutes\n")
    sound, _ = clean_acquisition("normal", RATE_HZ, 1, salines=0, conditions=CONDITIONS)
    unit_s, levels, each = costs(as_segments(sound, 0.0), parser.parse_args().repeats)
    lines = [f"one zero-phase pass over pressure and volume: {1000.0 * unit_s:.1f} ms", ""]
    lines += [f"{cost.name:<44}{cost.seconds / unit_s:>9.2f} passes" for cost in levels]
    lines += ["", f"wanted: at most {WANTED:g} passes for all checks of runs and acquisition; each of them alone:"]
    lines += [f"{cost.name:<44}{cost.seconds / unit_s:>9.2f} passes" for cost in each]
    sys.stdout.write("\n".join(lines) + "\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
