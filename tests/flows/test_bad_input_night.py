"""A night over an inbox of every kind of bad upload: each is named with its reason, the good ones are published, nothing is lost."""

import hashlib
import json
import os
import shutil

import numpy as np
import pandas as pd
import pytest

from flows.nightly import run_night_plain
from flows.sources.simulated.study import make_study
from tests.checks.made_acquisitions import MAY_BE_OUT_OF_REACH

GOOD = "H-004-visit-1"


def resealed(folder):
    """Write the manifest anew over whatever lies in the folder."""
    names = sorted(
        path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file() and path.name != "manifest-sha256.txt"
    )
    lines = [f"{hashlib.sha256((folder / name).read_bytes()).hexdigest()}  {name}\n" for name in names]
    (folder / "manifest-sha256.txt").write_text("".join(lines))


def declared(folder, change):
    path = folder / "acquisition.json"
    manifest = json.loads(path.read_text())
    change(manifest)
    path.write_text(json.dumps(manifest))


def both_files(folder, change):
    for path in folder.glob("*.csv"):
        path.write_text(change(path.read_text()))


def rows(text):
    header, *lines = text.strip().split("\n")
    return header, lines


def put(manifest, **fields):
    manifest.update(fields)


def first_run(manifest, **fields):
    manifest["runs"][0].update(fields)


def without_zeros(manifest):
    pressure = manifest["calibration"]["pressure"]
    for name in [name for name in pressure if name.startswith("zero")]:
        del pressure[name]


def short_column(text):
    header, lines = rows(text)
    return "\n".join([header, *lines[:500], lines[500].rsplit(",", 1)[0], *lines[501:], ""])


def words(text):
    header, lines = rows(text)
    return "\n".join([header, *lines[:500], "lead off".join(lines[500].rsplit(",", 1)[:1]) + ",lead off", *lines[501:], ""])


def decimal_comma(text):
    header, lines = rows(text)
    return "\n".join([header.replace(",", ";"), *(line.replace(",", ";").replace(".", ",") for line in lines), ""])


def all_missing(text):
    header, lines = rows(text)
    return "\n".join([header, *(line.split(",")[0] + "," * header.count(",") for line in lines), ""])


def backwards(text):
    header, lines = rows(text)
    return "\n".join([header, *lines[:1000], *lines[500:600], *lines[1000:], ""])


def cut_to(count):
    def cut(text):
        header, lines = rows(text)
        return "\n".join([header, *lines[:count], ""])

    return cut


def recorded_anew(folder, seed):
    """Give the folder's runs noise of their own, so that no two packages hold one recording."""
    rng = np.random.default_rng(seed)
    for path in sorted(folder.glob("*.csv")):
        header, lines = rows(path.read_text())
        table = np.array([line.split(",") for line in lines], dtype=np.float64)
        table[:, 1:] += 0.002 * np.ptp(table[:, 1:], axis=0) * rng.standard_normal(table[:, 1:].shape)
        path.write_text(
            "\n".join([header, *(f"{stamp:.3f}," + ",".join(f"{value:.3f}" for value in values) for stamp, *values in table), ""])
        )


# folder -> (what is done, whether the manifest is made anew, words the reason must hold, statuses allowed)
SHAPES = {
    "checksum-wrong": (lambda f: (f / "baseline-rest.csv").write_text("t\n1\n"), False, ("baseline-rest.csv", "SHA-256"), {"quarantined"}),
    "file-missing": (lambda f: (f / "baseline-rest.csv").unlink(), False, ("baseline-rest.csv",), {"quarantined"}),
    "file-extra": (lambda f: (f / "extra.txt").write_text("?"), False, ("extra.txt",), {"quarantined"}),
    "json-broken": (lambda f: (f / "acquisition.json").write_text('{"format": 1,'), True, ("acquisition.json", "JSON"), {"quarantined"}),
    "wrong-type": (lambda f: declared(f, lambda m: put(m, visit=7)), True, ("visit", "7"), {"quarantined"}),
    "unknown-field": (lambda f: declared(f, lambda m: put(m, chambre="LV")), True, ("chambre", "chamber"), {"quarantined"}),
    "unknown-unit": (
        lambda f: declared(f, lambda m: m["runs"][0]["channels"]["pressure"].update(unit="mmHg")),
        True,
        ("unit", "mmHg", "mm[Hg]"),
        {"quarantined"},
    ),
    "naive-time": (lambda f: declared(f, lambda m: put(m, recorded_at="2026-03-04T09:12:00")), True, ("recorded_at",), {"quarantined"}),
    "unknown-site": (lambda f: declared(f, lambda m: put(m, site="harbor")), True, ("site", "harbour"), {"quarantined"}),
    "unknown-study": (lambda f: declared(f, lambda m: put(m, study="tarm")), True, ("study", "tarn"), {"quarantined"}),
    "empty-file": (lambda f: both_files(f, lambda _: ""), True, ("baseline-rest.csv", "empty"), {"quarantined", "rejected"}),
    "header-only": (lambda f: both_files(f, cut_to(0)), True, ("baseline-rest.csv",), {"quarantined", "rejected"}),
    "column-short": (lambda f: both_files(f, short_column), True, ("baseline-rest.csv", "line 502"), {"quarantined", "rejected"}),
    "text-in-numbers": (lambda f: both_files(f, words), True, ("baseline-rest.csv", "lead off"), {"quarantined", "rejected"}),
    "decimal-comma": (lambda f: both_files(f, decimal_comma), True, ("baseline-rest.csv",), {"quarantined", "rejected"}),
    "all-missing": (lambda f: both_files(f, all_missing), True, ("baseline-rest.csv",), {"quarantined", "rejected"}),
    "three-samples": (lambda f: both_files(f, cut_to(3)), True, (), {"quarantined", "rejected"}),
    "two-beats": (lambda f: both_files(f, cut_to(450)), True, ("beats-found",), {"quarantined", "rejected"}),
    "time-backwards": (lambda f: both_files(f, backwards), True, ("time-base",), {"quarantined", "rejected"}),
    "path-leaving": (lambda f: declared(f, lambda m: first_run(m, file="../../../protocol.toml")), True, ("file",), {"quarantined"}),
    "a-link": (
        lambda f: ((f / "baseline-rest.csv").unlink(), (f / "baseline-rest.csv").symlink_to("/etc/hostname")),
        False,
        ("link",),
        {"quarantined"},
    ),
    "no-ecg": (lambda f: declared(f, lambda m: [run["channels"].pop("ecg") for run in m["runs"]]), True, (), {"accepted", "queried"}),
    "no-preload": (lambda f: declared(f, lambda m: put(m, runs=m["runs"][:1])), None, ("required-runs",), {"queried"}),
    "no-zeros": (lambda f: declared(f, without_zeros), True, ("pressure-zero",), {"queried"}),
    "no-reference": (lambda f: declared(f, lambda m: m["calibration"].pop("volume", None)), True, (), {"accepted", "queried"}),
}


