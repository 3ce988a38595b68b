"""The night without the orchestration: what it publishes, what a second one changes, and what one bad package costs."""

import csv
import errno
import fcntl
import hashlib
import io
import json
import os
import shutil
import subprocess
import sys
from datetime import datetime
from pathlib import Path
from types import SimpleNamespace

import pandas as pd
import pyarrow.parquet as pq
import pytest
import sqlalchemy as sa

from flows import nightly
from flows.catalogue import evidence_files, trail
from flows.catalogue.engine import open_catalogue, reading
from flows.catalogue.models import AuditRow, NightRow
from flows.errors import InputError
from flows.nightly import run_night_plain
from flows.publish.refusal import GateRefused
from flows.steps import opening, publishing
from flows.steps.opening import AlreadyRunning, Options
from tests.flows.made_study import InProcess, make_study, plain_report, published, send, times
from tests.flows.made_work import work

OPTIONS = Options(workers=1, work=work)


@pytest.fixture
def study(tmp_path):
    return make_study(tmp_path / "tarn")


@pytest.fixture(autouse=True)
def light(request, monkeypatch):
    """No children, plain pages and no gate, unless a test asks for the real thing; each is tested where it stands."""
    monkeypatch.setattr(publishing, "write_report", plain_report)
    if "real_gate" not in request.fixturenames:
        monkeypatch.setattr(publishing, "answers", lambda _tables: [])
    if "real_children" not in request.fixturenames:
        monkeypatch.setattr(opening, "Workers", InProcess)


@pytest.fixture
def real_gate():
    """Test the promises with the validation engine."""


@pytest.fixture
def real_children():
    """Assess in child processes."""


def table(study, name):
    return pd.read_parquet(study / "published" / "latest" / f"{name}.parquet")


def statuses(study):
    packages = table(study, "packages")
    return dict(zip(packages["package"], packages["status"], strict=True))


def ends_of_nights(study):
    engine = open_catalogue(study / "store")
    with reading(engine) as session:
        found = [row.status for row in session.scalars(sa.select(NightRow).order_by(NightRow.id))]
    engine.dispose()
    return found


def audit(study, what):
    engine = open_catalogue(study / "store")
    with reading(engine) as session:
        assert trail.broken_lines(session) == []
        rows = session.scalars(sa.select(AuditRow).where(AuditRow.what == what).order_by(AuditRow.id))
        found = [(row.old, row.new) for row in rows]
    engine.dispose()
    return found


@pytest.mark.usefixtures("real_gate")
def test_a_night_publishes_and_a_second_one_changes_no_byte_and_no_time(study, capsys):
    send(study, "H-1-baseline")
    send(study, "H-2-baseline", note="queried")
    send(study, "H-3-baseline", complete=False)
    first = run_night_plain(study, OPTIONS)
    assert statuses(study) == {"H-1-baseline": "accepted", "H-2-baseline": "queried", "H-3-baseline": "waiting"}
    assert first.counts == {"harbour": {"accepted": 1, "queried": 1, "waiting": 1}, "weir": {}}
    assert (first.assessed, first.is_new, first.problems) == (2, True, ())
    assert str((study / "published" / "latest").readlink()) == first.release == first.folder.name
    assert first.report.is_file()
    assert capsys.readouterr().err == "2 packages to assess\n2 of 2 packages assessed\n"
    before, when = published(study), times(study)
    second = run_night_plain(study, OPTIONS)
    assert (published(study), times(study)) == (before, when)
    assert (second.release, second.is_new, second.assessed) == (first.release, False, 0)
    assert audit(study, "published/latest") == [(None, first.release)]
    assert ends_of_nights(study) == ["finished", "finished"]


def test_a_release_holds_all_tables_their_dictionary_the_report_and_the_sums_of_all(study):
    send(study, "H-1-baseline")
    result = run_night_plain(study, OPTIONS)
    tables = ("packages", "acquisitions", "runs", "beats", "rejections", "indices", "changes")
    files = {path.relative_to(result.folder).as_posix() for path in result.folder.rglob("*") if path.is_file()}
    expected = {f"{name}.{kind}" for name in tables for kind in ("parquet", "csv")}
    assert files == expected | {"dictionary.json", "manifest-sha256.txt", "report/index.html", "report/acquisitions/H-1-baseline.html"}
    lines = dict(line.split("  ", 1)[::-1] for line in (result.folder / "manifest-sha256.txt").read_text().splitlines())
    assert set(lines) == files - {"manifest-sha256.txt"}
    assert all(hashlib.sha256((result.folder / name).read_bytes()).hexdigest() == sha256 for name, sha256 in lines.items())
    assert result.release in result.report.read_text()


