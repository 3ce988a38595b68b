"""Which content is new, which was seen before, which version of its acquisition it is: one pure decision over all nights.

An entry stands for a content (``package_sha256``) in a folder, or for a folder whose content could not be verified. Of each content
exactly one entry counts, every other is ``seen again``; so distinct contents equal the sum over the other statuses. Versions of an
acquisition are numbered by the time of receipt, then by package name, whatever the order the nights saw them in: an older one that
arrives late never becomes the current one.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from typing import Literal

from flows.intake.arrival import Arrival

Status = Literal["new", "accepted", "queried", "rejected", "quarantined", "waiting", "superseded", "seen again"]

_GONE = " (no longer in the inbox)"
_NEVER = datetime.max.replace(tzinfo=UTC)


@dataclass(frozen=True)
class Entry:
    """A package version as registered.

    ``version`` counts from 1 within (site, acquisition) and is None for what is no version: quarantined, waiting, seen again. The entry
    with the highest version is current; its status is ``new`` until it was assessed, the others' is ``superseded``.
    """

    site: str
    package: str
    acquisition: str | None
    version: int | None
    status: Status
    reason: str
    received_at: datetime | None
    package_sha256: str | None


@dataclass(frozen=True)
class _Content:
    """A content in a folder, with what is held against it."""

    entry: Entry
    sha256: str
    prior: Entry | None
    objection: str

    @property
    def is_settled(self) -> bool:
        """Whether an earlier night gave it a version."""
        return self.prior is not None and self.prior.version is not None

    @property
    def received(self) -> tuple[datetime, str, str, str]:
        """The order of receipt, with every tie broken."""
        return (self.entry.received_at or _NEVER, self.entry.package, self.entry.site, self.sha256)


def classify(arrivals: Iterable[Arrival], known: Iterable[Entry], refused: Mapping[str, str] | None = None) -> list[Entry]:
    """Return every entry there is after tonight, sorted by site, package and version.

    ``arrivals`` is tonight's scan, ``known`` what earlier nights registered, with statuses as their assessment left them; ``refused``
    maps the SHA-256 of contents that cannot be assessed (an acquisition.json that breaks the contract) to the reason, as judged by
    tonight's software and protocol. Known contents stay when their folder is gone. A folder that could not be verified is judged anew
    each night: what was repaired in place is an ordinary arrival.
    """
    arrivals, known = list(arrivals), list(known)
    contents = _contents(arrivals, known, refused or {})
    holders, repeats = _split_repeats(contents)
    quarantined, versions = _split_names(holders)
    entries = [*repeats, *quarantined, *_numbered(versions), *_unverified(arrivals, known)]
    return sorted(entries, key=lambda entry: (entry.site, entry.package, entry.version or 0, entry.package_sha256 or "", entry.status))


def _contents(arrivals: list[Arrival], known: list[Entry], refused: Mapping[str, str]) -> list[_Content]:
    """Return every verified content, known or arrived, once per folder."""
    found: dict[tuple[str, str, str], _Content] = {}
    for past in known:
        if past.package_sha256 is not None:
            objection = past.reason if past.status in {"quarantined", "seen again"} else refused.get(past.package_sha256, "")
            found[past.site, past.package, past.package_sha256] = _Content(past, past.package_sha256, past, objection)
    for arrival in arrivals:
        digest = arrival.package_sha256
        if digest is None:
            continue
        key = (arrival.site, arrival.package, digest)
        prior = found[key].prior if key in found else None
        received_at = arrival.received_at if prior is None else prior.received_at
        entry = Entry(arrival.site, arrival.package, arrival.acquisition_name, None, "new", "", received_at, digest)
        found[key] = _Content(entry, digest, prior, _objection(arrival, digest, refused))
    return list(found.values())


def _objection(arrival: Arrival, digest: str, refused: Mapping[str, str]) -> str:
    if arrival.state == "broken":
        return arrival.reason
    if arrival.declared_site is not None and arrival.declared_site != arrival.site:
        return f"acquisition.json: site: does not match the inbox folder {arrival.site!r} (found {arrival.declared_site!r})."
    if digest in refused:
        return refused[digest]
    return "" if arrival.acquisition_name is not None else arrival.unnamed or "acquisition.json: acquisition: is missing."


def _split_repeats(contents: list[_Content]) -> tuple[list[_Content], list[Entry]]:
    """Return the one holder of each content and a ``seen again`` entry for every other folder that has it."""
    groups: dict[str, list[_Content]] = {}
    for content in contents:
        groups.setdefault(content.sha256, []).append(content)
    holders, repeats = [], []
    for group in groups.values():
        holder, *others = sorted(group, key=lambda one: (not one.is_settled, bool(one.objection), _lateness(one), one.received))
        reason = f"the same content as {holder.entry.site}/{holder.entry.package}"
        holders.append(holder)
        repeats += [replace(other.entry, version=None, status="seen again", reason=reason) for other in others]
    return holders, repeats


def _lateness(content: _Content) -> int:
    """Return 0 for what held its content before, 1 for what is seen first tonight, 2 for what was a repeat already."""
    if content.prior is None:
        return 1
    return 2 if content.prior.status == "seen again" else 0


def _split_names(holders: list[_Content]) -> tuple[list[Entry], list[_Content]]:
    """Return the quarantined entries and the contents that are versions; a name belongs to the site that had it first."""
    owners: dict[str | None, _Content] = {}
    for holder in sorted(holders, key=lambda one: (not one.is_settled, one.received)):
        if not holder.objection:
            owners.setdefault(holder.entry.acquisition, holder)
    quarantined, versions = [], []
    for holder in holders:
        owner = owners.get(holder.entry.acquisition)
        objection = holder.objection
        if not objection and owner is not None and owner.entry.site != holder.entry.site:
            taken = f"the name {holder.entry.acquisition!r} is taken by site {owner.entry.site!r}"
            objection = f"acquisition.json: acquisition: {taken}. Acquisition names are unique in the study; give it another."
        if objection:
            quarantined.append(replace(holder.entry, version=None, status="quarantined", reason=objection))
        else:
            versions.append(holder)
    return quarantined, versions


def _numbered(versions: list[_Content]) -> list[Entry]:
    """Return the entries of all versions, numbered; each acquisition's last is current, the others superseded."""
    groups: dict[tuple[str, str | None], list[_Content]] = {}
    for content in versions:
        groups.setdefault((content.entry.site, content.entry.acquisition), []).append(content)
    entries: list[Entry] = []
    for group in groups.values():
        ordered = sorted(group, key=lambda one: one.received)
        for number, content in enumerate(ordered, start=1):
            if number < len(ordered):
                reason = f"version {len(ordered)} came after it"
                entries.append(replace(content.entry, version=number, status="superseded", reason=reason))
            else:
                entries.append(_current(content, number))
    return entries


