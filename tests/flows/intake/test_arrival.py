"""Every way a package can lie in the inbox ends as whole, waiting or broken with a reason; nothing is changed, followed or skipped."""

import hashlib
import json
import os
import socket
import threading
from datetime import UTC, datetime

import pytest

from flows.errors import InputError
from flows.intake import arrival as arrival_module
from flows.intake.arrival import scan, scan_package
from flows.intake.checksums import package_sha256

SITES = ("harbour", "moor")


@pytest.fixture
def inbox(tmp_path):
    (tmp_path / "inbox").mkdir()
    return tmp_path / "inbox"


def only(inbox):
    (one,) = scan(inbox, SITES)
    return one


def relist(folder):
    """Write the checksums again over what lies in the folder now."""
    lines = [
        f"{hashlib.sha256(path.read_bytes()).hexdigest()}  {path.relative_to(folder).as_posix()}\n"
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name != "manifest-sha256.txt"
    ]
    (folder / "manifest-sha256.txt").write_text("".join(lines))


def test_a_whole_package_is_complete_with_its_hashes_and_name(inbox, upload):
    folder = upload()
    found = only(inbox)
    assert (found.site, found.package, found.state, found.reason) == ("harbour", "p1", "complete", "")
    assert found.acquisition_name == "H-001-baseline"
    assert found.declared_site == "harbour"
    assert found.received_at == datetime.fromtimestamp(1_700_000_000, UTC)
    assert set(found.files) == {"acquisition.json", "rest-1.csv"}
    assert found.file_paths["rest-1.csv"] == folder / "rest-1.csv"
    assert found.package_sha256 == package_sha256(found.files)


def test_the_same_content_has_the_same_hash_in_another_folder_and_as_a_bag(inbox, upload):
    upload("p1")
    upload("p2", received=1_700_000_500)
    upload("p3", bag=True)
    assert {one.state for one in scan(inbox, SITES)} == {"complete"}
    assert len({one.package_sha256 for one in scan(inbox, SITES)}) == 1


def test_a_bag_keeps_its_tag_files_out_and_its_payload_without_prefix(inbox, upload):
    folder = upload(bag=True)
    (folder / "bag-info.txt").write_text("Contact: none\n")
    (folder / "tagmanifest-sha256.txt").write_text("not read\n")
    found = only(inbox)
    assert found.state == "complete"
    assert set(found.files) == {"acquisition.json", "rest-1.csv"}
    assert found.file_paths["rest-1.csv"] == folder / "data" / "rest-1.csv"


def test_a_bag_may_not_list_outside_data_nor_hide_payload(inbox, upload):
    folder = upload(bag=True)
    listed = (folder / "manifest-sha256.txt").read_text()
    (folder / "data" / "extra.csv").write_text("x")
    assert "extra.csv: is not listed" in only(inbox).reason
    (folder / "data" / "extra.csv").unlink()
    (folder / "manifest-sha256.txt").write_text(listed + "0" * 64 + "  bagit.txt\n")
    assert "outside data/" in only(inbox).reason


def test_a_bag_with_escaped_names_is_understood(inbox, upload):
    folder = upload(bag=True, files={"100%.csv": b"x"})
    manifest = folder / "manifest-sha256.txt"
    manifest.write_text(manifest.read_text().replace("100%", "100%25"))
    assert only(inbox).state == "complete"
    assert "100%.csv" in only(inbox).files


