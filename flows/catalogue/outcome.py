"""What became of a package: found out, or refused with the reason. It travels from child processes, so it needs no database."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

Row = Mapping[str, Any]


class Trouble(StrEnum):
    """Why a package could not be assessed."""

    INPUT = "input"
    PROGRAM = "program"
    TIME_OUT = "time-out"
    DIED = "died"


@dataclass(frozen=True, slots=True)
class Found:
    """What an assessment found: the row of ``acquisitions``, and a list of rows for each of the other tables by name.

    ``evidence`` is packed as `flows.catalogue.evidence_files` packs it; ``recorded_at_text`` is the time as the site wrote it.
    """

    acquisition: Row
    rows: Mapping[str, Sequence[Row]]
    evidence: bytes
    recorded_at_text: str | None = None


@dataclass(frozen=True, slots=True)
class Refused:
    """Why a package could not be assessed, in words a site can read."""

    trouble: Trouble
    reason: str


Outcome = Found | Refused
