"""One night under the real orchestration, run once a session as a person would run it, for the tests that look at what it left."""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import dataclass
from datetime import datetime, timedelta, timezone
from pathlib import Path

import pytest
from hypothesis import settings

from flows.sources.simulated.acquisition import Identity, Recipe, made, rest_and_ramp
from flows.sources.simulated.heart import heart_named
from flows.sources.simulated.package import write_package

settings.register_profile("same-every-time", derandomize=True, deadline=None)
settings.load_profile("same-every-time")

PROTOCOL = '[study]\nname = "tarn"\nversion = "1"\n\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n'


@dataclass(frozen=True)
class EngineNight:
    """A study after one night under the orchestration, what the command printed, and the home of the user who ran it."""

    study: Path
    home: Path
    code: int
    said: str
    complained: str


@pytest.fixture(scope="session")
def simulated_study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A study with one simulated package, and one that is broken."""
    study = tmp_path_factory.mktemp("engine") / "tarn"
    inbox = study / "inbox" / "harbour"
    recorded_at = datetime(2026, 3, 4, 9, 12, tzinfo=timezone(timedelta(hours=1)))
    identity = Identity("tarn", "harbour", "H-014", "visit-1", "H-014-visit-1", recorded_at)
    recipe = Recipe(identity, heart_named("normal"), rest_and_ramp(), seed=14)
    write_package(inbox / "H-014-visit-1", made(recipe), recorded_at + timedelta(hours=7))
    (inbox / "H-015-visit-1").mkdir()
    (inbox / "H-015-visit-1" / "manifest-sha256.txt").write_text(f"{'0' * 64}  acquisition.json\n")
    (study / "protocol.toml").write_text(PROTOCOL)
    return study


@pytest.fixture(scope="session")
def engine_night(simulated_study: Path, tmp_path_factory: pytest.TempPathFactory) -> EngineNight:
    """The study after `beatgate nightly`, run in a process of its own with none of this one's settings."""
    home = tmp_path_factory.mktemp("home")
    environment = {name: value for name, value in os.environ.items() if not name.startswith(("PREFECT", "BEATGATE", "PYTEST"))}
    environment |= {"HOME": str(home), "PYTHONPATH": str(Path(__file__).parents[1])}
    command = [sys.executable, "-m", "flows.cli", "nightly", str(simulated_study)]
    run = subprocess.run(command, env=environment, cwd=home, capture_output=True, text=True, timeout=600, check=False)
    return EngineNight(simulated_study, home, run.returncode, run.stdout, run.stderr)
