"""The one place that writes for good.

Whatever stands under its final name is whole: content goes to a temporary name beside it, is flushed to the disk, renamed, and the
folder is flushed too. A reader sees the old or the new, a killed process leaves temporary names only, and `sweep` clears those.
An error of the disk is raised and never tried again: after a failed flush nobody knows what the disk holds.
"""

from __future__ import annotations

import os
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import BinaryIO

_MARK = ".partial-"


@contextmanager
def new_file(path: Path, *, read_only: bool = False) -> Iterator[BinaryIO]:
    """Yield a handle whose content stands at ``path`` once the block has ended without an error; on an error ``path`` is untouched.

    Missing folders are made. An existing file is replaced. ``read_only`` takes every write permission away.
    """
    make_folder(path.parent)
    partial = path.parent / _partial_name()
    try:
        with partial.open("xb") as handle:
            yield handle
            handle.flush()
            if read_only:
                os.fchmod(handle.fileno(), os.fstat(handle.fileno()).st_mode & 0o555)
            os.fsync(handle.fileno())
        partial.replace(path)
    except BaseException:
        with suppress(OSError):
            partial.unlink()
        raise
    _flush_folder(path.parent)


def write_bytes(path: Path, data: bytes) -> None:
    """Make ``data`` the content of ``path``, whole or not at all."""
    with new_file(path) as handle:
        handle.write(data)


def write_text(path: Path, text: str) -> None:
    """Make ``text``, in UTF-8 and with its line ends as they are, the content of ``path``, whole or not at all."""
    write_bytes(path, text.encode())


def make_folder(path: Path) -> None:
    """Make ``path`` and its missing parents so that they outlast a power cut; an existing folder is left alone."""
    missing: list[Path] = []
    while not path.is_dir():
        missing.append(path)
        path = path.parent
    for folder in reversed(missing):
        folder.mkdir(exist_ok=True)
        _flush_folder(folder.parent)


def staging_folder(parent: Path) -> Path:
    """Return a new empty folder in ``parent`` under a temporary name: fill it, then `place_tree` it."""
    make_folder(parent)
    staged = parent / _partial_name()
    staged.mkdir()
    return staged


def place_tree(staged: Path, final: Path) -> None:
    """Flush everything under the folder ``staged`` and rename it to ``final``.

    Raises FileExistsError where ``final`` exists: what was placed is never replaced.
    """
    if os.path.lexists(final):
        message = f"{final} exists already"
        raise FileExistsError(message)
    for folder, _, names in os.walk(staged):
        for name in names:
            _flush_file(Path(folder, name))
        _flush_folder(Path(folder))
    make_folder(final.parent)
    staged.rename(final)
    _flush_folder(final.parent)
    if staged.parent != final.parent:
        _flush_folder(staged.parent)


def point(link: Path, target: str) -> None:
    """Make ``link`` a symbolic link to the relative path ``target`` in one step; raises ValueError for an absolute target."""
    if Path(target).is_absolute():
        message = f"a pointer holds a relative path, not {target}"
        raise ValueError(message)
    make_folder(link.parent)
    partial = link.parent / _partial_name()
    partial.symlink_to(target)
    try:
        partial.replace(link)
    except BaseException:
        with suppress(OSError):
            partial.unlink()
        raise
    _flush_folder(link.parent)


def sweep(folder: Path) -> list[Path]:
    """Remove what interrupted writes left under ``folder`` and return the removed paths, sorted.

    Only the holder of the study's lock may sweep: another writer's unfinished files look the same. Links are not followed.
    """
    removed: list[Path] = []
    for parent, folders, files in os.walk(folder):
        leftovers = [name for name in (*folders, *files) if name.startswith(_MARK)]
        folders[:] = [name for name in folders if name not in leftovers]
        for path in (Path(parent, name) for name in leftovers):
            if path.is_dir() and not path.is_symlink():
                shutil.rmtree(path)
            else:
                path.unlink()
            removed.append(path)
        if leftovers:
            _flush_folder(Path(parent))
    return sorted(removed)


def _partial_name() -> str:
    return f"{_MARK}{os.getpid()}-{secrets.token_hex(8)}"


def _flush_file(path: Path) -> None:
    if path.is_symlink():
        return
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _flush_folder(path: Path) -> None:
    descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