def test_the_same_inbox_gives_the_same_bytes_in_another_place_time_zone_and_order(study, tmp_path, monkeypatch):
    other = make_study(tmp_path / "elsewhere" / "tarn")
    names = ["H-1-baseline", "H-2-baseline", "Ä-not-a-name", "W-1-baseline"]
    for folder, order in ((study, names), (other, names[::-1])):
        for name in order:
            send(folder, name, site="weir" if name.startswith("W") else "harbour")
    run_night_plain(study, OPTIONS)
    monkeypatch.setenv("TZ", "Pacific/Chatham")
    monkeypatch.setenv("LC_ALL", "C")
    script = (
        "import sys; from pathlib import Path\n"
        "from flows.nightly import run_night_plain\n"
        "from flows.steps import opening, publishing\n"
        "from flows.steps.opening import Options\n"
        "from tests.flows.made_study import InProcess, plain_report\n"
        "from tests.flows.made_work import work\n"
        "opening.Workers, publishing.write_report, publishing.answers = InProcess, plain_report, lambda _tables: []\n"
        "run_night_plain(Path(sys.argv[1]), Options(work=work))\n"
    )
    root = Path(__file__).parents[2]
    environment = os.environ | {"PYTHONPATH": str(root), "PYTHONHASHSEED": "77"}
    subprocess.run([sys.executable, "-c", script, other], check=True, env=environment, umask=0o077, capture_output=True)
    assert published(other) == published(study)


@pytest.mark.usefixtures("real_children")
def test_a_package_that_is_refused_hangs_dies_or_fails_costs_itself_only(study):
    for note in ("fine", "refuse", "hang", "die", "raise"):
        send(study, note, note=note)
    result = run_night_plain(study, Options(workers=2, time_out_s=2.0, work=work))
    packages = table(study, "packages").set_index("package")
    assert packages["status"].to_dict() == {"fine": "accepted", **dict.fromkeys(("refuse", "hang", "die", "raise"), "quarantined")}
    assert packages.loc["hang", "reason"] == "the program could not assess this package within 2 s"
    assert packages.loc["die", "reason"] == "the program could not assess this package: its process ended with code -9"
    assert packages.loc["raise", "reason"] == "the program could not assess this package: ValueError: made to fail"
    assert packages.loc["refuse", "reason"] == "note.txt: is made to be refused. Send another."
    assert list(table(study, "acquisitions")["acquisition"]) == ["fine"]
    assert [problem.split(":")[0] for problem in result.problems] == ["harbour/die", "harbour/hang", "harbour/raise"]


def test_what_failed_is_not_tried_again_unless_asked_or_something_changed(study, monkeypatch):
    send(study, "fine")
    send(study, "raise", note="raise")
    send(study, "refuse", note="refuse")
    assert run_night_plain(study, OPTIONS).assessed == 3
    before = published(study)
    assert run_night_plain(study, OPTIONS).assessed == 0
    again = run_night_plain(study, Options(work=work, retry_failed=True))
    assert again.assessed == 1
    assert published(study) == before
    monkeypatch.setattr(opening, "software_version", lambda: "99.0")
    assert run_night_plain(study, OPTIONS).assessed == 3
    assert set(table(study, "acquisitions")["software_version"]) == {"99.0"}
    assert [new for _, new in audit(study, "software")][-1] == "99.0"


def test_a_changed_protocol_or_revision_assesses_all_in_force_anew(study, monkeypatch):
    send(study, "H-1-baseline")
    run_night_plain(study, OPTIONS)
    protocol = study / "protocol.toml"
    protocol.write_text(protocol.read_text().replace('version = "1"', 'version = "2"'))
    assert run_night_plain(study, OPTIONS).assessed == 1
    assert list(table(study, "acquisitions")["protocol_version"]) == ["2"]
    raised = opening.revisions() | {"flat-line": 77}
    monkeypatch.setattr(opening, "revisions", lambda: raised)
    assert run_night_plain(study, OPTIONS).assessed == 1
    assert len(audit(study, "protocol")) == len(audit(study, "revisions of checks and indices")) == 2


def test_a_study_locked_to_other_revisions_is_not_run(study):
    protocol = study / "protocol.toml"
    protocol.write_text(protocol.read_text() + "\n[study.lock]\nflat-line = 77\n")
    with pytest.raises(InputError, match="flat-line is locked at revision 77"):
        run_night_plain(study, OPTIONS)
    assert not (study / "store").exists()


