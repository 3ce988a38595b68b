"""What an assessment stands on beside the package itself: with the package's sum it is the key the result is kept under."""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping


@dataclass(frozen=True, slots=True)
class Basis:
    """A protocol, the revisions of all checks and indices, and a version of the software."""

    protocol_version: str
    protocol_sha256: str
    revisions_sha256: str
    software_version: str

    def key(self, site: str, package_sha256: str) -> str:
        """Return the key, 64 hexadecimal digits, of the assessment of a site's package on this basis."""
        parts = [site, package_sha256, self.protocol_sha256, self.revisions_sha256, self.software_version]
        return hashlib.sha256(json.dumps(parts).encode()).hexdigest()


def revisions_sha256(revisions: Mapping[str, int]) -> str:
    """Return the sum over the revision of each check and index by name, whatever their order."""
    return hashlib.sha256(json.dumps(sorted(revisions.items())).encode()).hexdigest()
