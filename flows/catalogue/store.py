"""What the catalogue is told: each function writes within the transaction of the session it is given."""

from __future__ import annotations

import math
from enum import Enum
from typing import TYPE_CHECKING, Any

import numpy as np
from sqlalchemy import Table, delete, insert, select, update

from flows.catalogue import trail
from flows.catalogue.models import AssessmentRow, EntryRow, NightRow, ReleaseRow
from flows.catalogue.outcome import Found, Outcome, Refused
from flows.catalogue.results import LISTED, AcquisitionRow

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping
    from datetime import datetime

    from sqlalchemy.orm import Session

    from flows.catalogue.basis import Basis
    from flows.intake.register import Entry


def put_assessment(
    session: Session,
    site: str,
    package_sha256: str,
    basis: Basis,
    outcome: Outcome,
    *,
    at: datetime,
    evidence_sha256: str | None = None,
) -> str:
    """Keep ``outcome`` under its key, instead of what was kept there before, and return the key; its evidence is kept as a file.

    Raises ValueError for rows whose columns are not the table's.
    """
    key = basis.key(site, package_sha256)
    before = _newest_verdict(session, site, package_sha256)
    for table in (AcquisitionRow, *LISTED):
        session.execute(delete(table).where(table.assessment_key == key))
    session.execute(delete(AssessmentRow).where(AssessmentRow.key == key))
    found = outcome if isinstance(outcome, Found) else None
    refused = outcome if isinstance(outcome, Refused) else None
    session.add(
        AssessmentRow(
            key=key,
            site=site,
            package_sha256=package_sha256,
            protocol_version=basis.protocol_version,
            protocol_sha256=basis.protocol_sha256,
            revisions_sha256=basis.revisions_sha256,
            software_version=basis.software_version,
            status="quarantined" if found is None else "assessed",
            trouble=None if refused is None else refused.trouble,
            reason=None if refused is None else refused.reason,
            evidence_sha256=evidence_sha256,
            recorded_at_text=None if found is None else found.recorded_at_text,
            assessed_at=at,
        ),
    )
    session.flush()
    if found is not None:
        _put_rows(session, key, found)
    verdict = str(found.acquisition["verdict"]) if found is not None else "quarantined"
    why = None if refused is None else refused.reason
    trail.append(session, trail.Line("assessment", before, verdict, why, package_sha256), at=at)
    return key


def put_entries(session: Session, entries: Iterable[Entry], *, at: datetime) -> None:
    """Make ``entries`` all the entries there are: changed ones change, new ones are added, those not among them go."""
    standing = {(row.site, row.package, row.package_sha256): row for row in session.scalars(select(EntryRow))}
    for entry in entries:
        row = standing.pop((entry.site, entry.package, entry.package_sha256), None)
        before = None if row is None else row.status
        if row is None:
            row = EntryRow(site=entry.site, package=entry.package, package_sha256=entry.package_sha256, first_seen_at=at)
            session.add(row)
        row.acquisition, row.version, row.status = entry.acquisition, entry.version, entry.status
        row.reason, row.received_at = entry.reason or None, entry.received_at
        if before != entry.status:
            content = entry.package_sha256 or f"{entry.site}/{entry.package}"
            trail.append(session, trail.Line("package", before, entry.status, entry.reason or None, content), at=at)
    for row in standing.values():
        trail.append(session, trail.Line("package", row.status, None, "left the inbox", f"{row.site}/{row.package}"), at=at)
        session.delete(row)


def put_basis(session: Session, basis: Basis, *, at: datetime) -> None:
    """Write the protocol, the revisions and the software's version into the trail where they differ from what stands there."""
    values = {
        "protocol": basis.protocol_sha256,
        "revisions of checks and indices": basis.revisions_sha256,
        "software": basis.software_version,
    }
    for what, value in values.items():
        before = trail.newest(session, what)
        if before != value:
            trail.append(session, trail.Line(what, before, value, why="the night found it so"), at=at)


def put_release(session: Session, name: str, manifest_sha256: str, *, at: datetime) -> None:
    """Record the release the pointer shows; nothing is written where the newest record is the same release."""
    newest = session.scalars(select(ReleaseRow).order_by(ReleaseRow.id.desc()).limit(1)).first()
    if newest is not None and (newest.name, newest.manifest_sha256) == (name, manifest_sha256):
        return
    session.add(ReleaseRow(name=name, manifest_sha256=manifest_sha256, published_at=at))
    before = None if newest is None else newest.name
    trail.append(session, trail.Line("published/latest", before, name, content=manifest_sha256), at=at)


def begin_night(session: Session, process: int, *, at: datetime) -> int:
    """Open the record of a night and return its id; nights still open belong to dead processes (the lock is ours) and are closed."""
    session.execute(update(NightRow).where(NightRow.status == "running").values(status="crashed"))
    night = NightRow(started_at=at, status="running", process=process)
    session.add(night)
    session.flush()
    return night.id


def end_night(session: Session, night: int, status: str, *, at: datetime, release: str | None = None, trouble: str | None = None) -> None:
    """Close the record of a night."""
    values = {"status": status, "ended_at": at, "release": release, "trouble": trouble}
    session.execute(update(NightRow).where(NightRow.id == night).values(**values))


def _newest_verdict(session: Session, site: str, package_sha256: str) -> str | None:
    newest = session.execute(
        select(AssessmentRow.status, AcquisitionRow.verdict)
        .outerjoin(AcquisitionRow, AcquisitionRow.assessment_key == AssessmentRow.key)
        .where(AssessmentRow.site == site, AssessmentRow.package_sha256 == package_sha256)
        .order_by(AssessmentRow.assessed_at.desc())
        .limit(1),
    ).first()
    return None if newest is None else newest.verdict or newest.status


def _put_rows(session: Session, key: str, found: Found) -> None:
    unknown = set(found.rows) - {table.__tablename__ for table in LISTED}
    if unknown:
        message = f"an assessment has no table {', '.join(sorted(unknown))}"
        raise ValueError(message)
    session.execute(insert(AcquisitionRow), [{"assessment_key": key} | _values(AcquisitionRow.__table__, found.acquisition)])
    for model in LISTED:
        rows = found.rows.get(model.__tablename__, ())
        filled = [{"assessment_key": key, "position": n} | _values(model.__table__, row) for n, row in enumerate(rows)]
        if filled:
            session.execute(insert(model), filled)


def _values(table: Any, row: Mapping[str, object]) -> dict[str, Any]:  # noqa: ANN401  (a mapped class's __table__ has a wider static type)
    assert isinstance(table, Table)
    names = {column.name for column in table.columns} - {"assessment_key", "position"}
    if names != set(row):
        message = f"{table.name}: columns missing {sorted(names - set(row))}, unknown {sorted(set(row) - names)}"
        raise ValueError(message)
    return {name: _plain(value) for name, value in row.items()}


def _plain(value: object) -> object:
    """Return the value as the database takes it: plain types, and one kind of missing."""
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, Enum):
        value = value.value
    if value == "" or (isinstance(value, float) and not math.isfinite(value)):
        return None
    return value