@pytest.fixture(scope="module")
def after_the_night(tmp_path_factory):
    """The published tables of a night over one good package and every bad one, and the inbox's bytes before and after."""
    study = tmp_path_factory.mktemp("night") / "tarn"
    make_study(study)
    inbox = study / "inbox" / "harbour"
    good = inbox / GOOD
    for folder in (study / "inbox").glob("*/*"):
        if folder != good:
            shutil.rmtree(folder)
    for seed, (name, (break_it, seal, _, _)) in enumerate(SHAPES.items()):
        folder = inbox / name
        shutil.copytree(good, folder)
        recorded_anew(folder, seed)
        declared(folder, lambda m, name=name: put(m, acquisition=name))
        resealed(folder)
        break_it(folder)
        if name == "no-preload":
            (folder / "baseline-ramp.csv").unlink()
        if seal is not False:
            resealed(folder)
    twin = study / "inbox" / "fell" / "same-name"
    shutil.copytree(good, twin)
    declared(twin, lambda m: put(m, site="fell", subject="F-001"))
    resealed(twin)
    later = (good / "manifest-sha256.txt").stat().st_mtime + 3600
    os.utime(twin / "manifest-sha256.txt", (later, later))
    before = everything(study / "inbox")
    result = run_night_plain(study)
    release = study / "published" / "latest"
    tables = {name: pd.read_parquet(release / f"{name}.parquet") for name in ("packages", "acquisitions", "runs", "rejections", "indices")}
    return tables, before, everything(study / "inbox"), result


def everything(inbox):
    return {path: path.readlink() if path.is_symlink() else path.read_bytes() for path in sorted(inbox.rglob("*")) if not path.is_dir()}


@pytest.mark.parametrize("name", SHAPES)
def test_each_bad_upload_is_named_with_its_reason(after_the_night, name):
    tables, *_ = after_the_night
    _, _, told, allowed = SHAPES[name]
    row = tables["packages"].set_index("package").loc[name]
    mine = tables["rejections"][tables["rejections"]["acquisition"] == name]
    reasons = " ".join([str(row["reason"]), *mine["reason"].astype(str), *mine["check"].astype(str)])
    assert row["status"] in allowed, reasons
    for word in told:
        assert word in reasons


def test_the_second_package_of_one_name_from_another_site_is_quarantined(after_the_night):
    packages = after_the_night[0]["packages"].set_index("package")
    assert packages.loc["same-name", "status"] == "quarantined"
    assert "harbour" in packages.loc["same-name", "reason"]
    assert packages.loc[GOOD, "status"] == "accepted"


def test_the_good_package_is_published_and_every_upload_has_one_row(after_the_night):
    tables, before, _, result = after_the_night
    packages, indices = tables["packages"], tables["indices"]
    assert len(packages) == len(SHAPES) + 2
    assert packages["package"].is_unique
    good = indices[(indices["acquisition"] == GOOD) & indices["primary"]]
    assert set(good[good["status"] != "published"]["index"]) <= MAY_BE_OUT_OF_REACH
    assert before
    assert result.release


def test_the_inbox_is_only_read(after_the_night):
    _, before, after, _ = after_the_night
    assert before == after


def test_what_a_missing_part_costs_is_withheld_and_the_rest_published(after_the_night):
    indices = after_the_night[0]["indices"]
    primary = indices[indices["primary"]].set_index(["acquisition", "index"])["status"]
    assert primary["no-preload", "Ees"] == primary["no-preload", "PRSW"] == "withheld"
    assert primary["no-preload", "SW"] == primary["no-preload", "HR"] == "published"
    assert primary["no-zeros", "EDP"] == primary["no-zeros", "V0"] == "withheld"
    assert primary["no-zeros", "Ees"] == primary["no-zeros", "SW"] == "published"
    for name in ("no-ecg", "no-reference"):
        statuses = primary[name]
        assert set(statuses[statuses != "published"].index) <= MAY_BE_OUT_OF_REACH


def test_a_rejected_package_publishes_nothing(after_the_night):
    tables = after_the_night[0]
    rejected = tables["acquisitions"].query("verdict == 'rejected'")["acquisition"]
    published = tables["indices"].query("status == 'published'")["acquisition"]
    assert not set(rejected) & set(published)
