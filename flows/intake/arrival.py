"""What lies in the inbox tonight: every package whole, still arriving, or broken with the reason.

The inbox is only ever read. Nothing is skipped in silence: a stray file or a folder of an unknown site is a broken arrival too.
"""

from __future__ import annotations

import os
import stat
from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Literal

from flows.errors import InputError
from flows.intake import checksums
from flows.intake.plain_files import explained, not_a_file, open_inside, shown
from flows.study.json_text import parse_object
from flows.study.manifest import MANIFEST_NAME
from flows.study.names import NAME_RULE, did_you_mean, is_name, path_fault

_MOST_ENTRIES = 10_000
_LONGEST_TEXT = 17 * 1024 * 1024
_SHOWN = 5
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)

State = Literal["complete", "waiting", "broken"]


@dataclass(frozen=True)
class Arrival:
    """One entry of the inbox.

    ``files`` maps payload paths (a bag's ``data/`` taken off) to SHA-256, ``file_paths`` to where they lie; both are filled where the
    content was verified, like ``package_sha256``, ``received_at`` and, as far as acquisition.json can be read, ``acquisition_name`` and
    ``declared_site``. That is every complete package, and a broken one only if its folder is the trouble (a site nobody knows).
    ``unnamed`` says why a complete package has no ``acquisition_name``. ``newest_mtime`` is the last change seen in a waiting package.
    ``site`` is empty for what lies in the inbox itself and ``package`` for a site folder as a whole.
    """

    site: str
    package: str
    path: Path
    state: State
    reason: str = ""
    package_sha256: str | None = None
    received_at: datetime | None = None
    files: Mapping[str, str] = field(default_factory=dict)
    file_paths: Mapping[str, Path] = field(default_factory=dict)
    acquisition_name: str | None = None
    declared_site: str | None = None
    newest_mtime: datetime | None = None
    unnamed: str = ""


def scan(inbox: Path, sites: Collection[str]) -> list[Arrival]:
    """Return every entry of the inbox, sorted by site and package.

    Hashes every listed file. Raises InputError when there is no inbox: an unmounted disk must not look like an empty one.
    """
    try:
        entries = _entries(inbox)
    except (FileNotFoundError, NotADirectoryError):
        problem = "there is no such folder"
        raise InputError(problem, file=str(inbox), remedy="Make it (or mount it); sites upload to inbox/<site>/<package>.") from None
    except OSError as failure:
        raise explained(failure, str(inbox)) from None
    found: list[Arrival] = []
    for entry in entries:
        if not entry.is_dir(follow_symlinks=False):
            found.append(_stray("", entry, "Move it into inbox/<site>/<package>/."))
        else:
            found += _scan_site(inbox, entry, sites)
    return sorted(found, key=lambda arrival: (arrival.site, arrival.package))


def scan_package(path: Path, site: str) -> Arrival:
    """Return the one package at ``path`` as if it had come from ``site``."""
    package = shown(path.name)
    if path_fault(path.name) is not None:
        refusal = InputError("the folder's name cannot be used", file=package, remedy="Use letters, digits, . _ - in the name.")
        return Arrival(site, package, path, "broken", str(refusal))
    try:
        entries = dict(_walk(path))
        if checksums.CHECKSUMS_NAME not in entries:
            return _waiting(path, site, package, entries)
        return _verified(path, site, package, entries)
    except InputError as refusal:
        return Arrival(site, package, path, "broken", str(refusal))


def _scan_site(inbox: Path, site: os.DirEntry[str], sites: Collection[str]) -> list[Arrival]:
    name = shown(site.name)
    try:
        entries = _entries(Path(site.path))
    except OSError as failure:
        return [Arrival(name, "", Path(site.path), "broken", str(explained(failure, site.name)))]
    if site.name not in sites:
        problem = "the study protocol knows no such site"
        refusal = InputError(problem, file=f"{inbox.name}/{name}", remedy=did_you_mean(site.name, sites))
        packages = [replace(arrival, state="broken", reason=str(refusal)) for arrival in _scan_packages(name, entries)]
        return packages or [Arrival(name, "", Path(site.path), "broken", str(refusal))]
    return _scan_packages(name, entries)


