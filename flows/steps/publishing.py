"""Publishing: tables from the catalogue, through the gate, into a release with its pages."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from checks import ALL as CHECKS
from flows.assess import rules_of
from flows.catalogue import evidence_files, lookups, store
from flows.catalogue.engine import reading, writing
from flows.publish.copies import copies, with_copies_rejected, with_copy_told
from flows.publish.gate import answers
from flows.publish.refusal import GateRefused
from flows.publish.release import UNNAMED, publish, seal, staged, write_tables
from flows.publish.tables import build, schemas
from flows.publish.views import acquisition_views, material, night_view
from flows.publish.visits import jumps, with_jumps_shown, with_jumps_told
from flows.reports.pages import write_report

if TYPE_CHECKING:
    from flows.publish.views import Material
    from flows.steps.opening import Night


@dataclass(frozen=True)
class NightResult:
    """What a night came to: its release, the packages of each site by status, how many were assessed tonight, and what needs a look.

    ``is_new`` says whether `published/latest` moved.
    """

    release: str
    folder: Path
    report: Path
    is_new: bool
    counts: Mapping[str, Mapping[str, int]]
    assessed: int
    problems: tuple[str, ...] = ()

    def __str__(self) -> str:
        """Return the result as lines for a person."""
        width = max((len(site) for site in self.counts), default=0)
        sites = [
            f"{site:{width}}  {', '.join(f'{number} {status}' for status, number in count.items() if number) or 'nothing'}"
            for site, count in self.counts.items()
        ]
        assessed = f"assessed tonight: {self.assessed}"
        release = f"release {self.release}{'' if self.is_new else ' (unchanged)'}: {self.report}"
        return "\n".join([*sites, assessed, *(f"look at: {problem}" for problem in self.problems), release])


def publish_night(night: Night) -> NightResult:
    """Publish what the catalogue holds on tonight's basis, and return the night's result.

    Raises GateRefused when the tables break a promise: nothing is published then and the pointer stays.
    """
    with reading(night.engine) as session:
        columns = {table: lookups.columns(session, night.basis, table) for table in schemas()}
        copied = copies(lookups.columns(session, night.basis, "channels"))
        outcomes = {str(row["key"]): row for row in lookups.outcomes(session, night.basis).values()}
    keys = dict(zip(columns["acquisitions"]["acquisition"], columns["acquisitions"]["key"], strict=True))
    columns = with_copies_rejected(columns, copied)
    jumped = jumps(columns, rules_of(night.protocol))
    tables = build(with_jumps_told(columns, jumped))
    found = answers(tables)
    problems = [answer.problem() for answer in found if not answer.kept]
    if problems:
        raise GateRefused(problems)

    def evidence(acquisition: str) -> Mapping[str, Any]:
        key = keys[acquisition]
        own = evidence_files.load(night.store, key, str(outcomes[key]["evidence_sha256"]))
        return with_copy_told(with_jumps_shown(own, jumped.get(acquisition, [])), copied.get(acquisition))

    shown = material(tables, night.protocol, CHECKS, found, night.basis.software_version)
    with staged(night.store) as folder:
        write_tables(folder, tables)
        write_report(folder / "report", night_view(shown, UNNAMED), acquisition_views(shown, evidence))
        name = seal(folder, night.options.release)
        release = publish(folder, night.study / "published", name)
    with writing(night.engine) as session:
        store.put_release(session, release.name, release.manifest_sha256, at=datetime.now(UTC))
        store.end_night(session, night.number, "finished", at=datetime.now(UTC), release=release.name)
    report = release.folder / "report" / "index.html"
    return NightResult(release.name, release.folder, report, release.is_new, _counts(shown), night.assessed, tuple(sorted(night.problems)))


def _counts(shown: Material) -> dict[str, dict[str, int]]:
    counts: dict[str, Counter[str]] = {site: Counter() for site in shown.protocol.sites}
    for row in shown.rows["packages"]:
        counts.setdefault(row["site"] or "(outside)", Counter())[row["status"]] += 1
    return {site: dict(sorted(count.items())) for site, count in counts.items()}