@pytest.mark.parametrize(
    "rewrite",
    [
        pytest.param(lambda text: text.replace("\n", "\r\n"), id="crlf"),
        pytest.param(lambda text: "".join(line[:64].upper() + line[64:] + "\n" for line in text.splitlines()), id="upper-case"),
        pytest.param(lambda text: text.replace("  ", " *"), id="binary-marker"),
        pytest.param(lambda text: text.replace("  ", "\t"), id="tab"),
        pytest.param(lambda text: text + text, id="doubled-lines"),
        pytest.param(lambda text: text + "\n\n", id="blank-lines"),
        pytest.param(lambda text: text.rstrip("\n"), id="no-last-newline"),
        pytest.param(lambda text: text.replace("  ", "  ./"), id="dot-slash"),
        pytest.param(lambda text: "\ufeff" + text, id="byte-order-mark"),
        pytest.param(lambda text: "".join(reversed(text.splitlines(keepends=True))), id="other-order"),
    ],
)
def test_checksums_are_understood_as_common_tools_write_them(inbox, upload, rewrite):
    folder = upload()
    before = only(inbox).package_sha256
    manifest = folder / "manifest-sha256.txt"
    manifest.write_bytes(rewrite(manifest.read_text()).encode())
    assert only(inbox).state == "complete"
    assert only(inbox).package_sha256 == before


@pytest.mark.parametrize(
    ("listed", "words"),
    [
        ("", "lists no file"),
        ("\n\n", "lists no file"),
        ("abc  rest-1.csv\n", "line 1 is not a SHA-256 and a path"),
        ("0" * 64 + "\n", "line 1 is not"),
        ("0" * 64 + "  ../../secret\n", "leaves the package"),
        ("0" * 64 + "  /etc/hostname\n", "is absolute"),
        ("0" * 64 + "  a\\b\n", "backslash"),
        ("0" * 64 + "  a//b\n", "empty part"),
        ("0" * 64 + "  ././x\n", "empty part"),
        ("0" * 64 + "  a\x00b\n", "control character"),
        ("0" * 64 + "  " + "n" * 300 + "\n", "too long"),
        ("0" * 64 + "  manifest-sha256.txt\n", "lists manifest-sha256.txt itself"),
        ("0" * 64 + "  rest-1.csv\n" + "1" * 64 + "  rest-1.csv\n", "second, different SHA-256"),
        (b"\xff\xfe0\x000\x00", "not UTF-8"),
    ],
)
def test_checksums_that_cannot_be_trusted_break_the_package(inbox, upload, listed, words):
    upload(listed=listed)
    found = only(inbox)
    assert found.state == "broken"
    assert words in found.reason
    assert found.package_sha256 is None
    assert found.files == {}


def test_an_altered_a_missing_and_an_extra_file_are_named_with_a_remedy(inbox, upload):
    folder = upload()
    (folder / "rest-1.csv").write_bytes(b"t,p\n0,2\n")
    assert only(inbox).reason == ("rest-1.csv: does not have the listed SHA-256: it was altered or cut. Send it again, then the checksums.")
    (folder / "rest-1.csv").rename(folder / "rest_1.csv")
    reason = only(inbox).reason
    assert reason.startswith("rest_1.csv: is not listed in manifest-sha256.txt.")
    assert "rest-1.csv is listed but missing" in reason
    (folder / "rest_1.csv").unlink()
    assert "rest-1.csv: is listed but missing" in only(inbox).reason


def test_hidden_clutter_of_an_operating_system_is_not_passed_over(inbox, upload):
    (upload() / ".DS_Store").write_bytes(b"x")
    assert ".DS_Store: is not listed" in only(inbox).reason


def test_a_package_without_acquisition_json_is_broken(inbox, upload):
    folder = upload()
    (folder / "acquisition.json").rename(folder / "acquisition.jsn")
    relist(folder)
    assert only(inbox).reason.startswith("acquisition.json: is not in the package.")


def test_payload_under_data_without_the_declaration_of_a_bag_is_explained(inbox, upload):
    folder = upload(bag=True)
    (folder / "bagit.txt").unlink()
    assert "bagit.txt" in only(inbox).reason


@pytest.mark.parametrize("content", [b"{", b"[]", b"\xff", b'{"acquisition": 3}', b'{"acquisition": "../x"}'])
def test_an_unreadable_declaration_still_verifies_but_names_nothing(inbox, upload, content):
    upload(files={"acquisition.json": content})
    found = only(inbox)
    assert found.state == "complete"
    assert found.acquisition_name is None


