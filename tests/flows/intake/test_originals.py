"""What was kept is byte for byte what arrived, stays read only, and rot is found."""

import stat

import pytest

from flows.errors import InputError
from flows.intake.arrival import scan_package
from flows.intake.originals import Originals


@pytest.fixture
def kept(tmp_path, upload):
    arrival = scan_package(upload(bag=True), "harbour")
    originals = Originals(tmp_path / "store")
    originals.keep(arrival)
    return originals, arrival


def test_every_file_is_kept_under_its_hash_and_read_only(kept, tmp_path):
    originals, arrival = kept
    files = originals.files(arrival.package_sha256)
    assert {name: path.name for name, path in files.items()} == arrival.files
    for name, path in files.items():
        assert path.read_bytes() == arrival.file_paths[name].read_bytes()
        assert path.parent.name == path.name[:2]
        assert stat.S_IMODE(path.stat().st_mode) & 0o222 == 0
    assert originals.digests(arrival.package_sha256) == dict(arrival.files)
    assert originals.packages() == [arrival.package_sha256]
    assert originals.verify() == []
    assert {path.name for path in (tmp_path / "store").iterdir()} == {"objects", "packages"}


def test_keeping_again_writes_nothing(kept, tmp_path):
    originals, arrival = kept
    before = {path: path.stat().st_mtime_ns for path in (tmp_path / "store").rglob("*")}
    originals.keep(arrival)
    assert {path: path.stat().st_mtime_ns for path in (tmp_path / "store").rglob("*")} == before


def test_the_original_outlives_the_inbox(kept):
    originals, arrival = kept
    for path in arrival.file_paths.values():
        path.unlink()
    assert originals.verify(arrival.package_sha256) == []


def test_a_file_that_changed_since_the_scan_is_not_kept(tmp_path, upload):
    arrival = scan_package(upload(), "harbour")
    arrival.file_paths["rest-1.csv"].write_bytes(b"other")
    originals = Originals(tmp_path / "store")
    with pytest.raises(InputError, match=r"rest-1.csv: has changed since it was scanned"):
        originals.keep(arrival)
    assert originals.packages() == []
    assert not (tmp_path / "store" / "objects" / arrival.files["rest-1.csv"][:2] / arrival.files["rest-1.csv"]).exists()


def test_a_file_swapped_for_a_link_since_the_scan_is_not_kept(tmp_path, upload):
    arrival = scan_package(upload(), "harbour")
    path = arrival.file_paths["rest-1.csv"]
    path.rename(tmp_path / "elsewhere")
    path.symlink_to(tmp_path / "elsewhere")
    with pytest.raises(InputError, match="link"):
        Originals(tmp_path / "store").keep(arrival)


def test_what_was_not_verified_cannot_be_kept(tmp_path, upload):
    arrival = scan_package(upload(listed=""), "harbour")
    with pytest.raises(ValueError, match="not verified"):
        Originals(tmp_path / "store").keep(arrival)


def test_rot_and_loss_are_found_and_healed_by_keeping_again(kept):
    originals, arrival = kept
    files = originals.files(arrival.package_sha256)
    rotten, lost = files["rest-1.csv"], files["acquisition.json"]
    rotten.chmod(0o644)
    rotten.write_bytes(b"t,p\n0,9\n")
    lost.unlink()
    found = originals.verify()
    assert len(found) == 2
    assert any("rest-1.csv" in one and "rotted" in one for one in found)
    assert any("acquisition.json" in one and "missing" in one for one in found)
    originals.keep(arrival)
    assert originals.verify() == []


@pytest.mark.parametrize("content", ["", "[]", "{}", '{"files": 3}', "\udcff"])
def test_a_damaged_listing_is_an_error_with_a_remedy(kept, tmp_path, content):
    originals, arrival = kept
    listing = tmp_path / "store" / "packages" / f"{arrival.package_sha256}.json"
    listing.write_bytes(content.encode("utf-8", "surrogateescape"))
    with pytest.raises(InputError, match="damaged"):
        originals.files(arrival.package_sha256)
    assert len(originals.verify()) == 1


def test_an_edited_listing_is_found(kept, tmp_path):
    originals, arrival = kept
    listing = tmp_path / "store" / "packages" / f"{arrival.package_sha256}.json"
    listing.write_text(listing.read_text().replace("rest-1.csv", "rest-2.csv"))
    assert any("is not the one it was kept with" in one for one in originals.verify())


def test_an_unknown_package_is_an_error_and_a_path_is_no_hash(kept):
    originals, _ = kept
    with pytest.raises(InputError, match="no such package"):
        originals.files("0" * 64)
    with pytest.raises(ValueError, match="no SHA-256"):
        originals.files("../../etc/hostname")