def _current(content: _Content, number: int) -> Entry:
    prior = content.prior
    if prior is not None and prior.status in {"accepted", "queried", "rejected"}:
        return replace(content.entry, version=number, status=prior.status, reason=prior.reason)
    return replace(content.entry, version=number, status="new", reason="")


def _unverified(arrivals: list[Arrival], known: list[Entry]) -> list[Entry]:
    """Return the entries of folders whose content could not be verified, tonight or when they were last there.

    A waiting folder that went away was never received; what was quarantined stays on record, but for what lay outside every site.
    """
    entries = [_unverified_entry(arrival) for arrival in arrivals if arrival.package_sha256 is None]
    present = {(arrival.site, arrival.package) for arrival in arrivals}
    gone = [
        replace(prior, reason=f"{prior.reason.removesuffix(_GONE)}{_GONE}")
        for prior in known
        if prior.package_sha256 is None and prior.status == "quarantined" and prior.site and (prior.site, prior.package) not in present
    ]
    return entries + gone


def _unverified_entry(arrival: Arrival) -> Entry:
    if arrival.state == "broken":
        return Entry(arrival.site, arrival.package, None, None, "quarantined", arrival.reason, None, None)
    changed = "" if arrival.newest_mtime is None else f"; last change {arrival.newest_mtime:%Y-%m-%dT%H:%M:%SZ}"
    return Entry(arrival.site, arrival.package, None, None, "waiting", f"{arrival.reason}{changed}", None, None)
