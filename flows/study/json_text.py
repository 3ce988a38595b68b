"""JSON as people send it: one object, in UTF-8, each key once, finite numbers only."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator

from flows.errors import InputError

_LARGEST_BYTES = 8 * 1024 * 1024


class _RefusedError(ValueError):
    """A number or key that JSON text may not hold here."""

    def __init__(self, problem: str, value: str, remedy: str, field: str | None = None) -> None:
        super().__init__(problem)
        self.problem, self.value, self.remedy, self.field = problem, value, remedy, field


def parse_object(text: bytes, *, file: str) -> dict[str, object]:
    """Return the one JSON object that ``text`` holds.

    Raises InputError for text that is too large, not UTF-8, not JSON, no object, nested beyond reason, or holds a key twice, NaN,
    Infinity or a number beyond the range of a double.
    """
    if len(text) > _LARGEST_BYTES:
        problem = "is larger than 8 MB"
        raise InputError(problem, file=file, value=f"{len(text)} bytes", remedy="Signals belong into the signal files.")
    try:
        decoded = text.decode("utf-8-sig")
    except UnicodeDecodeError as failure:
        problem = f"is not UTF-8 at byte {failure.start + 1}"
        raise InputError(problem, file=file, value=text[failure.start : failure.start + 8], remedy="Save it as UTF-8.") from None
    try:
        parsed = json.loads(decoded, object_pairs_hook=_once, parse_constant=_no_constant, parse_float=_finite, parse_int=_whole)
    except json.JSONDecodeError as failure:
        problem = f"is not JSON: {failure.msg.lower()} at line {failure.lineno} column {failure.colno}"
        raise InputError(problem, file=file, remedy="Mend the text there.") from None
    except _RefusedError as refused:
        raise InputError(refused.problem, file=file, field=refused.field, value=refused.value, remedy=refused.remedy) from None
    except RecursionError:
        problem = "is nested too deeply"
        raise InputError(problem, file=file, remedy="Nest tables and lists as the contract shows.") from None
    if not isinstance(parsed, dict):
        problem = "must be one JSON object"
        raise InputError(problem, file=file, value=type(parsed).__name__, remedy="Begin with { and end with }.")
    _refuse_broken_text(parsed, file)
    return parsed


def _once(pairs: list[tuple[str, object]]) -> dict[str, object]:
    found: dict[str, object] = {}
    for key, value in pairs:
        if key in found:
            problem = "stands twice in one object"
            raise _RefusedError(problem, str(value), "Keep the one that is right.", field=key)
        found[key] = value
    return found


def _no_constant(text: str) -> float:
    problem = "holds a number that is not finite"
    raise _RefusedError(problem, text, "Leave a missing value out.")


def _finite(text: str) -> float:
    number = float(text)
    if not math.isfinite(number):
        problem = "holds a number beyond the range of a double"
        raise _RefusedError(problem, text, "Write the number that was meant.")
    return number


def _whole(text: str) -> int:
    if len(text) > 300:
        problem = "holds a number beyond the range of a double"
        raise _RefusedError(problem, text, "Write the number that was meant.")
    return int(text)


def _refuse_broken_text(parsed: dict[str, object], file: str) -> None:
    for text in _texts(parsed):
        if not text.isascii() and any(0xD800 <= ord(character) <= 0xDFFF for character in text):
            problem = "holds half of a surrogate pair, which is not a character"
            raise InputError(problem, file=file, value=ascii(text), remedy="Write the character itself.")


def _texts(value: object) -> Iterator[str]:
    if isinstance(value, str):
        yield value
    elif isinstance(value, dict):
        for key, inner in value.items():
            yield key
            yield from _texts(inner)
    elif isinstance(value, list):
        for inner in value:
            yield from _texts(inner)