def test_a_corrected_package_takes_over_and_a_corrected_one_that_is_refused_does_not(study):
    send(study, "up-1", "H-1-baseline")
    run_night_plain(study, OPTIONS)
    send(study, "up-2", "H-1-baseline", note="queried", days=1)
    run_night_plain(study, OPTIONS)
    assert statuses(study) == {"up-1": "superseded", "up-2": "queried"}
    assert list(table(study, "acquisitions")["version"]) == [2]
    send(study, "up-3", "H-1-baseline", note="refuse", days=2)
    run_night_plain(study, OPTIONS)
    assert statuses(study) == {"up-1": "superseded", "up-2": "queried", "up-3": "quarantined"}
    assert list(table(study, "acquisitions")["verdict"]) == ["queried"]


def test_all_in_one_night_ends_as_night_by_night(study, tmp_path):
    uploads = [("up-1", "fine", 0), ("up-2", "refuse", 1), ("up-3", "queried", 2), ("up-4", "fine", 2)]
    at_once = make_study(tmp_path / "at-once" / "tarn")
    for package, note, days in uploads:
        text = {"signal.csv": "up-1" if package == "up-4" else package}
        for folder in (at_once, study):
            send(folder, package, "H-1-baseline", note=note, days=days, **text)
        run_night_plain(study, OPTIONS)
    run_night_plain(at_once, OPTIONS)
    assert table(study, "packages").to_csv() == table(at_once, "packages").to_csv()
    assert published(study)["latest"] == published(at_once)["latest"]
    assert statuses(at_once) == {"up-1": "superseded", "up-2": "quarantined", "up-3": "queried", "up-4": "seen again"}


def test_an_older_version_that_comes_into_force_again_is_assessed_in_the_same_night(study):
    send(study, "up-1", "H-1-baseline")
    send(study, "up-2", "H-1-baseline", note="refuse", days=1)
    result = run_night_plain(study, OPTIONS)
    assert result.assessed == 2
    assert statuses(study) == {"up-1": "accepted", "up-2": "quarantined"}


def test_what_was_received_stays_when_the_inbox_is_emptied(study):
    folder = send(study, "H-1-baseline")
    refused = send(study, "H-2-baseline", note="refuse")
    run_night_plain(study, OPTIONS)
    before = published(study)
    for path in (*folder.iterdir(), *refused.iterdir()):
        path.unlink()
    folder.rmdir()
    refused.rmdir()
    run_night_plain(study, OPTIONS)
    assert published(study) == before


def test_a_second_night_at_once_is_told_so_and_touches_nothing(study):
    send(study, "H-1-baseline")
    (study / "store").mkdir()
    with (study / "store" / "night.lock").open("ab") as held:
        fcntl.flock(held, fcntl.LOCK_EX)
        for door in (run_night_plain, nightly.run_night):
            with pytest.raises(AlreadyRunning, match="a night is already running"):
                door(study, OPTIONS)
    assert {path.name for path in (study / "store").iterdir()} == {"night.lock"}
    run_night_plain(study, OPTIONS)
    assert statuses(study) == {"H-1-baseline": "accepted"}


@pytest.mark.usefixtures("real_gate")
def test_a_refusal_at_the_gate_publishes_nothing_and_the_next_sound_night_does(study, monkeypatch):
    send(study, "H-1-baseline")
    first = run_night_plain(study, OPTIONS)
    before, when = published(study), times(study)
    send(study, "H-2-baseline")

    def sabotaged(job):
        outcome = work(job)
        outcome.acquisition["beats_accepted"] += 1
        return outcome

    with pytest.raises(GateRefused, match="acquisitions: 1 of 2 rows break 'beats_accepted are the sum over its runs'") as caught:
        run_night_plain(study, Options(work=sabotaged))
    assert "acquisition H-2-baseline" in caught.value.problems[0]
    assert (published(study), times(study)) == (before, when)
    assert list((study / "store" / "staging").iterdir()) == []
    assert ends_of_nights(study) == ["finished", "refused"]
    monkeypatch.setattr(opening, "software_version", lambda: "99.0")
    assert run_night_plain(study, OPTIONS).release != first.release


