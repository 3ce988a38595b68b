"""The trail: lines that are only ever added, each holding the sum of the one before it.

A changed, lost, inserted or swapped line shows. Whoever can write to the database can still cut lines off the end, or write the whole
trail anew: only a copy of its last sum kept elsewhere would show that.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import astuple, dataclass
from datetime import UTC
from typing import TYPE_CHECKING

from sqlalchemy import select

from flows.catalogue.models import AuditRow

if TYPE_CHECKING:
    from datetime import datetime

    from sqlalchemy.orm import Session

START_SHA256 = "0" * 64
"""What the first line holds for the sum of the line before it."""


@dataclass(frozen=True, slots=True)
class Line:
    """What changed, from which old value to which new one, why, and on which content (a sum)."""

    what: str
    old: str | None = None
    new: str | None = None
    why: str | None = None
    content: str | None = None


def append(session: Session, line: Line, *, at: datetime, who: str = "nightly") -> None:
    """Add ``line`` to the trail, in the transaction of ``session``: it stands if and only if what it tells of does."""
    last = session.scalars(select(AuditRow.row_sha256).order_by(AuditRow.id.desc()).limit(1)).first()
    row = AuditRow(
        at=at,
        who=who,
        what=line.what,
        old=line.old,
        new=line.new,
        why=line.why,
        content=line.content,
        previous_sha256=last or START_SHA256,
        row_sha256=_row_sha256(line, at=at, who=who, previous_sha256=last or START_SHA256),
    )
    session.add(row)
    session.flush()


def broken_lines(session: Session) -> list[int]:
    """Return the ids of lines whose own sum or whose link to the line before them does not hold, ascending; empty for a sound trail."""
    broken = []
    previous = START_SHA256
    for row in session.scalars(select(AuditRow).order_by(AuditRow.id)):
        line = Line(row.what, row.old, row.new, row.why, row.content)
        expected = _row_sha256(line, at=row.at, who=row.who, previous_sha256=row.previous_sha256)
        if row.previous_sha256 != previous or row.row_sha256 != expected:
            broken.append(row.id)
        previous = row.row_sha256
    return broken


def newest(session: Session, what: str) -> str | None:
    """Return the new value of the newest line about ``what``; None where there is none."""
    return session.scalars(select(AuditRow.new).where(AuditRow.what == what).order_by(AuditRow.id.desc()).limit(1)).first()


def _row_sha256(line: Line, *, at: datetime, who: str, previous_sha256: str) -> str:
    text = json.dumps([at.astimezone(UTC).isoformat(timespec="microseconds"), who, *astuple(line), previous_sha256])
    return hashlib.sha256(text.encode()).hexdigest()
