"""The orchestration's server for a study that is served: on this machine only, its database in the study's store.

Where it listens stands in the store. So a night started by hand uses it too, and a service that starts again finds the server that a
killed one left behind, whose running night may still need it.
"""

from __future__ import annotations

import json
import os
import signal
import socket
import subprocess
import sys
import time
import urllib.request
from contextlib import contextmanager
from typing import TYPE_CHECKING

from flows.intake.durable import write_text

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

_START_S = 180.0
_STOP_S = 20.0


@contextmanager
def flow_server(store: Path) -> Iterator[str]:
    """Yield the address of a running server, started unless one runs; it is stopped when the block ends, whoever started it.

    Raises RuntimeError when it does not start.
    """
    note = _note(store)
    url = live_server(store)
    if url is None:
        url = _started(store)
    try:
        yield url
    finally:
        _stop(int(json.loads(note.read_text(encoding="utf-8"))["process"]))
        note.unlink(missing_ok=True)


def live_server(store: Path) -> str | None:
    """Return the address of the study's server if it answers; None otherwise."""
    try:
        url = str(json.loads(_note(store).read_text(encoding="utf-8"))["url"])
    except (OSError, ValueError, KeyError, TypeError):
        return None
    return url if _answers(url) else None


def _started(store: Path) -> str:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = int(probe.getsockname()[1])
    url = f"http://127.0.0.1:{port}/api"
    command = [sys.executable, "-m", "prefect", "server", "start", "--host", "127.0.0.1", "--port", str(port)]
    # A session of its own: what a terminal sends to the service must not reach the server before the service has let go of it.
    server = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, start_new_session=True)  # noqa: S603
    write_text(_note(store), json.dumps({"url": url, "process": server.pid}))
    until = time.monotonic() + _START_S
    while not _answers(url):
        if server.poll() is not None or time.monotonic() > until:
            _stop(server.pid)
            message = "the orchestration's server did not start"
            raise RuntimeError(message)
        time.sleep(0.5)
    return url


def _answers(url: str) -> bool:
    try:
        with urllib.request.urlopen(f"{url}/health", timeout=2.0) as answer:  # noqa: S310  (our own address on this machine)
            return bool(answer.status == 200)
    except (OSError, ValueError):
        return False


def _stop(process: int) -> None:
    """End the server if the process is one still: ids are used again."""
    until = time.monotonic() + _STOP_S
    for kind in (signal.SIGTERM, signal.SIGKILL):
        while _is_server(process):
            os.kill(process, kind)
            if time.monotonic() > until:
                break
            _reap(process)
            time.sleep(0.2)


def _is_server(process: int) -> bool:
    try:
        with open(f"/proc/{process}/cmdline", "rb") as handle:  # noqa: PTH123  (a page of the kernel)
            return b"prefect\0server\0start" in handle.read()
    except OSError:
        return False


def _reap(process: int) -> None:
    """Take notice of a child's end; one that somebody else started is not ours to wait for."""
    try:
        os.waitpid(process, os.WNOHANG)
    except ChildProcessError:
        return


def _note(store: Path) -> Path:
    return store / "prefect" / "server.json"
