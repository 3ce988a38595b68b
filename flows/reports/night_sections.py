"""What stands on the page of a night: does received add up, who has to answer, what was not taken in, what cost most, what was expected."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

from flows.reports.figures_sites import STATUSES, package_cells, share_bar
from flows.reports.wording import counted, instant, listing

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from markupsafe import Markup

    from flows.reports.views import AcquisitionRow, ExpectedRow, NightView, PackageRow, ReasonRow, SiteCount

NOT_TAKEN_IN = ("quarantined", "waiting", "superseded")
_WORST_FIRST = {"rejected": 0, "queried": 1, "accepted": 2}


@dataclass(frozen=True, slots=True)
class Sum:
    """Received against the six statuses; ``holds`` says whether both sides agree, ``seen_again`` stands apart."""

    received: int
    terms: tuple[tuple[str, int], ...]
    total: int
    holds: bool
    seen_again: int


@dataclass(frozen=True, slots=True)
class SiteLine:
    """One site: its counts, its packages drawn, what it has to answer (acquisitions queried, packages to send again), and what is lost."""

    count: SiteCount
    cells: Markup | None
    queried: tuple[AcquisitionRow, ...]
    quarantined: tuple[PackageRow, ...]
    rejected: tuple[AcquisitionRow, ...]

    @property
    def to_answer(self) -> int:
        """How many questions are open for the site."""
        return self.count.queried + self.count.quarantined


@dataclass(frozen=True, slots=True)
class PackageLine:
    """A package that was not taken in, as text."""

    row: PackageRow
    received: str
    version: str


@dataclass(frozen=True, slots=True)
class ExpectedCell:
    """What came for one subject and visit: a status with its words, or nothing expected (``status`` empty)."""

    status: str
    words: str
    page: str


@dataclass(frozen=True, slots=True)
class ExpectedSite:
    """The subjects of a site against the visits the protocol names."""

    site: str
    visits: tuple[str, ...]
    subjects: tuple[tuple[str, tuple[ExpectedCell, ...]], ...]
    received: int
    expected: int


def sum_of(night: NightView) -> Sum:
    """Return received against the sum over the sites' statuses."""
    terms = tuple((status, sum(getattr(site, status) for site in night.sites)) for status in STATUSES)
    total = sum(count for _, count in terms)
    return Sum(night.received, terms, total, total == night.received, sum(site.seen_again for site in night.sites))


def site_lines(night: NightView) -> tuple[SiteLine, ...]:
    """Return the sites, those with most to answer first."""
    lines = [
        SiteLine(
            count=site,
            cells=package_cells(site, f"site-{place}"),
            queried=tuple(row for row in night.acquisitions if row.site == site.site and row.verdict == "queried"),
            quarantined=tuple(row for row in night.packages if row.site == site.site and row.status == "quarantined"),
            rejected=tuple(row for row in night.acquisitions if row.site == site.site and row.verdict == "rejected"),
        )
        for place, site in enumerate(sorted(night.sites, key=lambda item: item.site), start=1)
    ]
    return tuple(sorted(lines, key=lambda item: (-item.to_answer, item.count.site)))


def answer_words(lines: Sequence[SiteLine]) -> str:
    """Return in one sentence which sites have to answer."""
    open_sites = [f"{line.count.site} {line.to_answer}" for line in lines if line.to_answer]
    if not open_sites:
        return "No site has to answer anything."
    total = sum(line.to_answer for line in lines)
    return f"{counted(total, 'question')} for {counted(len(open_sites), 'site')}: {listing(open_sites)}."


def packages_with(night: NightView, statuses: Sequence[str]) -> tuple[PackageLine, ...]:
    """Return the package versions of these statuses, in the order of the statuses, then site and name."""
    chosen = [row for row in night.packages if row.status in statuses]
    chosen.sort(key=lambda row: (statuses.index(row.status), row.site, row.package, row.version or 0))
    return tuple(PackageLine(row, instant(row.received_at), "" if row.version is None else str(row.version)) for row in chosen)


def reason_lines(night: NightView) -> tuple[tuple[ReasonRow, Markup, Markup], ...]:
    """Return each reason of the night with a bar for its beats and one for its indices, the costliest in indices, then in beats, first."""
    most_beats = max((row.beats for row in night.reasons), default=0)
    most_indices = max((row.indices_withheld for row in night.reasons), default=0)
    ranked = sorted(night.reasons, key=lambda row: (-row.indices_withheld, -row.beats, -row.acquisitions, row.check))
    return tuple((row, share_bar(row.beats, most_beats), share_bar(row.indices_withheld, most_indices)) for row in ranked)


def worst_first(rows: Sequence[AcquisitionRow]) -> tuple[AcquisitionRow, ...]:
    """Return the acquisitions in the order of the night's table: rejected, queried, accepted; in each the smallest share of beats first."""
    return tuple(
        sorted(
            rows,
            key=lambda row: (
                _WORST_FIRST.get(row.verdict, 0),
                row.beats_accepted / row.beats if row.beats else 0.0,
                row.site,
                row.acquisition,
            ),
        )
    )


def expected_sites(night: NightView) -> tuple[ExpectedSite, ...]:
    """Return expected against received, site by site; visits and subjects keep the order in which they are given."""
    by_visit: dict[tuple[str, str, str], list[AcquisitionRow]] = {}
    for row in night.acquisitions:
        by_visit.setdefault((row.site, row.subject, row.visit), []).append(row)
    sites = []
    for site in dict.fromkeys(row.site for row in night.expected):
        own = [row for row in night.expected if row.site == site]
        visits = tuple(dict.fromkeys(row.visit for row in own))
        named = {(row.subject, row.visit): row for row in own}
        subjects = tuple(
            (subject, tuple(_expected_cell(named.get((subject, visit)), by_visit) for visit in visits))
            for subject in dict.fromkeys(row.subject for row in own)
        )
        sites.append(ExpectedSite(site, visits, subjects, sum(row.received for row in own), len(own)))
    return tuple(sites)


def _expected_cell(row: ExpectedRow | None, by_visit: Mapping[tuple[str, str, str], Sequence[AcquisitionRow]]) -> ExpectedCell:
    if row is None:
        return ExpectedCell("", "", "")
    acquisitions = by_visit.get((row.site, row.subject, row.visit), ())
    if not row.received:
        return ExpectedCell("missing", "" if row.what == "nothing" else row.what, "")
    worst = worst_first(acquisitions)[0] if acquisitions else None
    if worst is None:
        return ExpectedCell("received", row.what or "received", "")
    counts = Counter(item.verdict for item in acquisitions)
    words = worst.verdict if len(acquisitions) == 1 else ", ".join(f"{count} {verdict}" for verdict, count in sorted(counts.items()))
    return ExpectedCell(worst.verdict, words, worst.page)
