"""Packages as sites upload them, small enough to write by hand."""

import hashlib
import json
import os

import pytest

DECLARED = {"study": "tarn", "site": "harbour", "acquisition": "H-001-baseline"}


def digest(content):
    return hashlib.sha256(content).hexdigest()


@pytest.fixture
def upload(tmp_path):
    """Return a function that writes a package into tmp_path/inbox and returns its folder."""

    def write(package="p1", *, site="harbour", declared=None, files=None, listed=None, bag=False, received=1_700_000_000):
        folder = tmp_path / "inbox" / site / package
        payload = folder / "data" if bag else folder
        payload.mkdir(parents=True, exist_ok=True)
        contents = {"acquisition.json": json.dumps(DECLARED | {"site": site} | (declared or {})).encode(), "rest-1.csv": b"t,p\n0,1\n"}
        contents |= files or {}
        for name, content in contents.items():
            (payload / name).parent.mkdir(parents=True, exist_ok=True)
            (payload / name).write_bytes(content)
        prefix = "data/" if bag else ""
        if bag:
            (folder / "bagit.txt").write_text("BagIt-Version: 1.0\nTag-File-Character-Encoding: UTF-8\n")
        lines = listed if listed is not None else "".join(f"{digest(content)}  {prefix}{name}\n" for name, content in contents.items())
        manifest = folder / "manifest-sha256.txt"
        manifest.write_bytes(lines if isinstance(lines, bytes) else lines.encode())
        os.utime(manifest, (received, received))
        return folder

    return write
