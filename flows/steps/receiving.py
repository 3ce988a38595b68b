"""Receiving: look at the inbox, keep what is whole, and decide what each package is."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

from flows.catalogue import evidence_files, lookups, store
from flows.catalogue.engine import writing
from flows.catalogue.outcome import Trouble
from flows.errors import InputError
from flows.intake.arrival import Arrival, scan
from flows.intake.register import classify
from flows.workers import Job

if TYPE_CHECKING:
    from collections.abc import Mapping

    from flows.intake.register import Entry
    from flows.steps.opening import Night

_RETRIED = {Trouble.PROGRAM, Trouble.TIME_OUT, Trouble.DIED}


def receive(night: Night) -> list[Arrival]:
    """Return tonight's arrivals; every file of the verified ones is kept."""
    return [_kept(night, arrival) for arrival in scan(night.study / "inbox", list(night.protocol.sites))]


def pending(night: Night, arrivals: list[Arrival]) -> list[Job]:
    """Register what arrived, in the light of what could be assessed so far, and return what is still to be assessed, sorted.

    Older versions are assessed too: one that turns out to be unusable is no version, and so the numbers of the others, and what is in
    force, do not depend on how many nights the uploads were spread over. Call it again after these were assessed: a refusal can make room
    for what stood back behind it. An empty list says that there is nothing left to assess.
    """
    with writing(night.engine) as session:
        outcomes = lookups.outcomes(session, night.basis)
        refused = {content: str(row["reason"]) for (_, content), row in outcomes.items() if row["trouble"] == Trouble.INPUT}
        entries = classify(arrivals, lookups.known_entries(session), refused)
        store.put_entries(session, entries, at=datetime.now(UTC))
    jobs = {}
    for entry in entries:
        if entry.package_sha256 is None or entry.version is None:
            continue
        key = (entry.site, entry.package_sha256)
        if key not in night.tried and _is_wanted(night, outcomes.get(key)):
            jobs[key] = _job(night, entry, entry.package_sha256)
    return [jobs[key] for key in sorted(jobs)]


def _job(night: Night, entry: Entry, content: str) -> Job:
    """Return the job; an original that is lost costs its own package, so that is left for the job to say."""
    try:
        files, digests = night.originals.files(content), night.originals.digests(content)
    except InputError as loss:
        return Job(entry.site, entry.package, content, {}, night.protocol, damage=loss.problem)
    return Job(entry.site, entry.package, content, files, night.protocol, digests)


def _is_wanted(night: Night, outcome: Mapping[str, Any] | None) -> bool:
    """Say whether a package is to be assessed: never yet on this basis, tried in vain and asked for again, or its evidence is lost."""
    if outcome is None:
        return True
    if outcome["status"] == "assessed":
        return not evidence_files.is_there(night.store, outcome["key"])
    return night.options.retry_failed and outcome["trouble"] in _RETRIED


def _kept(night: Night, arrival: Arrival) -> Arrival:
    """Return the arrival once its files are kept; one that changes under our hands is broken, and judged anew by the next night."""
    if arrival.package_sha256 is None:
        return arrival
    try:
        night.originals.keep(arrival)
    except InputError as change:
        return Arrival(arrival.site, arrival.package, arrival.path, "broken", str(change))
    return arrival
