"""What the catalogue answers: columns of plain values (missing = None) for the published tables, and what the next night must know.

Nothing here depends on the order rows were written in, on ids or on clocks of the machine.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, cast

from sqlalchemy import Select, and_, func, select

from flows.catalogue.models import AssessmentRow, EntryRow
from flows.catalogue.outcome import Trouble
from flows.catalogue.results import LISTED, AcquisitionRow
from flows.intake.register import Entry

if TYPE_CHECKING:
    from sqlalchemy import Subquery
    from sqlalchemy.orm import Session

    from flows.catalogue.basis import Basis
    from flows.intake.register import Status

Columns = dict[str, list[Any]]

UNVERSIONED = ("waiting", "quarantined", "seen again")
"""Statuses of entries that are no version of an acquisition."""

_ENTRY = ("site", "package", "acquisition", "version", "status", "reason", "received_at", "package_sha256")
_ACQUISITION = (
    *("site", "subject", "visit", "acquisition", "chamber", "recorded_at", "verdict", "machine_verdict", "decided_by", "reasons"),
    *("runs", "beats", "beats_accepted"),
)
_BASIS = ("package_sha256", "protocol_version", "protocol_sha256", "software_version")


def known_entries(session: Session) -> list[Entry]:
    """Return what earlier nights registered, sorted; what only an assessment refused is judged anew by tonight's, so it counts as new."""
    refused = {
        (row.site, row.package_sha256, row.reason)
        for row in session.execute(
            select(AssessmentRow.site, AssessmentRow.package_sha256, AssessmentRow.reason).where(AssessmentRow.trouble == Trouble.INPUT),
        )
    }
    entries = []
    for row in session.scalars(select(EntryRow).order_by(EntryRow.site, EntryRow.package, EntryRow.package_sha256)):
        is_refused = row.status == "quarantined" and (row.site, row.package_sha256, row.reason) in refused
        status, reason = ("new", "") if is_refused else (row.status, row.reason or "")
        entries.append(
            Entry(
                site=row.site,
                package=row.package,
                acquisition=row.acquisition,
                version=row.version,
                status=cast("Status", status),
                reason=reason,
                received_at=row.received_at,
                package_sha256=row.package_sha256,
            ),
        )
    return entries


def outcomes(session: Session, basis: Basis) -> dict[tuple[str, str], dict[str, Any]]:
    """Return, for each (site, content) assessed on ``basis``: key, status, trouble, reason, verdict and evidence_sha256."""
    assessment = (AssessmentRow.key, AssessmentRow.status, AssessmentRow.trouble, AssessmentRow.reason, AssessmentRow.evidence_sha256)
    chosen = (
        select(AssessmentRow.site, AssessmentRow.package_sha256, *assessment, AcquisitionRow.verdict)
        .outerjoin(AcquisitionRow, AcquisitionRow.assessment_key == AssessmentRow.key)
        .where(_on(basis))
    )
    return {(row.site, row.package_sha256): dict(row._mapping) for row in session.execute(chosen)}  # noqa: SLF001  (its public name)


def columns(session: Session, basis: Basis, table: str) -> Columns:
    """Return a published table's columns (and, for acquisitions, the assessment's ``key``), as assessed on ``basis``."""
    if table == "packages":
        return _packages(session, basis)
    return _columns(session, _acquisitions(basis) if table == "acquisitions" else _listed(basis, table))


def _packages(session: Session, basis: Basis) -> Columns:
    """Return the columns of packages: a current version has the status its assessment gave it."""
    results = outcomes(session, basis)
    chosen = select(*(getattr(EntryRow, name) for name in _ENTRY))
    rows = []
    for entry in session.execute(chosen).mappings():
        row = dict(entry)
        if row["status"] not in {*UNVERSIONED, "superseded"}:
            result = results[row["site"], row["package_sha256"]]
            row["status"] = result["verdict"] or result["status"]
            row["reason"] = result["reason"]
        rows.append({name: None if value == "" else value for name, value in row.items()})
    return {name: [row[name] for row in rows] for name in _ENTRY}


def _acquisitions(basis: Basis) -> Select[*tuple[Any, ...]]:
    current = _current(basis)
    columns = [getattr(AcquisitionRow, name) for name in _ACQUISITION]
    return (
        select(*columns, current.c.key, current.c.version, current.c.received_at, *(getattr(AssessmentRow, name) for name in _BASIS))
        .join(current, current.c.key == AcquisitionRow.assessment_key)
        .join(AssessmentRow, AssessmentRow.key == AcquisitionRow.assessment_key)
    )


def _listed(basis: Basis, table: str) -> Select[*tuple[Any, ...]]:
    (model,) = [one for one in LISTED if one.__tablename__ == table]
    current = _current(basis)
    columns = [column for column in model.__table__.columns if column.name not in {"assessment_key", "position"}]
    return select(*columns).join(current, current.c.key == model.assessment_key)


def _current(basis: Basis) -> Subquery:
    """Return the entries that hold the newest version of their acquisition, with the key of their assessment on ``basis``."""
    newest = (
        select(EntryRow.site, EntryRow.acquisition, func.max(EntryRow.version).label("version"))
        .where(EntryRow.status.not_in(UNVERSIONED))
        .group_by(EntryRow.site, EntryRow.acquisition)
        .subquery()
    )
    is_newest = and_(
        newest.c.site == EntryRow.site,
        newest.c.acquisition == EntryRow.acquisition,
        newest.c.version == EntryRow.version,
    )
    is_its_own = and_(AssessmentRow.site == EntryRow.site, AssessmentRow.package_sha256 == EntryRow.package_sha256)
    return (
        select(AssessmentRow.key, EntryRow.version, EntryRow.received_at)
        .select_from(EntryRow)
        .join(newest, is_newest)
        .join(AssessmentRow, is_its_own)
        .where(EntryRow.status.not_in(UNVERSIONED), AssessmentRow.status == "assessed", _on(basis))
        .subquery()
    )


def _on(basis: Basis) -> Any:  # noqa: ANN401  (a condition of SQL)
    return and_(
        AssessmentRow.protocol_sha256 == basis.protocol_sha256,
        AssessmentRow.revisions_sha256 == basis.revisions_sha256,
        AssessmentRow.software_version == basis.software_version,
    )


def _columns(session: Session, chosen: Select[*tuple[Any, ...]]) -> Columns:
    result = session.execute(chosen)
    names, rows = list(result.keys()), list(result)
    return {name: [row[place] for row in rows] for place, name in enumerate(names)}
