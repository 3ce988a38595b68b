"""What the indices of one long acquisition cost with their intervals, counted in zero-phase passes over its pressure and volume.

The acquisition is that of ``cost_of_checks.py``: ten minutes at 1 kHz, a steady run and two occlusions of one stage; intervals are of 2,000
resamples. ``python tests/bench/cost_of_indices.py`` prints the ratios, the dearest indices first. Each index alone finds nothing kept
from another; all of them together share what they share in a night. The smallest of several repeats counts.
"""

from __future__ import annotations

import argparse
import json
import sys
import tempfile
from functools import cached_property
from pathlib import Path

from checks import ALL as CHECKS
from checks.verdicts import Rules, RunVerdict, judge_run
from flows import stage_indices
from flows.assess import prepared_run
from flows.sources.simulated.acquisition import Acquisition
from flows.sources.simulated.corpus import Shelf, clean_acquisition
from flows.stage_indices import Stage, index_rows, stages_of
from flows.study.manifest import read_manifest
from metrics.indices import ALL
from metrics.indices.card import Index
from metrics.signals.calibrate import Signals
from metrics.stats import bootstrap, lines
from tests.bench.cost_of_checks import CONDITIONS, PROTOCOL, RATE_HZ, Cost, fastest, one_pass

WANTED = 20.0
"""The most that all indices of the acquisition may cost, in passes."""

AREA_M2 = 1.9


def verdicts_of(acquisition: Acquisition) -> list[RunVerdict]:
    """Return the judged runs of an acquisition."""
    manifest = read_manifest(json.dumps(acquisition.manifest).encode(), file="acquisition.json", protocol=PROTOCOL)
    with tempfile.TemporaryDirectory() as folder:
        files = Shelf(Path(folder)).files(acquisition)
        return [judge_run(prepared_run(files, manifest, run), CHECKS, Rules({})) for run in manifest.runs]


def forget(verdicts: list[RunVerdict]) -> None:
    """Forget every interval that was kept, and what signals keep of themselves."""
    bootstrap._median_interval.cache_clear()
    lines._by_blocks.cache_clear()
    kept = [name for name, value in vars(Signals).items() if isinstance(value, cached_property)]
    for verdict in verdicts:
        for name in kept:
            vars(verdict.subject.known_signals()).pop(name, None)


def fresh_stage(verdicts: list[RunVerdict]) -> Stage:
    """Return the acquisition's one stage, of which nothing was computed yet."""
    forget(verdicts)
    (stage,) = stages_of(verdicts, (), {}, AREA_M2)
    return stage


def alone(index: Index, verdicts: list[RunVerdict]) -> None:
    """Compute the rows of one index as if it were the only one."""
    stage = fresh_stage(verdicts)
    stage_indices._values_of(index, stage, stage_indices.stage_v0_ml(stage))


def costs(acquisition: Acquisition, repeats: int) -> tuple[float, int, Cost, list[Cost]]:
    """Return the seconds of one pass, how many rows the indices fill, what all of them cost, and each alone."""
    verdicts = verdicts_of(acquisition)
    unit_s = fastest(lambda: one_pass([verdict.subject for verdict in verdicts]), max(repeats, 5))
    whole = Cost("all indices with their intervals", fastest(lambda: index_rows(fresh_stage(verdicts)), repeats))
    rows = index_rows(fresh_stage(verdicts))
    baseline_s = fastest(lambda: stage_indices.stage_v0_ml(fresh_stage(verdicts)), repeats)
    each = [Cost("V0 that all of them are given", baseline_s)]
    for index in ALL:
        if index.chamber in (None, "LV"):
            seconds = fastest(lambda index=index: alone(index, verdicts), repeats) - baseline_s  # type: ignore[misc]
            each.append(Cost(f"{index.name} {index.estimator}", seconds))
    return unit_s, len(rows), whole, sorted(each, key=lambda cost: -cost.seconds)


def main() -> int:
    """Print the ratios."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--repeats", type=int, default=3)
    sys.stderr.write("recording ten minutes\n")
    sound, _ = clean_acquisition("normal", RATE_HZ, 1, salines=0, conditions=CONDITIONS)
    unit_s, rows, whole, each = costs(sound, parser.parse_args().repeats)
    told = [f"one zero-phase pass over pressure and volume: {1000.0 * unit_s:.1f} ms", f"{rows} rows, {bootstrap.RESAMPLES} resamples", ""]
    told += [f"{whole.name:<52}{whole.seconds / unit_s:>9.2f} passes, wanted: at most {WANTED:g}", "", "each of them alone:"]
    told += [f"{cost.name:<52}{cost.seconds / unit_s:>9.2f} passes" for cost in each]
    sys.stdout.write("\n".join(told) + "\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
