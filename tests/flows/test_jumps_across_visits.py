"""One subject's visits held against each other at the end of a night: a jump is asked about, and nothing is withheld."""

from dataclasses import replace

import pandas as pd
import pytest

from flows.nightly import run_night_plain
from flows.steps import opening, publishing
from flows.steps.opening import Options
from tests.flows import made_work
from tests.flows.made_study import PROTOCOL, InProcess, make_study, plain_report, published, send

CHECK = "visits-agree-volume"


def work(job):
    """The stand-in's answer, its end-diastolic volume and the day of its recording taken from the package's rest.txt."""
    found = made_work.work(job)
    edv_ml, day = job.files["rest.txt"].read_text(encoding="utf-8").split()
    bounds = dict.fromkeys(("ci_low", "ci_high", "fit_ci_low", "fit_ci_high"))
    indices = [row | bounds | {"value": float(edv_ml)} if row["index"] == "EDV" else row for row in found.rows["indices"]]
    recorded_at = found.acquisition["recorded_at"].replace(day=int(day))
    return replace(found, acquisition=found.acquisition | {"recorded_at": recorded_at}, rows={**found.rows, "indices": indices})


OPTIONS = Options(workers=1, work=work)


@pytest.fixture(autouse=True)
def light(monkeypatch):
    """No children and plain pages; the gate is the real one."""
    monkeypatch.setattr(publishing, "write_report", plain_report)
    monkeypatch.setattr(opening, "Workers", InProcess)


def night(folder, *sent, protocol=PROTOCOL):
    """The tables of a night over acquisitions of subject H-1: (name, EDV in mL, day recorded)."""
    study = make_study(folder / "tarn", protocol)
    for name, edv_ml, day in sent:
        send(study, f"H-1-{name}", visit=name, **{"rest.txt": f"{edv_ml} {day}"})
    run_night_plain(study, OPTIONS)
    latest = study / "published" / "latest"
    return study, {name: pd.read_parquet(latest / f"{name}.parquet") for name in ("packages", "acquisitions", "rejections", "indices")}


def told(tables):
    log = tables["rejections"]
    return log[log["check"] == CHECK].set_index("acquisition")


def test_a_heart_twice_as_large_is_asked_about_and_still_published(tmp_path):
    _, tables = night(tmp_path, ("one", 120, 4), ("two", 260, 9))
    verdicts = tables["acquisitions"].set_index("acquisition")
    assert dict(verdicts["verdict"]) == {"H-1-one": "accepted", "H-1-two": "queried"}
    assert verdicts.loc["H-1-two", "reasons"] == CHECK
    assert dict(tables["packages"].set_index("package")["status"]) == dict(verdicts["verdict"])
    row = told(tables).loc["H-1-two"]
    assert (row["verdict"], row["action"], bool(row["decisive"]), row["limit"]) == ("fail", "query", True, 2.0)
    assert row["value"] == pytest.approx(260 / 120)
    assert "another subject" in row["reason"]
    edv = tables["indices"].query("index == 'EDV' and primary").set_index("acquisition")
    assert set(edv["status"]) == {"published"}
    assert edv.loc["H-1-two", "value"] == 260.0


def test_the_later_recording_is_asked_about_whatever_came_first(tmp_path):
    _, tables = night(tmp_path, ("one", 260, 9), ("two", 120, 4))
    assert dict(tables["acquisitions"].set_index("acquisition")["verdict"]) == {"H-1-one": "queried", "H-1-two": "accepted"}


def test_half_as_large_again_is_suspect_and_changes_no_verdict(tmp_path):
    _, tables = night(tmp_path, ("one", 120, 4), ("two", 200, 9))
    assert set(tables["acquisitions"]["verdict"]) == {"accepted"}
    row = told(tables).loc["H-1-two"]
    assert (row["verdict"], row["action"], bool(row["decisive"])) == ("suspect", "none", False)


def test_visits_that_agree_leave_no_row(tmp_path):
    _, tables = night(tmp_path, ("one", 120, 4), ("two", 130, 9))
    assert told(tables).empty
    assert set(tables["acquisitions"]["verdict"]) == {"accepted"}


def test_the_protocol_s_limits_hold_here_too(tmp_path):
    _, tables = night(tmp_path, ("one", 120, 4), ("two", 130, 9), protocol=f"{PROTOCOL}\n[limits.{CHECK}]\nfail_above = 1.05\n")
    assert told(tables).loc["H-1-two", "limit"] == 1.05


def test_a_second_night_changes_no_byte(tmp_path):
    study, _ = night(tmp_path, ("one", 120, 4), ("two", 260, 9))
    before = published(study)
    assert not run_night_plain(study, OPTIONS).is_new
    assert published(study) == before
