"""The service: its hour exists once a day everywhere, and it knows whether a night is running."""

import fcntl
import json
import subprocess
import sys
from datetime import datetime, timedelta
from pathlib import Path
from zoneinfo import ZoneInfo, available_timezones

import pytest

from flows import prefect_settings
from flows.errors import InputError
from flows.flow_server import live_server
from flows.nightly import run_night
from flows.schedule import CRON, serve
from flows.steps.opening import LOCK_NAME, is_held

YEARS = range(2024, 2039)


def days_of_changes(zone):
    """The local days on or next to which the zone's offset changes: looked for week by week, since no change is undone within days."""
    first = datetime(YEARS.start, 1, 1, tzinfo=zone)
    weeks = [first + timedelta(days=7 * number) for number in range(53 * len(YEARS))]
    changed = [week for week, before, after in zip(weeks, map(offset, weeks), map(offset, weeks[1:]), strict=False) if before != after]
    return [week + timedelta(days=number) for week in changed for number in range(-1, 9)]


def offset(instant):
    return instant.utcoffset()


def zones_without(hour, minute):
    """The zones in which that time is skipped or repeated on some day."""
    troubled = set()
    for name in available_timezones():
        for day in days_of_changes(ZoneInfo(name)):
            local = day.replace(hour=hour, minute=minute)
            if local.utcoffset() != local.replace(fold=1).utcoffset():
                troubled.add(name)
    return troubled


def test_no_zone_skips_or_repeats_the_hour_of_the_night():
    assert CRON == "15 4 * * *"
    assert zones_without(4, 15) == set()


def test_the_usual_hour_would_be_skipped_or_repeated():
    assert "Europe/Lisbon" not in zones_without(2, 30)
    assert {"Europe/Paris", "America/New_York"} & zones_without(2, 30) == {"Europe/Paris", "America/New_York"}


def test_a_held_study_is_known_as_held_and_looking_does_not_hold_it(tmp_path):
    assert not is_held(tmp_path)
    with (tmp_path / LOCK_NAME).open("ab") as night:
        fcntl.flock(night, fcntl.LOCK_EX)
        assert is_held(tmp_path)
    assert not is_held(tmp_path)
    with (tmp_path / LOCK_NAME).open("ab") as night:
        fcntl.flock(night, fcntl.LOCK_EX | fcntl.LOCK_NB)


@pytest.mark.parametrize("note", [None, "", "[]", json.dumps({"url": "http://127.0.0.1:9/api", "process": 1}), '{"url": "nonsense"}'])
def test_a_server_that_does_not_answer_is_none(tmp_path, note):
    (tmp_path / "prefect").mkdir()
    if note is not None:
        (tmp_path / "prefect" / "server.json").write_text(note)
    assert live_server(tmp_path) is None


@pytest.mark.parametrize("door", [serve, run_night])
def test_a_folder_that_is_no_study_is_refused_before_anything_starts(tmp_path, door):
    with pytest.raises(InputError, match=r"protocol\.toml: does not exist"):
        door(tmp_path / "nothing")
    assert list(tmp_path.iterdir()) == []


def test_settings_are_defaults_and_leave_what_is_set(tmp_path, monkeypatch):
    for name in (*prefect_settings.DEFAULTS, "PREFECT_HOME", "PREFECT_API_URL"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("PREFECT_LOGGING_LEVEL", "DEBUG")
    settings = dict(prefect_settings.DEFAULTS)
    try:
        prefect_settings.settle(tmp_path / "store")
        found = {name: prefect_settings.os.environ[name] for name in settings}
        assert found == settings | {"PREFECT_LOGGING_LEVEL": "DEBUG"}
        assert prefect_settings.os.environ["PREFECT_HOME"] == str(tmp_path / "store" / "prefect")
        assert (tmp_path / "store" / "prefect").is_dir()
        assert "PREFECT_API_URL" not in prefect_settings.os.environ
    finally:
        for name in (*settings, "PREFECT_HOME"):
            prefect_settings.os.environ.pop(name, None)


def test_a_service_can_hand_the_flow_to_a_child():
    script = (
        "import cloudpickle, pickle\n"
        "from flows.nightly_flow import nightly\n"
        "assert pickle.loads(cloudpickle.dumps(nightly)).name == 'nightly'\n"
    )
    subprocess.run([sys.executable, "-c", script], check=True, cwd=Path(__file__).parents[2])