def test_no_checksums_yet_is_waiting_with_the_last_change(inbox, upload):
    folder = upload()
    (folder / "manifest-sha256.txt").unlink()
    for path in (folder / "acquisition.json", folder / "rest-1.csv", folder):
        os.utime(path, (1_600_000_000, 1_600_000_000))
    os.utime(folder / "rest-1.csv", (1_600_000_100, 1_600_000_100))
    found = only(inbox)
    assert found.state == "waiting"
    assert found.newest_mtime == datetime.fromtimestamp(1_600_000_100, UTC)
    assert (found.package_sha256, found.received_at) == (None, None)


def test_an_empty_folder_waits_and_another_manifest_is_no_manifest(inbox):
    (inbox / "harbour" / "p1").mkdir(parents=True)
    assert only(inbox).state == "waiting"
    (inbox / "harbour" / "p1" / "manifest-md5.txt").write_text("x")
    assert "manifest-md5.txt is not it" in only(inbox).reason


def test_links_are_refused_wherever_they_stand_and_never_followed(inbox, upload, tmp_path):
    secret = tmp_path / "secret"
    secret.mkdir()
    (secret / "f").write_text("x")
    (inbox / "moor").symlink_to(secret)
    folder = upload()
    (inbox / "harbour" / "p2").symlink_to(folder)
    (folder / "rest-1.csv").unlink()
    (folder / "rest-1.csv").symlink_to(secret / "f")
    stray, p1, p2 = scan(inbox, SITES)
    assert (stray.site, stray.package, stray.state) == ("", "moor", "broken")
    assert "link" in stray.reason
    assert "rest-1.csv: is a link" in p1.reason
    assert (p2.package, p2.state) == ("p2", "broken")
    assert "link" in p2.reason


def test_a_folder_that_is_a_link_inside_a_package_is_refused(inbox, upload, tmp_path):
    folder = upload(files={"deep/x.csv": b"x"})
    (folder / "deep").rename(tmp_path / "deep")
    (folder / "deep").symlink_to(tmp_path / "deep")
    assert "deep: is a link" in only(inbox).reason


def test_checksums_that_are_a_link_are_refused(inbox, upload, tmp_path):
    manifest = upload() / "manifest-sha256.txt"
    manifest.rename(tmp_path / "m")
    manifest.symlink_to(tmp_path / "m")
    assert only(inbox).state == "broken"


def test_pipes_sockets_and_folders_in_a_files_place_do_not_stop_the_scan(inbox, upload):
    folder = upload()
    (folder / "rest-1.csv").unlink()
    os.mkfifo(folder / "rest-1.csv")
    done = threading.Event()
    result = []

    def look():
        result.append(only(inbox))
        done.set()

    threading.Thread(target=look, daemon=True).start()
    assert done.wait(10)
    assert "no regular file" in result[0].reason
    (folder / "rest-1.csv").unlink()
    (folder / "rest-1.csv").mkdir()
    assert "rest-1.csv: is listed but missing" in only(inbox).reason


def test_a_socket_is_refused(inbox, upload, monkeypatch):
    folder = upload()
    monkeypatch.chdir(folder)
    with socket.socket(socket.AF_UNIX) as listener:
        listener.bind("s")
        assert "s: is a link, a pipe, a device" in only(inbox).reason


def test_a_file_nobody_may_read_is_named_even_to_root(inbox, upload, monkeypatch):
    upload()
    real = os.open

    def guarded(path, *arguments, **options):
        if path == "rest-1.csv":
            raise PermissionError(13, "Permission denied")
        return real(path, *arguments, **options)

    monkeypatch.setattr(os, "open", guarded)
    assert "rest-1.csv: cannot be read: permission denied" in only(inbox).reason


def test_a_machine_without_handles_is_not_blamed_on_the_site(inbox, upload, monkeypatch):
    upload()

    def exhausted(*_, **__):
        raise OSError(24, "Too many open files")

    monkeypatch.setattr(os, "open", exhausted)
    with pytest.raises(OSError, match="Too many"):
        scan(inbox, SITES)


