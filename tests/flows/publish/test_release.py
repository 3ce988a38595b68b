"""Releases: named by what they hold, placed whole, pointed at in one step, never replaced."""

import hashlib

import pytest

from flows.errors import InputError
from flows.publish.release import SUMS, UNNAMED, altered, pointed_at, publish, seal, staged


def release(tmp_path, name=None, **files):
    """Publish files under tmp_path/published."""
    with staged(tmp_path / "store") as folder:
        for path, text in files.items():
            (folder / path.replace("_", ".")).write_text(text)
        return publish(folder, tmp_path / "published", seal(folder, name))


def test_the_name_follows_from_the_content_and_stands_on_the_pages(tmp_path):
    first = release(tmp_path / "a", beats_csv="x\n", page_html=f"release {UNNAMED}!")
    again = release(tmp_path / "b", page_html=f"release {UNNAMED}!", beats_csv="x\n")
    other = release(tmp_path / "c", beats_csv="y\n", page_html=f"release {UNNAMED}!")
    assert first.name == again.name != other.name
    assert (first.folder / "page.html").read_text() == f"release {first.name}!"
    assert first.manifest_sha256 == again.manifest_sha256 == hashlib.sha256((first.folder / SUMS).read_bytes()).hexdigest()
    assert altered(first.folder) == []


def test_the_pointer_follows_the_newest_and_goes_back_to_an_older_one(tmp_path):
    assert pointed_at(tmp_path / "published") is None
    one, two = release(tmp_path, beats_csv="1"), release(tmp_path, beats_csv="2")
    assert pointed_at(tmp_path / "published") == two.name
    back = release(tmp_path, beats_csv="1")
    assert (back.name, back.is_new) == (one.name, True)
    assert (tmp_path / "published" / "latest").resolve() == one.folder
    assert (two.folder / "beats.csv").read_text() == "2"


def test_the_same_release_again_touches_nothing(tmp_path):
    first = release(tmp_path, beats_csv="1")
    paths = [tmp_path / "published", *(tmp_path / "published").rglob("*")]
    before = {path: path.lstat().st_mtime_ns for path in paths}
    assert not release(tmp_path, beats_csv="1").is_new
    assert {path: path.lstat().st_mtime_ns for path in [tmp_path / "published", *(tmp_path / "published").rglob("*")]} == before
    assert list((tmp_path / "store" / "staging").iterdir()) == []
    assert first.is_new


def test_what_was_done_to_a_release_is_named(tmp_path):
    folder = release(tmp_path, beats_csv="1", runs_csv="2", page_html="3").folder
    (folder / "beats.csv").write_text("9")
    (folder / "runs.csv").unlink()
    (folder / "extra.csv").write_text("")
    assert altered(folder) == ["beats.csv", "extra.csv", "runs.csv"]
    with pytest.raises(InputError, match="a published release was altered"):
        release(tmp_path, folder.name, other_csv="1")
    (folder / SUMS).unlink()
    assert altered(folder) == [SUMS]


def test_a_stage_that_fails_leaves_nothing(tmp_path):
    with pytest.raises(InputError, match="is not a name for a release"):
        release(tmp_path, "../escape", beats_csv="1")
    assert list((tmp_path / "store" / "staging").iterdir()) == []
    assert not (tmp_path / "published").exists()
