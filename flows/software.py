"""Which software this is: its version, and the revision of each check and index."""

from __future__ import annotations

from importlib.metadata import PackageNotFoundError, version


def software_version() -> str:
    """Return the version of the installed software; a source tree that was not installed has none and says so."""
    try:
        return version("beatgate")
    except PackageNotFoundError:
        return "0+not-installed"


def revisions() -> dict[str, int]:
    """Return the revision of each check and each index by name; of an index with several estimators the sum, which rises with each."""
    from checks import ALL as CHECKS  # noqa: PLC0415  (they bring scipy along)
    from metrics.indices import ALL as INDICES  # noqa: PLC0415

    found = {check.name: check.revision for check in CHECKS}
    for index in INDICES:
        found[index.name] = found.get(index.name, 0) + index.revision
    return found
