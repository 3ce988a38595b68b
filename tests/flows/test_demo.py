import importlib
import sys
import types
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from checks import ALL as CHECKS
from checks.tables.packages import STATUSES
from flows import demo
from flows.assess import assess
from flows.errors import InputError
from flows.intake.arrival import scan
from flows.intake.register import classify
from flows.sources.simulated import study as tarn
from flows.sources.simulated.cases import CASES, PutIn, TrueIndex
from flows.sources.simulated.faults import Expected
from flows.study.manifest import read_manifest
from flows.study.protocol import read_protocol

BEAT = PutIn("A-1", "fell", "A-1", "a fault", "flat-line", ("Ea",), ("SV",), (Expected("flat-line", "rest", (1.5,)),))
WHOLE = PutIn("A-1", "fell", "A-1", "a fault", "zero-drift", expected=(Expected("zero-drift"),))
CLEAN = PutIn("A-1", "fell", "A-1", "none", "", truths=(TrueIndex("baseline", "SV", 70.0),))


def rejection(check: str, *, run: str | None = None, beat: int | None = None, verdict: str = "fail") -> dict:
    return {"acquisition": "A-1", "run": run, "beat": beat, "check": check, "verdict": verdict}


def index(name: str, status: str) -> dict:
    value, reason = (71.0, None) if status == "published" else (None, "zero-drift")
    stage = {"acquisition": "A-1", "stage": "baseline", "index": name, "primary": True}
    return stage | {"value": value, "status": status, "reason": reason}


def beat(number: int, verdict: str = "accepted") -> dict:
    reasons = "flat-line" if verdict == "rejected" else None
    place = {"acquisition": "A-1", "run": "rest", "beat": number, "start_s": number - 1.0, "end_s": float(number)}
    return place | {"verdict": verdict, "reasons": reasons}


def tables(*, status: str = "accepted", beats=None, rejections=(), indices=None) -> dict[str, pd.DataFrame]:
    beats = [beat(number) for number in range(1, 31)] if beats is None else beats
    accepted = sum(one["verdict"] == "accepted" for one in beats)
    rows = {
        "packages": [{"site": "fell", "package": "A-1", "status": status}],
        "acquisitions": [{"acquisition": "A-1"}],
        "runs": [{"acquisition": "A-1", "run": "rest", "beats": len(beats), "beats_accepted": accepted}],
        "beats": beats,
        "rejections": list(rejections) or [rejection("cycle-length", verdict="not evaluated", run="rest", beat=1)],
        "indices": [index("SV", "published"), index("Ea", "withheld")] if indices is None else indices,
        "changes": [],
    }
    return {name: pd.DataFrame(table) for name, table in rows.items()}


def missed(put_in: PutIn, shown: dict[str, pd.DataFrame]) -> tuple[str, ...]:
    return demo.compared([put_in], shown)[0].missed


def test_a_beat_fault_is_found_where_a_rejected_beat_holds_its_instant():
    beats = [beat(1), beat(2, "rejected"), beat(3)]
    assert missed(BEAT, tables(beats=beats, rejections=[rejection("flat-line", run="rest", beat=2)])) == ()


@pytest.mark.parametrize(
    "rejections",
    [
        [],
        [rejection("flat-line", run="rest", beat=3)],
        [rejection("flat-line", run="ramp", beat=2)],
        [rejection("flat-line", run="rest", beat=2, verdict="suspect")],
        [rejection("loop-closure", run="rest", beat=2)],
    ],
    ids=["nothing", "another beat", "another run", "suspect only", "another check"],
)
def test_a_beat_fault_is_missed_otherwise(rejections):
    beats = [beat(1), beat(2, "rejected"), beat(3, "rejected")]
    assert missed(BEAT, tables(beats=beats, rejections=rejections)) == ("flat-line in rest, 0 of 1, 1 rejected otherwise",)


