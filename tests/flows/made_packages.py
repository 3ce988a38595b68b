"""Packages on disk, made from simulated recipes and assessed where they lie."""

import functools
import json
from datetime import UTC, datetime, timedelta, timezone

from checks.tables import ALL as TABLES
from flows.assess import assess
from flows.sources.simulated import recorded
from flows.sources.simulated.acquisition import Identity, Recipe, RunPlan, made
from flows.sources.simulated.circulation import solve
from flows.sources.simulated.faults import with_facts
from flows.sources.simulated.heart import heart_named
from flows.sources.simulated.package import write_package
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.study.manifest import read_manifest
from flows.study.protocol import bare_protocol

SENT_AT = datetime(2026, 2, 3, tzinfo=UTC)
IDENTITY = Identity("tarn", "harbour", "H-1", "visit-1", "H-1-visit-1", datetime(2026, 2, 2, 9, 0, tzinfo=timezone(timedelta(hours=1))))
REST = RunPlan("rest", Conditions(duration_s=10.0), 0.35)
RAMP = RunPlan("ramp", Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=4.0)), 0.45)
BARE = bare_protocol("tarn", "harbour")
COLUMNS = {str(table.Config.name): list(table.to_schema().columns) for table in TABLES}
OF_THE_NIGHT = {"received_at", "version", "package_sha256", "protocol_version", "protocol_sha256", "software_version"}
"""Columns of `acquisitions` that only the night knows."""


def solving_once(patch):
    """Let recipes share the solutions of runs they have in common."""
    patch.setattr(recorded, "solve", functools.lru_cache(maxsize=16)(solve))


def acquisition(*runs, heart="normal", **fields):
    return made(Recipe(IDENTITY, heart_named(heart), runs or (REST, RAMP), **fields))


def declaring(sound, change):
    """The acquisition with its manifest changed in place by ``change``."""
    return with_facts(sound, change)


def of_run(manifest, name):
    return next(run for run in manifest["runs"] if run["run"] == name)


def packed(folder, sound):
    """The package's files by payload path, and its manifest."""
    write_package(folder, sound, SENT_AT)
    files = {path.name: path for path in folder.iterdir() if path.name != "manifest-sha256.txt"}
    return files, read_manifest(files["acquisition.json"].read_bytes(), file="acquisition.json", protocol=None, files=list(files))


def assessed(folder, sound, protocol=BARE):
    files, manifest = packed(folder, sound)
    return assess(files, manifest, protocol)


def indices(found, stage=None):
    """The primary rows by index, of one stage where there are several."""
    return {row["index"]: row for row in found.indices if row["primary"] and stage in {None, row["stage"]}}


def published(found, stage=None):
    return {name for name, row in indices(found, stage).items() if row["status"] == "published"}


def rejections(found, check):
    return [row for row in found.rejections if row["check"] == check]


def run_row(found, name):
    return next(row for row in found.runs if row["run"] == name)


def strict_json(evidence):
    """The evidence as JSON text; raises where it holds NaN or anything JSON does not know."""
    return json.dumps(evidence, allow_nan=False, sort_keys=True)