def _scan_packages(site: str, entries: list[os.DirEntry[str]]) -> list[Arrival]:
    return [
        scan_package(Path(entry.path), site)
        if entry.is_dir(follow_symlinks=False)
        else _stray(site, entry, "Put it into a package folder, or take it away.")
        for entry in entries
    ]


def _stray(site: str, entry: os.DirEntry[str], remedy: str) -> Arrival:
    name = shown(entry.name)
    problem = "is a link, and links are not followed" if entry.is_symlink() else "is no folder, and packages are folders"
    return Arrival(site, name, Path(entry.path), "broken", str(InputError(problem, file=name, remedy=remedy)))


def _entries(folder: Path) -> list[os.DirEntry[str]]:
    with os.scandir(folder) as entries:
        return sorted(entries, key=lambda entry: entry.name)


def _walk(package: Path) -> Iterator[tuple[str, os.stat_result]]:
    """Yield (relative path, status) of everything in the package; folders end in a slash; links are yielded, never followed."""
    pending, count = [""], 0
    while pending:
        folder = pending.pop()
        try:
            entries = _entries(package / folder)
            statuses = [entry.stat(follow_symlinks=False) for entry in entries]
            own_status = (package / folder).lstat()
        except OSError as failure:
            raise explained(failure, folder.rstrip("/") or package.name) from None
        yield folder or "./", own_status
        for entry, status in zip(entries, statuses, strict=True):
            count += 1
            if count > _MOST_ENTRIES:
                problem = f"holds more than {_MOST_ENTRIES} entries"
                raise InputError(problem, file=shown(package.name), remedy="A package holds one acquisition.")
            if stat.S_ISDIR(status.st_mode):
                pending.append(f"{folder}{entry.name}/")
            else:
                yield f"{folder}{entry.name}", status


def _waiting(path: Path, site: str, package: str, entries: Mapping[str, os.stat_result]) -> Arrival:
    others = [name for name in entries if name.casefold().startswith("manifest") and name.casefold().endswith(".txt")]
    hint = f" ({shown(others[0])} is not it)" if others else ""
    newest = max(status.st_mtime_ns for status in entries.values())
    return Arrival(site, package, path, "waiting", f"no {checksums.CHECKSUMS_NAME} yet{hint}", newest_mtime=_instant(newest, package))


def _verified(path: Path, site: str, package: str, entries: Mapping[str, os.stat_result]) -> Arrival:
    names = [name for name in entries if not name.endswith("/")]
    for name in names:
        if not stat.S_ISREG(entries[name].st_mode):
            raise not_a_file(name)
    prefix = checksums.BAG_PAYLOAD if checksums.BAG_DECLARATION in entries else ""
    listed = _listed(path, prefix, names)
    payload = [name for name in names if name.startswith(prefix) and name != checksums.CHECKSUMS_NAME]
    _refuse_differences(path, listed, payload)
    files = {name.removeprefix(prefix): digest for name, digest in sorted(listed.items())}
    if MANIFEST_NAME not in files:
        problem = "is not in the package"
        remedy = "Add it and list it." if prefix or not any(name.endswith(f"/{MANIFEST_NAME}") for name in files) else _WRONG_PLACE
        raise InputError(problem, file=MANIFEST_NAME, remedy=remedy)
    acquisition_name, declared_site, unnamed = _declared(_read(path, f"{prefix}{MANIFEST_NAME}"))
    return Arrival(
        site,
        package,
        path,
        "complete",
        package_sha256=checksums.package_sha256(files),
        received_at=_instant(entries[checksums.CHECKSUMS_NAME].st_mtime_ns, checksums.CHECKSUMS_NAME),
        files=files,
        file_paths={name: path / f"{prefix}{name}" for name in files},
        acquisition_name=acquisition_name,
        declared_site=declared_site,
        unnamed=unnamed,
    )