def test_rows_that_do_not_fit_the_tables_cost_their_package(study):
    def misfit(job):
        outcome = work(job)
        outcome.rows["beats"][0].pop("tau_ms")
        return outcome

    send(study, "H-1-baseline")
    result = run_night_plain(study, Options(work=misfit))
    (reason,) = table(study, "packages")["reason"]
    assert reason.startswith("the program could not assess this package: beats: columns missing ['tau_ms']")
    assert result.problems == (f"harbour/H-1-baseline: {reason}",)


def test_a_cell_that_breaks_a_schema_is_refused_by_name(study):
    def odd(job):
        outcome = work(job)
        outcome.acquisition["verdict"] = "splendid"
        return outcome

    send(study, "H-1-baseline")
    with pytest.raises(GateRefused, match=r"verdict breaks isin.*'splendid' in acquisition H-1-baseline"):
        run_night_plain(study, Options(work=odd))
    assert not (study / "published").exists()


def test_an_altered_release_is_not_taken_for_a_good_one(study):
    send(study, "H-1-baseline")
    result = run_night_plain(study, OPTIONS)
    (result.folder / "beats.csv").write_text("")
    with pytest.raises(InputError, match=r"a published release was altered \(found 'beats.csv'\)"):
        run_night_plain(study, OPTIONS)
    assert (result.folder / "beats.csv").read_text() == ""
    (study / "published" / result.release).rename(study / "set-aside")
    assert run_night_plain(study, OPTIONS).release == result.release
    assert (result.folder / "beats.csv").read_text() != ""


def test_lost_evidence_is_made_anew_and_altered_evidence_is_named(study):
    send(study, "H-1-baseline")
    run_night_plain(study, OPTIONS)
    before = published(study)
    (path,) = (study / "store" / "evidence").iterdir()
    path.write_bytes(evidence_files.packed({"acquisition": "other"}))
    with pytest.raises(InputError, match="has changed since it was written"):
        run_night_plain(study, OPTIONS)
    path.unlink()
    assert run_night_plain(study, OPTIONS).assessed == 1
    assert published(study) == before


def test_an_original_that_rots_is_not_assessed_and_costs_its_own_package(study, monkeypatch):
    gone = [send(study, name) for name in ("H-1-baseline", "H-2-baseline", "H-3-baseline")]
    run_night_plain(study, OPTIONS)
    listings = {path.stem for path in (study / "store" / "packages").iterdir()}
    for folder in gone:
        shutil.rmtree(folder)
    contents = dict(zip(table(study, "packages")["package"], table(study, "packages")["package_sha256"], strict=True))
    assert listings == set(contents.values())
    (study / "store" / "packages" / f"{contents['H-1-baseline']}.json").unlink()
    digest = json.loads((study / "store" / "packages" / f"{contents['H-2-baseline']}.json").read_text())["files"]["acquisition.json"]
    rotted = study / "store" / "objects" / digest[:2] / digest
    rotted.chmod(0o644)
    rotted.write_text(rotted.read_text().replace("H-2", "H-9"))
    monkeypatch.setattr(opening, "software_version", lambda: "99.0")
    result = run_night_plain(study, OPTIONS)
    reasons = dict(zip(table(study, "packages")["package"], table(study, "packages")["reason"], strict=True))
    assert statuses(study) == {"H-1-baseline": "quarantined", "H-2-baseline": "quarantined", "H-3-baseline": "accepted"}
    assert reasons["H-1-baseline"] == "the program could not assess this package: no such package was kept"
    assert reasons["H-2-baseline"] == "the program could not assess this package: the kept copy of acquisition.json is damaged"
    assert len(result.problems) == 2


def test_a_release_can_be_given_a_name_once(study):
    send(study, "H-1-baseline")
    named = Options(work=work, release="first-data-cut")
    assert run_night_plain(study, named).folder == study / "published" / "first-data-cut"
    assert not run_night_plain(study, named).is_new
    send(study, "H-2-baseline")
    with pytest.raises(InputError, match="another release stands under this name"):
        run_night_plain(study, named)
    for name in ("latest", "../up", "", "a b"):
        with pytest.raises(InputError, match="is not a name for a release"):
            run_night_plain(study, Options(work=work, release=name))


