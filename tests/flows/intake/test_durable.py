"""What stands under its final name is whole, whatever fails on the way."""

import os
import signal
import stat
import subprocess
import sys
from pathlib import Path

import pytest

from flows.intake import durable


class DiskError(OSError):
    pass


def leftovers(folder):
    return [path for path in folder.rglob("*") if path.name.startswith(".partial-")]


def test_written_bytes_are_read_back_and_folders_are_made(tmp_path):
    durable.write_bytes(tmp_path / "a" / "b" / "c.bin", b"\x00\r\n\xff")
    assert (tmp_path / "a" / "b" / "c.bin").read_bytes() == b"\x00\r\n\xff"
    assert not leftovers(tmp_path)


def test_text_is_utf8_with_its_own_line_ends(tmp_path):
    durable.write_text(tmp_path / "t.txt", "µ\r\nx\n")
    assert (tmp_path / "t.txt").read_bytes() == "µ\r\nx\n".encode()


def test_an_existing_file_is_replaced_whole(tmp_path):
    path = tmp_path / "t.txt"
    durable.write_text(path, "a long first content")
    durable.write_text(path, "short")
    assert path.read_text() == "short"


@pytest.mark.parametrize("call", ["fsync", "fchmod"])
def test_a_failing_disk_leaves_the_old_content_and_no_temporary_file(tmp_path, monkeypatch, call):
    path = tmp_path / "t.txt"
    durable.write_text(path, "old")

    def broken(*_):
        raise DiskError

    monkeypatch.setattr(durable.os, call, broken)
    with pytest.raises(DiskError), durable.new_file(path, read_only=True) as handle:
        handle.write(b"new")
    monkeypatch.undo()
    assert path.read_text() == "old"
    assert not leftovers(tmp_path)


def test_content_is_flushed_before_it_is_renamed_and_the_folder_after(tmp_path, monkeypatch):
    calls = []
    real_fsync, real_replace = os.fsync, Path.replace

    def fsync(descriptor):
        calls.append("folder" if stat.S_ISDIR(os.fstat(descriptor).st_mode) else "file")
        real_fsync(descriptor)

    def replace(self, target):
        calls.append("rename")
        return real_replace(self, target)

    monkeypatch.setattr(durable.os, "fsync", fsync)
    monkeypatch.setattr(Path, "replace", replace)
    durable.write_text(tmp_path / "t.txt", "x")
    assert calls == ["file", "rename", "folder"]


def test_an_error_inside_the_block_leaves_nothing(tmp_path):
    def interrupted():
        with durable.new_file(tmp_path / "t.txt") as handle:
            handle.write(b"half")
            raise DiskError

    with pytest.raises(DiskError):
        interrupted()
    assert list(tmp_path.iterdir()) == []


def test_read_only_takes_every_write_permission(tmp_path):
    with durable.new_file(tmp_path / "object", read_only=True) as handle:
        handle.write(b"x")
    assert stat.S_IMODE((tmp_path / "object").stat().st_mode) & 0o222 == 0


def test_a_name_of_full_length_can_be_written(tmp_path):
    path = tmp_path / ("n" * 255)
    durable.write_text(path, "x")
    assert path.read_text() == "x"


def test_a_placed_tree_is_never_replaced(tmp_path):
    staged = durable.staging_folder(tmp_path)
    (staged / "inner").mkdir()
    (staged / "inner" / "t.txt").write_text("1")
    durable.place_tree(staged, tmp_path / "releases" / "r1")
    assert (tmp_path / "releases" / "r1" / "inner" / "t.txt").read_text() == "1"
    assert not staged.exists()
    again = durable.staging_folder(tmp_path)
    with pytest.raises(FileExistsError):
        durable.place_tree(again, tmp_path / "releases" / "r1")


def test_every_file_of_a_tree_is_flushed_before_the_rename(tmp_path, monkeypatch):
    staged = durable.staging_folder(tmp_path)
    (staged / "a").write_text("1")
    (staged / "d").mkdir()
    (staged / "d" / "b").write_text("2")
    flushed = []
    real = os.fsync

    def fsync(descriptor):
        flushed.append((str(Path(f"/proc/self/fd/{descriptor}").readlink()).removeprefix(str(staged)), staged.exists()))
        real(descriptor)

    monkeypatch.setattr(durable.os, "fsync", fsync)
    durable.place_tree(staged, tmp_path / "final")
    assert {name for name, before in flushed if before} >= {"/a", "/d", "/d/b", ""}
    assert flushed[-1] == (str(tmp_path), False)


def test_a_pointer_moves_in_one_step_and_stays_relative(tmp_path):
    for release in ("one", "two"):
        (tmp_path / release).mkdir()
        durable.point(tmp_path / "latest", release)
        assert (tmp_path / "latest").readlink() == Path(release)
    assert not leftovers(tmp_path)
    with pytest.raises(ValueError, match="relative"):
        durable.point(tmp_path / "latest", "/etc")


def test_a_pointer_never_replaces_a_real_folder(tmp_path):
    (tmp_path / "latest").mkdir()
    (tmp_path / "latest" / "kept").write_text("x")
    with pytest.raises(OSError, match="directory"):
        durable.point(tmp_path / "latest", "one")
    assert (tmp_path / "latest" / "kept").read_text() == "x"
    assert not leftovers(tmp_path)


def test_sweeping_removes_leftovers_only_and_follows_no_link(tmp_path):
    outside = tmp_path / "outside"
    outside.mkdir()
    (outside / ".partial-1-aa").write_text("not ours")
    store = tmp_path / "store"
    (store / "objects").mkdir(parents=True)
    (store / "objects" / "kept").write_text("x")
    (store / "objects" / ".partial-1-bb").write_text("half")
    half = durable.staging_folder(store)
    (half / "inner").write_text("half")
    (store / "link").symlink_to(outside)
    (store / ".partial-2-cc").symlink_to(outside)
    removed = durable.sweep(store)
    assert removed == sorted([store / "objects" / ".partial-1-bb", half, store / ".partial-2-cc"])
    assert (store / "objects" / "kept").exists()
    assert (outside / ".partial-1-aa").exists()
    assert durable.sweep(tmp_path / "absent") == []


def test_a_killed_writer_leaves_the_old_content_and_something_to_sweep(tmp_path):
    path = tmp_path / "t.txt"
    durable.write_text(path, "old")
    program = (
        "import os, signal, sys\nfrom pathlib import Path\nfrom flows.intake import durable\n"
        "with durable.new_file(Path(sys.argv[1])) as handle:\n"
        "    handle.write(b'new')\n    handle.flush()\n    os.kill(os.getpid(), signal.SIGKILL)\n"
    )
    killed = subprocess.run([sys.executable, "-c", program, str(path)], check=False, cwd=Path(__file__).parents[3])
    assert killed.returncode == -signal.SIGKILL
    assert path.read_text() == "old"
    assert len(durable.sweep(tmp_path)) == 1
    assert [entry.name for entry in tmp_path.iterdir()] == ["t.txt"]
