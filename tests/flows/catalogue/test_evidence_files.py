"""Evidence beside the catalogue: the same bytes for the same evidence, and no silent rot."""

import pytest

from flows.catalogue import evidence_files
from flows.errors import InputError

KEY = "a" * 64


def test_evidence_comes_back_as_it_was(tmp_path):
    evidence = {"runs": [{"trace": [1.5, None, -0.1]}], "µ": "…"}
    content = evidence_files.packed(evidence)
    assert content == evidence_files.packed(dict(reversed(evidence.items())))
    sha256 = evidence_files.keep(tmp_path, KEY, content)
    (path,) = (tmp_path / "evidence").iterdir()
    before = path.stat().st_mtime_ns
    assert evidence_files.keep(tmp_path, KEY, content) == sha256
    assert path.stat().st_mtime_ns == before
    assert evidence_files.load(tmp_path, KEY, sha256) == evidence


def test_what_json_does_not_have_is_refused():
    with pytest.raises(ValueError, match="JSON compliant"):
        evidence_files.packed({"value": float("nan")})


def test_lost_and_changed_evidence_is_named(tmp_path):
    sha256 = evidence_files.keep(tmp_path, KEY, evidence_files.packed({}))
    evidence_files.keep(tmp_path, KEY, evidence_files.packed({"other": 1}))
    with pytest.raises(InputError, match="has changed since it was written"):
        evidence_files.load(tmp_path, KEY, sha256)
    with pytest.raises(InputError, match="is missing"):
        evidence_files.load(tmp_path, "b" * 64, sha256)