def test_csv_and_parquet_say_the_same_and_text_is_no_formula(study):
    send(study, "-cmd", "H-1-baseline", note="raise")
    send(study, "=1+1", "H-2-baseline", note="fine")
    send(study, "H-3-baseline")
    run_night_plain(study, OPTIONS)
    latest = study / "published" / "latest"
    for name in ("packages", "acquisitions", "runs", "beats", "rejections", "indices", "changes"):
        rows = list(csv.reader(io.StringIO((latest / f"{name}.csv").read_text(encoding="utf-8"), newline="")))
        parquet = pq.read_table(latest / f"{name}.parquet")
        assert parquet.schema.metadata[b"contract"] == b"1"
        assert rows[0] == parquet.column_names
        assert rows[1:] == [[as_text(value) for value in row.values()] for row in parquet.to_pylist()], name


def as_text(value):
    """How a cell must read in CSV, said again in other words than the program's."""
    if value is None:
        return ""
    if isinstance(value, datetime):
        text = value.strftime("%Y-%m-%dT%H:%M:%S.%f")
        return text.removesuffix(".000000") + "Z"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return "'" + value if value[0] in "=+-@" else value
    return repr(value)


def test_a_database_url_is_taken_from_the_environment_or_the_options(study, tmp_path, monkeypatch):
    send(study, "H-1-baseline")
    monkeypatch.setenv(opening.URL_VARIABLE, f"sqlite:///{tmp_path / 'from-environment.db'}")
    run_night_plain(study, OPTIONS)
    run_night_plain(study, Options(work=work, database_url=f"sqlite:///{tmp_path / 'from-options.db'}"))
    assert {path.name for path in tmp_path.glob("*.db")} == {"from-environment.db", "from-options.db"}
    assert not (study / "store" / "catalogue.db").exists()


def test_killed_anywhere_the_next_night_ends_the_same(tmp_path):
    script = Path(__file__).with_name("made_kills.py")
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])}
    run = subprocess.run([sys.executable, script, tmp_path, "7"], env=environment, capture_output=True, text=True, check=False)
    assert run.returncode == 0, run.stderr
    answer = json.loads(run.stdout)
    assert answer["moved"]
    assert answer["total"] > 100
    assert len(answer["found"]) >= 7
    for found in answer["found"]:
        assert all(found.values()), found


def fail_at(monkeypatch, point):
    """Let the disk refuse one flush, the one numbered ``point``; return the count of flushes so far."""
    real, flushed = os.fsync, []

    def flush(descriptor):
        flushed.append(descriptor)
        if len(flushed) == point:
            raise OSError(errno.EIO, "made to fail")
        real(descriptor)

    monkeypatch.setattr(os, "fsync", flush)
    return flushed


def test_a_failing_disk_is_never_a_green_night_and_the_next_one_ends_the_same(study, tmp_path, monkeypatch):
    send(study, "H-1-baseline")
    reference = make_study(tmp_path / "reference")
    send(reference, "H-1-baseline")
    with monkeypatch.context() as patch:
        flushed = fail_at(patch, 0)
        run_night_plain(reference, OPTIONS)
    for point in range(3, len(flushed), len(flushed) // 5):
        copy = shutil.copytree(study, tmp_path / f"point-{point}")
        with monkeypatch.context() as patch:
            fail_at(patch, point)
            with pytest.raises(OSError, match="made to fail"):
                run_night_plain(copy, OPTIONS)
        assert ends_of_nights(copy)[-1:] in ([], ["failed"])
        run_night_plain(copy, OPTIONS)
        assert published(copy) == published(reference)


def test_where_the_orchestration_does_not_start_the_night_runs_without_it(study, monkeypatch):
    class EngineFailed(Exception):  # noqa: N818  (the name of the real one)
        pass

    def fails(_study, _options):
        message = "RuntimeError: no server"
        raise EngineFailed(message)

    fake = SimpleNamespace(EngineFailed=EngineFailed, run_flow=fails)
    monkeypatch.setitem(sys.modules, "flows.nightly_flow", fake)
    monkeypatch.setattr(nightly, "settle", lambda _store: None)
    send(study, "H-1-baseline")
    result = nightly.run_night(study, OPTIONS)
    assert result.problems == ("the orchestration did not start, the night ran without it: RuntimeError: no server",)
    assert statuses(study) == {"H-1-baseline": "accepted"}


def test_a_result_reads_as_lines(study):
    send(study, "H-1-baseline")
    send(study, "raise", note="raise")
    lines = str(run_night_plain(study, OPTIONS)).splitlines()
    assert lines[:3] == ["harbour  1 accepted, 1 quarantined", "weir     nothing", "assessed tonight: 2"]
    assert lines[3].startswith("look at: harbour/raise: the program could not assess this package")
    assert lines[4].startswith("release ")
    assert "(unchanged)" in str(run_night_plain(study, OPTIONS))