def test_a_beat_that_failed_but_was_accepted_is_missed():
    assert missed(BEAT, tables(rejections=[rejection("flat-line", run="rest", beat=2)])) == ("flat-line in rest, 0 of 1",)


def test_every_touched_beat_must_be_rejected_and_one_by_the_check_itself():
    two = replace(BEAT, expected=(Expected("flat-line", "rest", (1.5, 2.5)),))
    found = [rejection("flat-line", run="rest", beat=2)]
    outcome = demo.compared([two], tables(beats=[beat(1), beat(2, "rejected"), beat(3, "rejected")], rejections=found))[0]
    assert outcome.missed == ()
    assert "1 of 2, 1 rejected otherwise" in outcome.found
    assert missed(two, tables(beats=[beat(1), beat(2, "rejected"), beat(3)], rejections=found)) == ("flat-line in rest, 1 of 2",)


def test_an_acquisition_fault_is_found_on_its_own_level_only():
    assert missed(WHOLE, tables(status="queried", rejections=[rejection("zero-drift")])) == ()
    assert missed(WHOLE, tables(status="queried", rejections=[rejection("zero-drift", run="rest")])) == ("zero-drift not found",)


def test_indices_that_should_be_withheld_or_published():
    beats, found = [beat(1), beat(2, "rejected")], [rejection("flat-line", run="rest", beat=2)]
    wrong = tables(beats=beats, rejections=found, indices=[index("Ea", "published"), index("SV", "withheld")])
    assert missed(BEAT, wrong) == ("Ea should be withheld, is published", "SV should be published, is withheld")
    absent = tables(beats=beats, rejections=found, indices=[index("SV", "published")])
    assert missed(BEAT, absent) == ("Ea should be withheld, is not there",)


@pytest.mark.parametrize("fate", demo.FATES)
def test_what_is_not_assessed_is_known_by_its_status(fate):
    put_in = replace(CLEAN, found=fate, truths=())
    assert missed(put_in, tables(status=fate)) == ()
    assert missed(put_in, tables(status="accepted")) == (f"expected {fate}, found accepted",)


def test_a_clean_acquisition_must_be_accepted_with_hardly_a_beat_rejected():
    assert missed(CLEAN, tables()) == ()
    assert missed(CLEAN, tables(status="queried")) == ("clean, but queried",)
    worn = tables(beats=[beat(number, "rejected" if number < 4 else "accepted") for number in range(1, 31)])
    assert missed(CLEAN, worn) == ("clean, but 10% of its beats were rejected",)
    assert demo.rejected_share("A-2", worn["runs"]) == 1.0


def test_a_package_without_a_row_is_missed():
    assert missed(replace(CLEAN, package="A-9"), tables()) == ("expected one row in packages, found 0",)


def broken(shown: dict[str, pd.DataFrame], sent: int = 1) -> list[str]:
    return [words for words, holds in demo.contract_identities(shown, sent) if not holds]


def test_identities_hold_for_tables_that_add_up():
    assert broken(tables(beats=[beat(1), beat(2, "rejected")])) == []


def test_each_identity_can_break():
    lost = tables()
    lost["beats"] = lost["beats"].iloc[1:]
    assert broken(lost) == ["every run's counts are those of its beats"]
    undecided = tables()
    undecided["beats"].loc[3, "verdict"] = "open"
    assert len(broken(undecided)) == 2
    assert broken(tables(), sent=2) == ["2 packages sent, each with one row"]
    assert broken(tables(status="waiting")) == ["0 packages assessed = 1 acquisitions"]
    silent = tables(beats=[beat(1), beat(2, "rejected") | {"reasons": None}])
    assert broken(silent) == ["every rejected beat says why"]
    twice = tables(indices=[index("SV", "published"), index("SV", "published")])
    assert broken(twice) == ["every acquisition, stage and index has exactly one primary row"]
    leaking = tables(indices=[index("Ea", "withheld") | {"value": 1.0}])
    assert broken(leaking) == ["what is withheld holds no value and says why"]


