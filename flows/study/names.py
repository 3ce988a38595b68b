"""Names people type: pseudonyms, relative paths, and what a misspelt word was probably meant to be."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable

NAME_RULE = "1 to 64 of the characters A-Z a-z 0-9 . _ -, and neither '.' nor '..'"
"""What a pseudonym may look like, in words."""

_NAME = re.compile(r"[A-Za-z0-9._-]{1,64}")
_LONGEST_PART_BYTES = 255
_LONGEST_PATH_BYTES = 1024


def is_name(text: str) -> bool:
    """Return whether ``text`` may stand as a pseudonym (site, subject, visit, acquisition, run)."""
    return _NAME.fullmatch(text) is not None and text not in {".", ".."}


def path_fault(path: str) -> str | None:
    """Return why ``path`` is no plain relative path inside a package, or None when it is one.

    Refused: absolute paths, ``..``, ``.``, empty parts, backslashes, colons, control characters, text that is no valid Unicode, and
    names longer than common file systems hold.
    """
    fault: str | None = None
    if not path:
        fault = "is empty"
    elif any(0xD800 <= ord(character) <= 0xDFFF for character in path):
        fault = "is not valid Unicode"
    elif any(ord(character) < 0x20 or ord(character) == 0x7F for character in path):
        fault = "holds a control character"
    elif "\\" in path or ":" in path:
        fault = "holds a backslash or a colon"
    elif path.startswith("/"):
        fault = "is absolute"
    elif any(part == ".." for part in path.split("/")):
        fault = "leaves the package"
    elif any(part in {"", "."} for part in path.split("/")):
        fault = "has an empty part"
    elif len(path.encode()) > _LONGEST_PATH_BYTES or any(len(part.encode()) > _LONGEST_PART_BYTES for part in path.split("/")):
        fault = "is too long"
    return fault


def did_you_mean(word: str, known: Iterable[str]) -> str:
    """Return a remedy for an unknown ``word``: the nearest known one, else the list of all; empty text when nothing is known."""
    candidates = sorted(set(known))
    if not candidates:
        return ""
    folded = {candidate.casefold(): candidate for candidate in reversed(candidates)}
    near = difflib.get_close_matches(word.casefold(), list(folded), n=1, cutoff=0.6)
    if near:
        return f"Did you mean {folded[near[0]]!r}?"
    shown = ", ".join(candidates[:24]) + (", ..." if len(candidates) > 24 else "")
    return f"Known here: {shown}."
