"""Numbers, units, counts and instants as a reader meets them on a page; the same value always gives the same words."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from datetime import UTC, datetime
from typing import TypeGuard

MISSING = "\u2013"
_PLURALS = {"index": "indices", "analysis": "analyses"}
_CHECK_WORDS = {"dpdt": "dP/dt", "edp": "EDP", "edv": "EDV"}
_HIDDEN = (
    range(9),
    (11, 12),
    range(14, 32),
    range(127, 160),
    range(0x200B, 0x2010),
    range(0x202A, 0x202F),
    range(0x2066, 0x206A),
    range(0xD800, 0xE000),
)
CONTROL = {code: f"\\u{code:04x}" for codes in _HIDDEN for code in codes}
"""Characters that hide or turn round the text beside them, or cannot be written as UTF-8, and what stands on the page instead."""


def is_number(value: object) -> TypeGuard[float]:
    """Return whether ``value`` is a finite number (None, NaN and text are not)."""
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)


def number(value: object, digits: int = 3) -> str:
    """Return a number with ``digits`` significant digits and no exponent, a true minus sign, or a dash where it is missing."""
    if not is_number(value):
        return MISSING
    if value == 0:
        return "0"
    places = max(digits - 1 - math.floor(math.log10(abs(value))), 0)
    text = f"{value:.{min(places, 9)}f}"
    if "." in text:
        text = text.rstrip("0").rstrip(".")
    return "0" if text == "-0" else text.replace("-", "\u2212")


def unit_words(unit: object) -> str:
    """Return a UCUM unit as it is read aloud on paper: ``mm[Hg]/mL`` gives ``mmHg/mL``, the unit one gives nothing."""
    text = str(unit or "")
    if text == "1":
        return ""
    text = text.replace("[", "").replace("]", "").replace("{", "").replace("}", "").replace("H2O", "H\u2082O").replace(".", "\u00b7")
    return f"per {text[1:]}" if text.startswith("/") else text


def quantity(value: object, unit: object = "1", digits: int = 3) -> str:
    """Return a number with its unit."""
    words = unit_words(unit)
    return f"{number(value, digits)} {words}" if words and is_number(value) else number(value, digits)


def counted(count: int, noun: str) -> str:
    """Return ``1 beat``, ``2 beats``, ``3 indices``."""
    return f"{count} {noun if count == 1 else _PLURALS.get(noun, noun + 's')}"


def listing(items: Sequence[str], most: int = 6) -> str:
    """Return ``a, b and c``; beyond ``most`` items the rest is only counted."""
    shown = list(items)
    if len(shown) > most:
        return f"{', '.join(shown[: most - 1])} and {len(shown) - most + 1} more"
    return " and ".join(part for part in (", ".join(shown[:-1]), *shown[-1:]) if part)


def number_ranges(numbers: Iterable[int], most: int = 8) -> str:
    """Return whole numbers with neighbours drawn together: ``3-5, 9`` (true dash); what is beyond ``most`` pieces is counted."""
    pieces: list[list[int]] = []
    for item in sorted(set(numbers)):
        if pieces and item == pieces[-1][-1] + 1:
            pieces[-1].append(item)
        else:
            pieces.append([item])
    words = [str(piece[0]) if len(piece) == 1 else f"{piece[0]}\u2013{piece[-1]}" for piece in pieces]
    left_out = sum(len(piece) for piece in pieces[most:])
    return ", ".join(words[:most]) + (f" and {left_out} more" if left_out else "")


def instant(value: object) -> str:
    """Return a clock time in UTC to the minute; text that is no time comes back as it is, nothing gives a dash."""
    if value is None:
        return MISSING
    if isinstance(value, str):
        try:
            return instant(datetime.fromisoformat(value))
        except ValueError:
            return value or MISSING
    if not isinstance(value, datetime):
        return str(value)
    moment = value.astimezone(UTC) if value.tzinfo else value
    return f"{moment:%Y-%m-%d %H:%M} UTC"


def letter(position: int) -> str:
    """Return A, B, ... Z, AA, AB, ... for 0, 1, 2, ..."""
    name = ""
    position += 1
    while position:
        position, rest = divmod(position - 1, 26)
        name = chr(ord("A") + rest) + name
    return name


def split_reasons(reasons: object) -> tuple[str, ...]:
    """Return the check names of a ``reasons`` column (joined by semicolons, or already a sequence)."""
    if reasons is None:
        return ()
    parts = reasons.split(";") if isinstance(reasons, str) else [str(part) for part in reasons] if isinstance(reasons, Sequence) else []
    return tuple(part.strip() for part in parts if part.strip())


def sentence(text: object) -> str:
    """Return text that begins with a capital letter and ends in a full stop; nothing stays nothing."""
    words = str(text or "").strip()
    if not words:
        return ""
    return words[0].upper() + words[1:] + ("" if words[-1] in ".!?" else ".")


def title_from_name(check: str) -> str:
    """Return a readable title for a check whose card gave none: ``range-edv`` gives ``Range EDV``."""
    words = [_CHECK_WORDS.get(word, word) for word in check.replace("_", "-").split("-")]
    text = " ".join(words)
    return text[:1].upper() + text[1:]


def visible(value: object) -> object:
    """Return what a page prints for a value: a dash for None, control and direction marks spelled out."""
    if value is None:
        return MISSING
    if type(value) is str:
        return value.translate(CONTROL)
    return value
