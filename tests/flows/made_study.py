"""Small studies for tests of the night: packages whose outcome a note decides, and what a study looks like from outside."""

import hashlib
import json
import os
from concurrent.futures import Future
from datetime import UTC, datetime, timedelta

from flows.reports.views import acquisition_page

SENT_AT = datetime(2026, 3, 5, 21, 0, 0, 250000, tzinfo=UTC)
PROTOCOL = '[study]\nname = "tarn"\nversion = "1"\n\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n\n[sites.weir]\ntimezone = "UTC"\n'


def make_study(folder, protocol=PROTOCOL):
    """An empty study."""
    (folder / "inbox").mkdir(parents=True)
    (folder / "protocol.toml").write_text(protocol)
    return folder


def send(study, package, acquisition=None, *, site="harbour", note="fine", days=0, visit="baseline", complete=True, **signals):
    """Upload a package; the note says what the stand-in for the assessment does with it."""
    folder = study / "inbox" / site / package
    folder.mkdir(parents=True, exist_ok=True)
    acquisition = acquisition or package
    declared = {"site": site, "acquisition": acquisition, "subject": acquisition.rsplit("-", 1)[0], "visit": visit}
    declared |= {"recorded_at": "2026-03-04T09:12:00+01:00"}
    files = {"acquisition.json": json.dumps(declared), "note.txt": note} | signals
    for name, text in files.items():
        (folder / name).write_text(text)
    if complete:
        lines = [f"{hashlib.sha256(text.encode()).hexdigest()}  {name}\n" for name, text in sorted(files.items())]
        (folder / "manifest-sha256.txt").write_text("".join(lines))
    sent = (SENT_AT + timedelta(days=days)).timestamp()
    for path in (*folder.iterdir(), folder):
        os.utime(path, (sent, sent))
    return folder


class InProcess:
    """Workers without children: for tests of what the night does with outcomes."""

    def __init__(self, _number, _time_out_s, work):
        self._work = work

    def __enter__(self):
        return self

    def __exit__(self, *_exception):
        pass

    def submit(self, job):
        future = Future()
        future.set_result(self._work(job))
        return future

    def outcome(self, _job, future):
        return future.result()


def plain_report(folder, night, acquisitions):
    """A report of a few words, that names the release as the real one does."""
    folder.mkdir()
    sites = [f"{site.site} {site.total} {site.seen_again}" for site in night.sites]
    (folder / "index.html").write_text(f"{night.release} {night.received} {sites}")
    for view in acquisitions:
        page = folder / acquisition_page(view.row["acquisition"])
        page.parent.mkdir(exist_ok=True)
        page.write_text(f"{night.release} {view.evidence} {len(view.runs)} {len(view.indices)}")


def published(study):
    """Everything under published/ with its bytes; links as their targets."""
    root = study / "published"
    links = {path: f"-> {path.readlink()}" for path in root.iterdir() if path.is_symlink()}
    files = {path: path.read_bytes() for path in root.rglob("*") if path.is_file() and not set(path.parents) & set(links)}
    return {path.relative_to(root).as_posix(): content for path, content in (files | links).items()}


def times(study):
    """The times of change of everything under published/, and of the folder itself."""
    root = study / "published"
    return {path: path.lstat().st_mtime_ns for path in (root, *root.rglob("*"))}
