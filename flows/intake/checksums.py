"""manifest-sha256.txt: which files a package holds and what their content hashes to."""

from __future__ import annotations

import hashlib
import re
import unicodedata
from collections.abc import Mapping
from io import BufferedReader

from flows.errors import InputError
from flows.intake.plain_files import shown
from flows.study.names import path_fault

CHECKSUMS_NAME = "manifest-sha256.txt"
BAG_DECLARATION = "bagit.txt"
BAG_PAYLOAD = "data/"

_LARGEST_BYTES = 16 * 1024 * 1024
_LINE = re.compile(r"([0-9a-fA-F]{64})(?: \*|[ \t]+)(\S.*)")
_REMEDY = f"Write {CHECKSUMS_NAME} anew, last of all, a line '<sha256>  <relative path>' for every other file."


def parsed_checksums(content: bytes) -> dict[str, str]:
    """Return the listed path -> SHA-256 in lower case.

    Understood: LF and CRLF, upper case, the binary marker ``*``, a leading ``./``, and a line that stands twice. Raises InputError for
    anything else that is no such line, for paths that are not plain, two hashes of one path, a list that names itself, and an empty one.
    """
    listed: dict[str, str] = {}
    for number, line in enumerate(_lines(content), start=1):
        if not line.strip():
            continue
        match = _LINE.fullmatch(line)
        if match is None:
            problem = f"line {number} is not a SHA-256 and a path"
            raise InputError(problem, file=CHECKSUMS_NAME, value=line, remedy=_REMEDY)
        digest, path = match[1].lower(), match[2].removeprefix("./")
        why = path_fault(path)
        if why is not None:
            problem = f"line {number} names a path that {why}"
            raise InputError(problem, file=CHECKSUMS_NAME, value=shown(path), remedy=_REMEDY)
        if path == CHECKSUMS_NAME:
            problem = f"line {number} lists {CHECKSUMS_NAME} itself"
            raise InputError(problem, file=CHECKSUMS_NAME, remedy="Leave that line out.")
        if listed.setdefault(path, digest) != digest:
            problem = f"line {number} gives {path} a second, different SHA-256"
            raise InputError(problem, file=CHECKSUMS_NAME, remedy=_REMEDY)
    if not listed:
        problem = "lists no file"
        raise InputError(problem, file=CHECKSUMS_NAME, remedy=_REMEDY)
    return listed


def without_escapes(path: str) -> str:
    """Return a path of a bag's manifest with the three characters BagIt escapes put back (RFC 8493 section 2.1.3, from memory)."""
    return re.sub("%(0A|0D|25)", lambda match: chr(int(match[1], 16)), path, flags=re.IGNORECASE)


def twin_paths(paths: list[str]) -> tuple[str, str] | None:
    """Return two paths that are one file on a disk that ignores case or the composition of accents, or None."""
    seen: dict[str, str] = {}
    for path in paths:
        twin = seen.setdefault(unicodedata.normalize("NFC", path).casefold(), path)
        if twin != path:
            return twin, path
    return None


def content_sha256(handle: BufferedReader) -> str:
    """Return the SHA-256 of what is left to read, in lower case hex."""
    return hashlib.file_digest(handle, "sha256").hexdigest()


def package_sha256(files: Mapping[str, str]) -> str:
    """Return the SHA-256 over the sorted lines ``<sha256>  <path>``: the same content in another folder has the same one.

    >>> package_sha256({"b": "2", "a": "1"}) == package_sha256({"a": "1", "b": "2"})
    True
    """
    lines = "".join(sorted(f"{digest}  {path}\n" for path, digest in files.items()))
    return hashlib.sha256(lines.encode()).hexdigest()


def _lines(content: bytes) -> list[str]:
    if len(content) > _LARGEST_BYTES:
        problem = "is larger than 16 MB"
        raise InputError(problem, file=CHECKSUMS_NAME, value=f"{len(content)} bytes", remedy=_REMEDY)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as failure:
        problem = f"is not UTF-8 at byte {failure.start + 1}"
        raise InputError(problem, file=CHECKSUMS_NAME, remedy=_REMEDY) from None
    return [line.removesuffix("\r") for line in text.split("\n")]
