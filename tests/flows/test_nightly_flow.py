"""The night under the real orchestration: started once, looked at here."""

import sqlite3
from contextlib import closing

import pandas as pd
import pytest

pytestmark = pytest.mark.engine


def records(night, query):
    with closing(sqlite3.connect(night.study / "store" / "prefect" / "prefect.db")) as connection:
        return connection.execute(query).fetchall()


def test_the_command_says_what_came_out_and_nothing_stray(engine_night):
    assert engine_night.code == 0, engine_night.complained
    assert engine_night.complained == "1 package to assess\n1 of 1 packages assessed\n"
    lines = engine_night.said.splitlines()
    assert lines[0] == "harbour  1 accepted, 1 quarantined"
    assert lines[1] == "assessed tonight: 1"
    assert lines[2].startswith("release ")


def test_the_release_and_its_report_stand(engine_night):
    latest = engine_night.study / "published" / "latest"
    assert list(pd.read_parquet(latest / "acquisitions.parquet")["verdict"]) == ["accepted"]
    page = (latest / "report" / "index.html").read_text(encoding="utf-8")
    assert latest.readlink().name in page
    assert (latest / "report" / "acquisitions" / "H-014-visit-1.html").is_file()


def test_the_records_of_the_orchestration_are_complete(engine_night):
    assert records(engine_night, "SELECT state_type FROM flow_run") == [("COMPLETED",)]
    assert records(engine_night, "SELECT name, state_type FROM task_run") == [("assess-1", "COMPLETED")]
    artifacts = dict(records(engine_night, "SELECT key, data FROM artifact"))
    assert set(artifacts) == {"assessed", "packages", "night"}
    assert float(artifacts["assessed"]) == 100.0
    (parameters,) = records(engine_night, "SELECT parameters FROM flow_run")
    assert str(engine_night.study) in parameters[0]


def test_nothing_is_left_in_the_home_of_the_user_or_in_the_study_beside_its_folders(engine_night):
    assert list(engine_night.home.rglob("*")) == []
    assert {path.name for path in engine_night.study.iterdir()} == {"inbox", "protocol.toml", "published", "store"}
