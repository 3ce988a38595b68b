"""The same recording under two acquisitions: neither is published, in whatever order they came, until one is corrected."""

import hashlib
from dataclasses import replace

import pandas as pd
import pytest

from flows.nightly import run_night_plain
from flows.publish.copies import SHOWN, copies, with_copy_told
from flows.steps import opening, publishing
from flows.steps.opening import Options
from tests.flows import made_work
from tests.flows.made_study import InProcess, make_study, plain_report, published, send, times

CHECK = "copied-signal"


def work(job):
    """The stand-in's answer, with the sums of the channels the package's signals.txt names."""
    found = made_work.work(job)
    acquisition, site = found.acquisition["acquisition"], found.acquisition["site"]
    lines = job.files["signals.txt"].read_text(encoding="utf-8").split()
    channels = [
        {"site": site, "acquisition": acquisition, "run": "rest-1", "channel": channel, "sha256": hashlib.sha256(word.encode()).hexdigest()}
        for channel, word in zip(("pressure", "volume"), lines, strict=True)
    ]
    return replace(found, rows={**found.rows, "channels": channels})


OPTIONS = Options(workers=1, work=work)


@pytest.fixture
def study(tmp_path):
    return make_study(tmp_path / "tarn")


@pytest.fixture(autouse=True)
def light(monkeypatch):
    """No children and plain pages; the gate is the real one."""
    monkeypatch.setattr(publishing, "write_report", plain_report)
    monkeypatch.setattr(opening, "Workers", InProcess)


def sent(study, package, signals, **options):
    send(study, package, **{"signals.txt": signals}, **options)


def table(study, name):
    return pd.read_parquet(study / "published" / "latest" / f"{name}.parquet")


def verdicts(study):
    found = table(study, "acquisitions")
    return dict(zip(found["acquisition"], found["verdict"], strict=True))


def test_acquisitions_that_share_a_channel_are_rejected_with_all_their_indices_and_the_others_stand(study):
    sent(study, "H-1-baseline", "one two")
    sent(study, "H-2-baseline", "three two")
    sent(study, "W-1-baseline", "five six", site="weir")
    run_night_plain(study, OPTIONS)
    assert verdicts(study) == {"H-1-baseline": "rejected", "H-2-baseline": "rejected", "W-1-baseline": "accepted"}
    assert dict(table(study, "packages").set_index("package")["status"]) == verdicts(study)
    indices = table(study, "indices")
    copied = indices[indices["acquisition"] != "W-1-baseline"]
    assert set(copied["status"]) == set(copied["machine_status"]) == {"withheld"}
    assert copied["value"].isna().all()
    assert "acquisition H-2-baseline (run rest-1)" in copied[copied["acquisition"] == "H-1-baseline"]["reason"].iloc[0]
    assert (indices[indices["acquisition"] == "W-1-baseline"]["status"] == "published").any()
    log = table(study, "rejections")
    rows = log[log["check"] == CHECK]
    assert list(rows["acquisition"]) == ["H-1-baseline", "H-2-baseline"]
    assert rows["decisive"].all()
    assert set(rows["action"]) == {"reject"}
    assert all(CHECK in reasons.split(";") for reasons in table(study, "acquisitions")["reasons"].dropna())


def test_the_order_of_arrival_and_the_number_of_nights_change_nothing(tmp_path):
    last = {}
    for order in ("12", "21"):
        study = make_study(tmp_path / order / "tarn")
        for number in order:
            sent(study, f"H-{number}-baseline", "one two")
            run_night_plain(study, OPTIONS)
        together = {path: content for path, content in published(study).items() if path.startswith("latest")}
        last[order] = (together, published(study)[f"{(study / 'published' / 'latest').readlink()}/indices.csv"])
    at_once = make_study(tmp_path / "both" / "tarn")
    for number in "12":
        sent(at_once, f"H-{number}-baseline", "one two")
    result = run_night_plain(at_once, OPTIONS)
    assert last["12"] == last["21"]
    assert published(at_once)[f"{result.release}/indices.csv"] == last["12"][1]


def test_a_second_night_changes_no_byte(study):
    sent(study, "H-1-baseline", "one two")
    sent(study, "H-2-baseline", "one four")
    first = run_night_plain(study, OPTIONS)
    before, when = published(study), times(study)
    second = run_night_plain(study, OPTIONS)
    assert (second.release, second.is_new, second.assessed) == (first.release, False, 0)
    assert (published(study), times(study)) == (before, when)


def test_a_corrected_version_sets_both_free(study):
    sent(study, "H-1-baseline", "one two")
    sent(study, "H-2-baseline", "one two")
    run_night_plain(study, OPTIONS)
    assert set(verdicts(study).values()) == {"rejected"}
    sent(study, "H-2-corrected", "three four", acquisition="H-2-baseline", days=1)
    run_night_plain(study, OPTIONS)
    assert verdicts(study) == {"H-1-baseline": "accepted", "H-2-baseline": "accepted"}
    assert CHECK not in set(table(study, "rejections")["check"])


def test_versions_of_one_acquisition_may_share_their_signals(study):
    sent(study, "H-1-baseline", "one two")
    sent(study, "H-1-again", "one two", acquisition="H-1-baseline", days=1)
    run_night_plain(study, OPTIONS)
    assert verdicts(study) == {"H-1-baseline": "accepted"}


def test_a_reason_names_the_first_copies_and_counts_the_rest():
    count = SHOWN + 3
    columns = {"acquisition": [f"H-{place}" for place in range(count)], "run": ["rest"] * count, "channel": ["volume"] * count}
    found = copies(columns | {"sha256": ["same"] * count})
    assert len(found) == count
    assert "acquisition H-1 (run rest)" in found["H-0"]
    assert found["H-0"].endswith("; and 2 more")
    assert copies({name: [] for name in ("acquisition", "run", "channel", "sha256")}) == {}
    assert copies({name: ["same", "same"] for name in ("acquisition", "run", "channel", "sha256")}) == {}


def test_the_page_tells_the_copy_first():
    evidence = {"findings": [{"check": "flat-line", "run": "rest"}, {"check": CHECK, "run": None}, {"check": CHECK, "run": "ramp"}]}
    told = with_copy_told(evidence, "sent twice")
    assert [(one["check"], one["run"]) for one in told["findings"]] == [(CHECK, None), ("flat-line", "rest"), (CHECK, "ramp")]
    assert told["findings"][0]["reason"] == "sent twice"
    assert with_copy_told(evidence, None) is evidence
