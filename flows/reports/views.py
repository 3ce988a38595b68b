"""What a page shows: plain frozen data, filled by the night from the catalogue and the assessments, judged nowhere in here."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from datetime import datetime

Row = Mapping[str, Any]
"""One row of a published table: column name -> value, missing = None."""


@dataclass(frozen=True, slots=True)
class SiteCount:
    """How many distinct contents one site sent, by status; ``seen_again`` stands apart and is in no sum."""

    site: str
    accepted: int = 0
    queried: int = 0
    rejected: int = 0
    quarantined: int = 0
    waiting: int = 0
    superseded: int = 0
    seen_again: int = 0

    @property
    def total(self) -> int:
        """The sum over the six statuses: what ``received`` must be."""
        return self.accepted + self.queried + self.rejected + self.quarantined + self.waiting + self.superseded


@dataclass(frozen=True, slots=True)
class PackageRow:
    """One version of a package: a row of the published table ``packages`` (status as there)."""

    site: str
    package: str
    acquisition: str | None
    version: int | None
    status: str
    reason: str | None
    received_at: datetime | None


@dataclass(frozen=True, slots=True)
class ExpectedRow:
    """One visit of one subject that the protocol names: whether anything came, and what in a few words."""

    site: str
    subject: str
    visit: str
    received: bool
    what: str


@dataclass(frozen=True, slots=True)
class ReasonRow:
    """What one check cost this release: acquisitions and runs it touched, beats it rejected, indices it withheld."""

    check: str
    title: str
    level: str
    acquisitions: int
    runs: int
    beats: int
    indices_withheld: int


@dataclass(frozen=True, slots=True)
class AcquisitionRow:
    """One acquisition in its current version; ``reasons`` are names of failed checks, as in the published table."""

    site: str
    subject: str
    visit: str
    acquisition: str
    verdict: str
    reasons: tuple[str, ...]
    beats: int
    beats_accepted: int
    chamber: str = ""
    indices_published: int | None = None
    indices_withheld: int | None = None
    decided_by: str | None = None

    @property
    def page(self) -> str:
        """The address of its page, relative to the night's page."""
        return acquisition_page(self.acquisition)


@dataclass(frozen=True, slots=True)
class GateRow:
    """One promise about the published tables that was tested before release; ``failing`` rows of ``rows``."""

    table: str
    promise: str
    kept: bool
    rows: int | None = None
    failing: int | None = None


@dataclass(frozen=True, slots=True)
class NightView:
    """One night: everything its page shows.

    ``received`` counts distinct contents on its own, so that the page can hold it against the sum of the sites' statuses.
    """

    release: str
    study: str
    protocol_version: str
    protocol_sha256: str
    software_version: str
    received: int
    sites: Sequence[SiteCount]
    packages: Sequence[PackageRow] = ()
    expected: Sequence[ExpectedRow] = ()
    reasons: Sequence[ReasonRow] = ()
    acquisitions: Sequence[AcquisitionRow] = ()
    gate: Sequence[GateRow] = ()


@dataclass(frozen=True, slots=True)
class AcquisitionView:
    """One acquisition: the evidence that `flows.assess` hands over, and its rows of the published tables.

    ``row`` is its row of ``acquisitions``; ``runs``, ``rejections``, ``indices`` and ``changes`` are its rows of those tables.
    """

    evidence: Mapping[str, Any]
    row: Row
    runs: Sequence[Row] = field(default_factory=tuple)
    rejections: Sequence[Row] = field(default_factory=tuple)
    indices: Sequence[Row] = field(default_factory=tuple)
    changes: Sequence[Row] = field(default_factory=tuple)


def acquisition_page(acquisition: str) -> str:
    """Return the address of an acquisition's page, relative to the night's page."""
    return f"acquisitions/{acquisition}.html"
