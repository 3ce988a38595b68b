import hashlib
from datetime import UTC, datetime
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from flows.errors import InputError
from flows.sources.simulated import study as tarn
from flows.sources.simulated.cases import CASES, PROTOCOL, SITES
from flows.sources.simulated.package import MANIFEST
from flows.sources.simulated.study import PUT_IN, make_study
from flows.study.protocol import parse_protocol

SOME = tuple(case for case in CASES if case.subject in {"H-005", "F-004", "F-006", "Q-006", "W-001"})


def content(folder: Path) -> dict[str, tuple[str, float]]:
    files = (path for path in folder.rglob("*") if path.is_file())
    return {
        str(path.relative_to(folder)): (
            hashlib.sha256(path.read_bytes()).hexdigest(),
            path.stat().st_mtime if "inbox" in path.parts else 0.0,
        )
        for path in files
    }


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    folder = tmp_path_factory.mktemp("study")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(tarn, "CASES", SOME)
        return folder, make_study(folder)


def test_the_table_names_packages_once_and_sites_of_the_protocol():
    packages = [(put_in.site, put_in.package) for put_in in PUT_IN]
    assert len(set(packages)) == len(packages)
    assert {put_in.site for put_in in PUT_IN} == set(SITES)
    assert sum(put_in.found == "" for put_in in PUT_IN) >= 5
    assert {"waiting", "quarantined", "seen again", "superseded"} <= {put_in.found for put_in in PUT_IN}


def test_the_protocol_is_one_and_its_clocks_are_the_sites():
    protocol = parse_protocol(PROTOCOL.encode(), file="protocol.toml")
    assert protocol.study.name == "tarn"
    assert set(protocol.sites) == set(SITES)
    for name, hours in SITES.items():
        offset = datetime(2026, 2, 14, tzinfo=ZoneInfo(protocol.sites[name].timezone)).utcoffset()
        assert offset is not None
        assert offset.total_seconds() == 3600.0 * hours


def test_it_is_made_again_byte_for_byte_and_leaves_results_alone(made, monkeypatch):
    folder, put_in = made
    (folder / "store").mkdir()
    (folder / "store" / "kept").write_text("kept")
    before = content(folder)
    monkeypatch.setattr(tarn, "CASES", SOME)
    assert make_study(folder) == put_in
    assert content(folder) == before


def test_every_package_is_where_it_is_said_to_be(made):
    folder, put_in = made
    found = {(path.parent.name, path.name) for path in (folder / "inbox").glob("*/*")}
    assert found == {(one.site, one.package) for one in put_in}
    known = {(one.site, one.package): one.found for one in PUT_IN}
    assert all(known[one.site, one.package] == one.found for one in put_in)
    for path in folder.glob(f"inbox/*/*/{MANIFEST}"):
        assert path.stat().st_mtime < datetime(2026, 6, 1, tzinfo=UTC).timestamp()


def verifies(package: Path) -> bool:
    lines = (line.split("  ") for line in (package / MANIFEST).read_text().splitlines())
    return all(hashlib.sha256((package / name).read_bytes()).hexdigest() == digest for digest, name in lines)


def test_ways_of_sending(made):
    inbox = made[0] / "inbox"
    assert not (inbox / "fell" / "F-006-visit-1" / MANIFEST).exists()
    assert not verifies(inbox / "quarry" / "Q-006-visit-1")
    first, again = inbox / "weir" / "W-001-visit-1", inbox / "weir" / "W-001-visit-1-again"
    assert verifies(first)
    assert (first / MANIFEST).read_bytes() == (again / MANIFEST).read_bytes()
    assert (first / MANIFEST).stat().st_mtime < (again / MANIFEST).stat().st_mtime
    broken, corrected = inbox / "harbour" / "H-005-visit-1", inbox / "harbour" / "H-005-visit-1-corrected"
    assert (broken / "acquisition.json").read_bytes() == (corrected / "acquisition.json").read_bytes()
    assert (broken / MANIFEST).read_bytes() != (corrected / MANIFEST).read_bytes()
    assert (broken / MANIFEST).stat().st_mtime < (corrected / MANIFEST).stat().st_mtime


def test_the_beats_touched_are_known_once_the_study_is_made(made):
    expected = {one.package: one.expected for one in made[1]}
    assert [one.check for one in expected["F-004-visit-1"]] == ["flat-line"]
    assert expected["F-004-visit-1"][0].instants_s
    assert expected["H-005-visit-1"] == ()


def test_a_folder_with_something_else_in_it_is_refused_and_left_alone(tmp_path):
    (tmp_path / "letter.txt").write_text("mine")
    with pytest.raises(InputError, match="not empty"):
        make_study(tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["letter.txt"]
    with pytest.raises(InputError, match="not a folder"):
        make_study(tmp_path / "letter.txt")


def test_another_study_is_refused(tmp_path):
    (tmp_path / "protocol.toml").write_text(PROTOCOL + "\n[policy]\n")
    with pytest.raises(InputError, match="Tarn"):
        make_study(tmp_path)