def test_every_finding_of_the_study_is_one_the_program_can_make():
    known = {check.name for check in CHECKS} | set(STATUSES)
    assert {put_in.found for put_in in tarn.PUT_IN} - {""} <= known


def night(folder) -> None:
    """Assess what lies in the inbox without orchestration, and publish bare tables."""
    protocol = read_protocol(folder)
    arrivals = {(one.site, one.package): one for one in scan(folder / "inbox", protocol.sites)}
    rows: dict[str, list[dict]] = {name: [] for name in demo.TABLES}
    for entry in classify(arrivals.values(), []):
        status = entry.status
        if status == "new":
            paths = arrivals[entry.site, entry.package].file_paths
            manifest = read_manifest(paths["acquisition.json"].read_bytes(), file="acquisition.json", protocol=protocol)
            found = assess(paths, manifest, protocol)
            status = str(found.acquisition["verdict"])
            rows["acquisitions"].append(found.acquisition)
            for name in ("runs", "beats", "rejections", "indices"):
                rows[name] += getattr(found, name)
        rows["packages"].append({"site": entry.site, "package": entry.package, "status": status})
    latest = folder / "published" / "latest"
    latest.mkdir(parents=True)
    for name, table in rows.items():
        pd.DataFrame(table).to_parquet(latest / f"{name}.parquet")


@pytest.fixture
def without_orchestration(monkeypatch):
    module = types.ModuleType("flows.nightly")
    module.run_night = night
    monkeypatch.setitem(sys.modules, "flows.nightly", module)
    monkeypatch.setattr(tarn, "CASES", tuple(case for case in CASES if case.subject in {"H-003", "F-004", "F-006", "Q-004", "W-001"}))


@pytest.mark.usefixtures("without_orchestration")
def test_what_is_put_in_is_found_by_the_program(tmp_path, capsys):
    demo.run_demo(tmp_path)
    shown = capsys.readouterr().out
    for words in (
        "pressure zero drifts by 7 mmHg",
        "accepted: flat-line in baseline-rest, ",
        "seen again",
        "published/latest/report/index.html",
    ):
        assert words in shown
    assert "MISS" not in shown
    assert "BROKEN" not in shown


@pytest.mark.usefixtures("without_orchestration")
def test_what_is_not_found_is_said_by_name(tmp_path, monkeypatch):
    cases = tuple(replace(case, found="loop-closure") for case in tarn.CASES if case.subject == "F-006")
    monkeypatch.setattr(tarn, "CASES", (*tarn.CASES[:1], *cases))
    with pytest.raises(demo.DemoError, match="F-006-visit-1"):
        demo.run_demo(tmp_path)


def test_a_folder_of_something_else_is_refused_before_anything_runs(tmp_path):
    (tmp_path / "mine.txt").write_text("mine")
    module = types.ModuleType("flows.nightly")
    with pytest.MonkeyPatch.context() as patch:
        patch.setitem(sys.modules, "flows.nightly", module)
        module.run_night = lambda _folder: pytest.fail("a night was run")
        with pytest.raises(InputError, match="not empty"):
            demo.run_demo(tmp_path)
    assert np.array_equal([path.name for path in tmp_path.iterdir()], ["mine.txt"])


def test_the_night_itself_publishes_what_the_demo_reads(tmp_path, monkeypatch, capsys):
    nightly = importlib.import_module("flows.nightly")
    monkeypatch.setattr(nightly, "run_night", nightly.run_night_plain)
    monkeypatch.setattr(tarn, "CASES", tuple(case for case in CASES if case.subject in {"F-004", "Q-006", "W-001"}))
    demo.run_demo(tmp_path)
    demo.run_demo(tmp_path)
    assert capsys.readouterr().out.count("ok  F-004-visit-1") == 2
    assert len([path for path in (tmp_path / "published").iterdir() if not path.is_symlink()]) == 1
    assert (tmp_path / "published" / "latest" / "report" / "index.html").is_file()
