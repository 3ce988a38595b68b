"""What the pages draw, kept beside the catalogue: one compressed JSON file an assessment, the same bytes for the same evidence."""

from __future__ import annotations

import gzip
import hashlib
import json
from typing import TYPE_CHECKING, Any

from flows.errors import InputError
from flows.intake.durable import write_bytes

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path


def packed(evidence: Mapping[str, Any]) -> bytes:
    """Return the evidence as compressed JSON; raises ValueError for NaN or infinity, which JSON does not have."""
    text = json.dumps(evidence, sort_keys=True, separators=(",", ":"), allow_nan=False, ensure_ascii=False)
    return gzip.compress(text.encode(), compresslevel=6, mtime=0)


def keep(store: Path, key: str, content: bytes) -> str:
    """Write packed evidence for the assessment ``key`` and return its SHA-256; what stands there already is not written again."""
    path = _path(store, key)
    if not path.is_file() or path.read_bytes() != content:
        write_bytes(path, content)
    return hashlib.sha256(content).hexdigest()


def is_there(store: Path, key: str) -> bool:
    """Say whether the assessment ``key`` has a file of evidence."""
    return _path(store, key).is_file()


def load(store: Path, key: str, sha256: str) -> dict[str, Any]:
    """Return the evidence of the assessment ``key``; raises InputError where the file is gone or is not what was written."""
    path = _path(store, key)
    file = f"{path.parent.name}/{path.name}"
    remedy = "Remove it and run the night again: it is made anew."
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        problem = "the evidence of an assessment is missing"
        raise InputError(problem, file=file, remedy=remedy) from None
    if hashlib.sha256(content).hexdigest() != sha256:
        problem = "the evidence of an assessment has changed since it was written"
        raise InputError(problem, file=file, remedy=remedy)
    loaded: dict[str, Any] = json.loads(gzip.decompress(content))
    return loaded


def _path(store: Path, key: str) -> Path:
    return store / "evidence" / f"{key}.json.gz"
