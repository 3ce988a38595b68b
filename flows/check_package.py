"""Assess one package folder where it lies, without a study: for a look before sending."""

from __future__ import annotations

from pathlib import Path

from flows.assess import Assessment, assess
from flows.errors import InputError
from flows.intake.arrival import scan_package
from flows.study.manifest import MANIFEST_NAME, read_manifest
from flows.study.protocol import bare_protocol


def check_package(path: Path) -> Assessment:
    """Return the assessment of the package at ``path`` under a protocol of defaults.

    Raises InputError when the package is incomplete, altered or cannot be read.
    """
    arrival = scan_package(path, site="")
    if arrival.state == "waiting":
        problem = "has no manifest-sha256.txt yet, so it is still arriving"
        raise InputError(problem, file=str(path), remedy="Write the manifest last, when every other file is in place.")
    if arrival.state == "broken":
        problem = "cannot be taken in"
        raise InputError(problem, file=str(path), remedy=arrival.reason)
    text = arrival.file_paths[MANIFEST_NAME].read_bytes()
    manifest = read_manifest(text, file=MANIFEST_NAME, protocol=None, files=arrival.files)
    return assess(arrival.file_paths, manifest, bare_protocol(manifest.study, manifest.site))
