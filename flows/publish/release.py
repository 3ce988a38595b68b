"""A release: a folder that is whole when it appears, never changes, and is named after what it holds; `latest` points at the newest.

A release is filled under the store, sealed with the sums of its files, moved into `published` in one step, and then pointed at in one
step. Whatever is interrupted leaves the pointer where it was, and the next night ends at the same bytes.
"""

from __future__ import annotations

import hashlib
import re
import shutil
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

from flows.errors import InputError
from flows.intake.durable import place_tree, point, staging_folder, write_bytes, write_text
from flows.publish.dictionary import dictionary_text
from flows.publish.files import csv_bytes, parquet_bytes

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from pathlib import Path

    import pandas as pd

UNNAMED = "release-yet-to-be-named"
"""What the pages say for the release until it has its name, which depends on the pages."""

SUMS = "manifest-sha256.txt"
POINTER = "latest"
_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}")


@dataclass(frozen=True, slots=True)
class Release:
    """A release that stands: its name, its folder, the sum of its list of sums, and whether the pointer had to be moved to it."""

    name: str
    folder: Path
    manifest_sha256: str
    is_new: bool


@contextmanager
def staged(store: Path) -> Iterator[Path]:
    """Yield an empty folder to fill; what still stands there when the block ends is removed."""
    folder = staging_folder(store / "staging")
    try:
        yield folder
    finally:
        if folder.exists():
            shutil.rmtree(folder)


def write_tables(folder: Path, tables: Mapping[str, pd.DataFrame]) -> None:
    """Write every table as Parquet and CSV, and the dictionary."""
    for name, table in tables.items():
        write_bytes(folder / f"{name}.parquet", parquet_bytes(name, table))
        write_bytes(folder / f"{name}.csv", csv_bytes(table))
    write_text(folder / "dictionary.json", dictionary_text())


def seal(folder: Path, name: str | None = None) -> str:
    """Name the release in ``folder`` after its content (unless ``name`` is given), write the sums of its files, and return the name.

    Raises InputError for a given name that is not one.
    """
    if name is not None and (_NAME.fullmatch(name) is None or name == POINTER):
        problem = "is not a name for a release"
        raise InputError(problem, file="published", field="release", value=name, remedy="Use letters, digits, . _ - and not latest.")
    name = name or hashlib.sha256(_sums(folder).encode()).hexdigest()[:16]
    for page in sorted(folder.rglob("*.html")):
        text = page.read_text(encoding="utf-8")
        if UNNAMED in text:
            write_text(page, text.replace(UNNAMED, name))
    write_text(folder / SUMS, _sums(folder))
    return name


def publish(folder: Path, published: Path, name: str) -> Release:
    """Move the sealed release in ``folder`` to ``published``, point `latest` at it, and return it.

    Where that release stands already nothing is moved; where the pointer shows it already nothing is touched at all. Raises InputError
    when what stands under the name is not this release: nothing published is ever replaced.
    """
    target = published / name
    sums = (folder / SUMS).read_text(encoding="utf-8")
    if target.exists():
        _refuse_others(target, sums)
    else:
        place_tree(folder, target)
    is_new = pointed_at(published) != name
    if is_new:
        point(published / POINTER, name)
    return Release(name, target, hashlib.sha256(sums.encode()).hexdigest(), is_new)


def pointed_at(published: Path) -> str | None:
    """Return the name of the release `latest` points at; None where there is no pointer."""
    pointer = published / POINTER
    return str(pointer.readlink()) if pointer.is_symlink() else None


def altered(folder: Path) -> list[str]:
    """Return the files of a release that are not what its list of sums says, sorted: changed, missing and unlisted ones."""
    try:
        listed = (folder / SUMS).read_text(encoding="utf-8").splitlines()
    except OSError:
        return [SUMS]
    return sorted({line.split("  ", 1)[-1] for line in set(listed) ^ set(_sums(folder).splitlines())})


def _refuse_others(target: Path, sums: str) -> None:
    standing = target / SUMS
    remedy = f"Look into it, move published/{target.name} elsewhere, and run the night again."
    changed = altered(target)
    if changed:
        problem = "a published release was altered"
        raise InputError(problem, file=f"published/{target.name}", value=", ".join(changed[:5]), remedy=remedy)
    if standing.read_text(encoding="utf-8") != sums:
        problem = "another release stands under this name"
        raise InputError(problem, file=f"published/{target.name}", remedy="Give the release another name.")


def _sums(folder: Path) -> str:
    """Return the SHA-256 and relative path of every file but the list of sums itself, a line each, sorted by path."""
    files = sorted((path.relative_to(folder).as_posix(), path) for path in folder.rglob("*") if path.is_file())
    lines = (f"{hashlib.sha256(path.read_bytes()).hexdigest()}  {name}\n" for name, path in files if name != SUMS)
    return "".join(lines)