def test_a_folder_swapped_for_a_link_after_listing_leads_nowhere(inbox, upload, tmp_path, monkeypatch):
    folder = upload(files={"deep/x.csv": b"x"})
    real = arrival_module.checksums.parsed_checksums

    def swap(content):
        (folder / "deep").rename(tmp_path / "deep")
        (folder / "deep").symlink_to(tmp_path / "deep")
        return real(content)

    monkeypatch.setattr(arrival_module.checksums, "parsed_checksums", swap)
    assert "deep/x.csv: is a link" in only(inbox).reason


def test_stray_files_and_unknown_sites_are_reported(inbox, upload):
    (inbox / "note.txt").write_text("x")
    (inbox / "harbour").mkdir()
    (inbox / "harbour" / "loose.csv").write_text("x")
    upload("p9", site="harbor")
    (inbox / "quay").mkdir()
    found = {(one.site, one.package): one for one in scan(inbox, SITES)}
    assert set(found) == {("", "note.txt"), ("harbour", "loose.csv"), ("harbor", "p9"), ("quay", "")}
    assert {one.state for one in found.values()} == {"broken"}
    assert "Did you mean 'harbour'?" in found["harbor", "p9"].reason
    assert found["harbor", "p9"].package_sha256 is not None
    assert "Known here: harbour, moor." in found["quay", ""].reason


def test_two_names_that_are_one_file_elsewhere_are_refused(inbox, upload):
    folder = upload(files={"A.csv": b"1", "a.csv": b"2"})
    assert "is the same file as A.csv on many disks" in only(inbox).reason
    for name in ("A.csv", "a.csv"):
        (folder / name).unlink()
    (folder / "e\u0301.csv").write_text("1")
    (folder / "\u00e9.csv").write_text("2")
    relist(folder)
    assert "on many disks" in only(inbox).reason


def test_names_that_are_no_text_are_shown_escaped(inbox, upload):
    folder = upload()
    os.close(os.open(os.fsencode(folder) + b"/\xffbad\n.csv", os.O_CREAT | os.O_WRONLY))
    reason = only(inbox).reason
    assert r"\xffbad\n.csv: is not listed" in reason
    json.dumps(reason).encode()


def test_a_package_folder_with_an_unusable_name_is_broken(inbox):
    (inbox / "harbour").mkdir()
    os.mkdir(os.fsencode(inbox / "harbour") + b"/\xff")  # noqa: PTH102  (a Path cannot hold these bytes apart)
    found = only(inbox)
    assert (found.package, found.state) == (r"\xff", "broken")


def test_an_absurd_number_of_files_is_refused(inbox, upload, monkeypatch):
    monkeypatch.setattr(arrival_module, "_MOST_ENTRIES", 2)
    upload()
    assert "holds more than 2 entries" in only(inbox).reason


def test_no_inbox_is_an_error_not_an_empty_one(tmp_path):
    with pytest.raises(InputError, match="there is no such folder"):
        scan(tmp_path / "inbox", SITES)


def test_scanning_is_ordered_and_changes_nothing(inbox, upload):
    upload("b")
    upload("a")
    upload("c", site="moor")
    before = {path: path.lstat().st_mtime_ns for path in inbox.rglob("*")}
    found = scan(inbox, SITES)
    assert [(one.site, one.package) for one in found] == [("harbour", "a"), ("harbour", "b"), ("moor", "c")]
    assert scan(inbox, SITES) == found
    assert {path: path.lstat().st_mtime_ns for path in inbox.rglob("*")} == before


@pytest.mark.parametrize("cut", range(0, 159, 7))
def test_a_package_cut_at_any_point_is_never_complete(inbox, upload, cut):
    folder = upload()
    manifest = folder / "manifest-sha256.txt"
    whole = manifest.read_bytes()
    assert cut < len(whole.rstrip(b"\n"))
    manifest.write_bytes(whole[:cut])
    assert only(inbox).state == "broken"


def test_one_package_can_be_looked_at_alone(upload):
    folder = upload()
    assert scan_package(folder, "harbour").state == "complete"