_WRONG_PLACE = f"It lies at the top of the package, or under data/ of a bag that has {checksums.BAG_DECLARATION}."


def _listed(path: Path, prefix: str, names: Collection[str]) -> dict[str, str]:
    """Return the payload as listed; escaped paths are put right, and those of a bag outside ``data/`` refused."""
    listed = checksums.parsed_checksums(_read(path, checksums.CHECKSUMS_NAME))
    present = set(names)
    right = {
        name if name in present or checksums.without_escapes(name) not in present else checksums.without_escapes(name): digest
        for name, digest in listed.items()
    }
    for name in right:
        if not name.startswith(prefix):
            problem = f"lists {name}, which is outside {prefix}"
            raise InputError(problem, file=checksums.CHECKSUMS_NAME, remedy="A bag's payload manifest lists what is under data/.")
    return right


def _refuse_differences(path: Path, listed: Mapping[str, str], payload: Collection[str]) -> None:
    """Raise InputError unless ``payload`` is exactly what is listed, byte for byte."""
    problems = [
        InputError(f"is not listed in {checksums.CHECKSUMS_NAME}", file=shown(name), remedy="List it, or take it away.")
        for name in sorted(set(payload) - set(listed))
    ]
    twins = checksums.twin_paths(sorted(payload))
    if twins is not None:
        problem = f"is the same file as {shown(twins[0])} on many disks"
        problems.append(InputError(problem, file=shown(twins[1]), remedy="Give the two different names."))
    for name, digest in sorted(listed.items()):
        if name not in payload:
            remedy = did_you_mean(name, map(shown, set(payload) - set(listed))) or "Send it, then the checksums again."
            problems.append(InputError("is listed but missing", file=name, remedy=remedy))
        elif not problems and _digest(path, name) != digest:
            problem = "does not have the listed SHA-256: it was altered or cut"
            problems.append(InputError(problem, file=name, remedy="Send it again, then the checksums."))
    if problems:
        raise _gathered(problems)


def _gathered(problems: list[InputError]) -> InputError:
    first, *others = problems
    if not others:
        return first
    rest = "; ".join(f"{other.file} {other.problem}" for other in others[:_SHOWN])
    more = f" and {len(others) - _SHOWN} more" if len(others) > _SHOWN else ""
    return InputError(first.problem, file=first.file, value=first.value, remedy=f"{first.remedy} Besides: {rest}{more}.".strip())


def _digest(package: Path, name: str) -> str:
    try:
        with open_inside(package, name) as handle:
            return checksums.content_sha256(handle)
    except OSError as failure:
        raise explained(failure, name) from None


def _read(package: Path, name: str) -> bytes:
    try:
        with open_inside(package, name) as handle:
            return handle.read(_LONGEST_TEXT)
    except OSError as failure:
        raise explained(failure, name) from None


def _declared(content: bytes) -> tuple[str | None, str | None, str]:
    """Return acquisition and site as declared, and what keeps the acquisition's name from being read; the rest is for its own reader."""
    try:
        data = parse_object(content, file=MANIFEST_NAME)
    except InputError as refusal:
        return None, None, str(refusal)
    acquisition, site = (
        value if isinstance(value, str) and is_name(value) else None for value in (data.get("acquisition"), data.get("site"))
    )
    if acquisition is not None:
        return acquisition, site, ""
    problem = "is missing" if data.get("acquisition") is None else "is not a name that can be used"
    unnamed = InputError(problem, file=MANIFEST_NAME, field="acquisition", value=data.get("acquisition"), remedy=f"Use {NAME_RULE}.")
    return None, site, str(unnamed)


def _instant(nanoseconds: int, name: str) -> datetime:
    try:
        return _EPOCH + timedelta(microseconds=nanoseconds // 1000)
    except OverflowError:
        problem = "carries a modification time no calendar holds"
        raise InputError(problem, file=shown(name), remedy="Set the sender's clock and send it again.") from None
