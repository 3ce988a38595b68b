"""Every verified file kept for good under the SHA-256 of its content: written once, read only, never compressed."""

from __future__ import annotations

import hashlib
import json
import re
from pathlib import Path
from typing import BinaryIO

from flows.errors import InputError
from flows.intake import durable
from flows.intake.arrival import Arrival
from flows.intake.checksums import content_sha256
from flows.intake.plain_files import open_inside

_CHUNK_BYTES = 1024 * 1024
_DIGEST = re.compile(r"[0-9a-f]{64}")
_REMEDY = "Bring the store back from a back-up; the inbox may still hold the package."


class Originals:
    """The kept files under ``store``: ``objects/<first two>/<sha256>``, and ``packages/<package sha256>.json`` for what was one package."""

    def __init__(self, store: Path) -> None:
        """Take the store's folder; nothing is made before something is kept."""
        self._objects, self._packages = store / "objects", store / "packages"

    def keep(self, arrival: Arrival) -> None:
        """Copy every file of a verified arrival, hashing while copying; the listing is written last, so a listed package is whole.

        A file that is kept already is read again and copied anew if its content has rotted. Raises InputError, keeping nothing under a
        false name, when a file no longer has the content it had when it was scanned; ValueError for an arrival that was not verified.
        """
        if arrival.package_sha256 is None:
            message = f"{arrival.site}/{arrival.package} was not verified"
            raise ValueError(message)
        for name, digest in arrival.files.items():
            kept = self._object(digest)
            if kept.is_file() and _file_sha256(kept) == digest:
                continue
            inside = arrival.file_paths[name].relative_to(arrival.path).as_posix()
            with open_inside(arrival.path, inside) as source, durable.new_file(kept, read_only=True) as target:
                if _copied_sha256(source, target) != digest:
                    problem = "has changed since it was scanned"
                    raise InputError(problem, file=inside, remedy="Leave a package alone once its checksums are written.")
        listing = json.dumps({"files": dict(sorted(arrival.files.items()))}, indent=1, ensure_ascii=False) + "\n"
        path = self._listing(arrival.package_sha256)
        if not path.is_file() or path.read_text(encoding="utf-8") != listing:
            durable.write_text(path, listing)

    def digests(self, package_sha256: str) -> dict[str, str]:
        """Return payload path -> SHA-256 of a kept package; raises InputError for one that was never kept or whose listing is damaged."""
        path = self._listing(package_sha256)
        try:
            files = json.loads(path.read_bytes())["files"]
            return {str(name): str(digest) for name, digest in files.items()}
        except FileNotFoundError:
            problem = "no such package was kept"
        except (ValueError, KeyError, TypeError, AttributeError):
            problem = "the listing of a kept package is damaged"
        raise InputError(problem, file=str(path), value=package_sha256, remedy=_REMEDY)

    def files(self, package_sha256: str) -> dict[str, Path]:
        """Return payload path -> kept file; raises InputError as `digests` does."""
        return {name: self._object(digest) for name, digest in self.digests(package_sha256).items()}

    def packages(self) -> list[str]:
        """Return the SHA-256 of every kept package, sorted."""
        return sorted(path.stem for path in self._packages.glob("*.json") if _DIGEST.fullmatch(path.stem))

    def verify(self, package_sha256: str | None = None) -> list[str]:
        """Read everything kept of one package, or of all, again; return what is missing or has rotted as sentences, sorted."""
        found: set[str] = set()
        for package in self.packages() if package_sha256 is None else [package_sha256]:
            try:
                digests = self.digests(package)
            except InputError as damage:
                found.add(str(damage))
                continue
            listed = "".join(sorted(f"{digest}  {name}\n" for name, digest in digests.items()))
            if hashlib.sha256(listed.encode()).hexdigest() != package:
                found.add(f"the listing of package {package} is not the one it was kept with. {_REMEDY}")
            for name, digest in digests.items():
                kept = self._object(digest)
                if not kept.is_file():
                    found.add(f"{name} of package {package} is missing: {digest}. {_REMEDY}")
                elif _file_sha256(kept) != digest:
                    found.add(f"{name} of package {package} has rotted: {digest}. {_REMEDY}")
        return sorted(found)

    def _object(self, digest: str) -> Path:
        if _DIGEST.fullmatch(digest) is None:
            message = f"{digest!r} is no SHA-256"
            raise ValueError(message)
        return self._objects / digest[:2] / digest

    def _listing(self, package_sha256: str) -> Path:
        if _DIGEST.fullmatch(package_sha256) is None:
            message = f"{package_sha256!r} is no SHA-256"
            raise ValueError(message)
        return self._packages / f"{package_sha256}.json"


def _file_sha256(path: Path) -> str:
    with path.open("rb") as handle:
        return content_sha256(handle)


def _copied_sha256(source: BinaryIO, target: BinaryIO) -> str:
    hasher = hashlib.sha256()
    while chunk := source.read(_CHUNK_BYTES):
        hasher.update(chunk)
        target.write(chunk)
    return hasher.hexdigest()
