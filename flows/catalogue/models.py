"""The tables of the catalogue.

What the program found out stands in tables of the published tables' columns (`results.py`); here is the rest: what arrived, each
assessment and the key it was made under, the releases, the nights, and the trail that only grows.

An entry is one arrival of a package. A package whose content is known by its sum stays for good; one without (still arriving, or too
broken to have one) mirrors the inbox and goes when the inbox changes.
"""

from datetime import datetime

from sqlalchemy import CheckConstraint, Index, String, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from flows.catalogue.types import Base

HASH = String(64)


class EntryRow(Base):
    """A package as it arrived at one site under one folder name."""

    __tablename__ = "entries"
    __table_args__ = (
        UniqueConstraint("site", "package", "package_sha256"),
        Index("ix_entries_site_acquisition", "site", "acquisition"),
        CheckConstraint("version IS NULL OR version >= 1", name="version_counts_from_one"),
    )

    id: Mapped[int] = mapped_column(primary_key=True)
    site: Mapped[str]
    package: Mapped[str]
    acquisition: Mapped[str | None]
    version: Mapped[int | None]
    status: Mapped[str]
    reason: Mapped[str | None]
    received_at: Mapped[datetime | None]
    package_sha256: Mapped[str | None] = mapped_column(HASH, index=True)
    first_seen_at: Mapped[datetime]


class AssessmentRow(Base):
    """One assessment of one content of one site, and all that could have changed its outcome: ``key`` is the sum over these.

    ``status`` is assessed or quarantined; ``trouble`` tells a quarantined one's input, program, time-out and died apart.
    """

    __tablename__ = "assessments"
    __table_args__ = (CheckConstraint("status IN ('assessed', 'quarantined')", name="status_known"),)

    key: Mapped[str] = mapped_column(HASH, primary_key=True)
    site: Mapped[str]
    package_sha256: Mapped[str] = mapped_column(HASH, index=True)
    protocol_version: Mapped[str]
    protocol_sha256: Mapped[str] = mapped_column(HASH)
    revisions_sha256: Mapped[str] = mapped_column(HASH)
    software_version: Mapped[str]
    status: Mapped[str]
    trouble: Mapped[str | None]
    reason: Mapped[str | None]
    evidence_sha256: Mapped[str | None] = mapped_column(HASH)
    recorded_at_text: Mapped[str | None]
    assessed_at: Mapped[datetime]


class ReleaseRow(Base):
    """A release the pointer was moved to; the same release twice, with another between, is two rows."""

    __tablename__ = "releases"

    id: Mapped[int] = mapped_column(primary_key=True)
    name: Mapped[str]
    manifest_sha256: Mapped[str] = mapped_column(HASH)
    published_at: Mapped[datetime]


class NightRow(Base):
    """One night: when it ran, in which process, and how it ended (running, finished, refused, failed or crashed)."""

    __tablename__ = "nights"

    id: Mapped[int] = mapped_column(primary_key=True)
    started_at: Mapped[datetime]
    ended_at: Mapped[datetime | None]
    status: Mapped[str]
    process: Mapped[int]
    release: Mapped[str | None]
    trouble: Mapped[str | None]


class AuditRow(Base):
    """One line of the trail: who changed what from which old value to which new one, why, on which content.

    Each line holds the sum of the line before it and its own, so that a changed, lost or inserted line shows.
    """

    __tablename__ = "audit"

    id: Mapped[int] = mapped_column(primary_key=True)
    at: Mapped[datetime]
    who: Mapped[str]
    what: Mapped[str]
    old: Mapped[str | None]
    new: Mapped[str | None]
    why: Mapped[str | None]
    content: Mapped[str | None]
    previous_sha256: Mapped[str] = mapped_column(HASH)
    row_sha256: Mapped[str] = mapped_column(HASH, unique=True)
