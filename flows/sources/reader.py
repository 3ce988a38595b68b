"""What a reader of one file format is."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from metrics.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Reader:
    """A file format.

    ``columns(path, file, wanted, optional)`` returns the wanted columns by name, and those of the optional ones that the file has; each
    of shape (n,) with NaN for a missing sample. ``file`` is what the site calls the file. It raises InputError for whatever cannot be
    read as numbers. ``suffixes`` are in lower case.
    """

    name: str
    suffixes: tuple[str, ...]
    columns: Callable[[Path, str, Sequence[str], Sequence[str]], dict[str, FloatArray]]
