"""Child processes that assess packages: each may hang or die, and that costs its own package only.

A child imports what assessing needs and no more; the orchestration stays in the parent, which does all the writing. For its first job a
child started afresh would also run the parent's main module again, and with it the orchestration's imports: that is prevented.
"""

from __future__ import annotations

import hashlib
import os
import sys
import threading
from concurrent.futures import Future
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, field
from multiprocessing.context import SpawnContext, SpawnProcess
from types import ModuleType
from typing import TYPE_CHECKING, Any, Self

from flows.catalogue.evidence_files import packed
from flows.catalogue.outcome import Found, Outcome, Refused, Trouble
from flows.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from pathlib import Path

    from pebble import ProcessPool

    from flows.study.protocol import Protocol

TIME_OUT_S = 120.0
"""What one package may take; a large one takes some seconds. House default."""

TABLES = ("runs", "beats", "rejections", "indices", "changes", "measures", "channels")
_ONE_THREAD = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")


@dataclass(frozen=True)
class Job:
    """One package to assess: its site, its folder's name, the sum of its content, and where the bytes of each payload file lie.

    ``digests`` says what these bytes must be; ``damage`` is what stands in the way of reading them at all.
    """

    site: str
    package: str
    package_sha256: str
    files: Mapping[str, Path]
    protocol: Protocol
    digests: Mapping[str, str] = field(default_factory=dict)
    damage: str = ""


def assess_job(job: Job) -> Outcome:
    """Return what is found in the job's package; what the input or the program does wrong is part of the answer."""
    damage = job.damage or _damage(job)
    if damage:
        return Refused(Trouble.PROGRAM, f"the program could not assess this package: {damage}")
    try:
        return _assessed(job)
    except InputError as refusal:
        return Refused(Trouble.INPUT, str(refusal))
    except Exception as failure:  # noqa: BLE001  (one package must not stop the others)
        return Refused(Trouble.PROGRAM, f"the program could not assess this package: {type(failure).__name__}: {_placeless(failure, job)}")


def _damage(job: Job) -> str:
    """Return which kept files are no longer what was received, in words; what they would give must not be published."""
    changed = []
    for name, digest in sorted(job.digests.items()):
        try:
            with job.files[name].open("rb") as handle:
                if hashlib.file_digest(handle, "sha256").hexdigest() != digest:
                    changed.append(name)
        except OSError:
            changed.append(name)
    return f"the kept copy of {', '.join(changed)} is damaged" if changed else ""


def _placeless(failure: Exception, job: Job) -> str:
    """Return the message without the places of this machine: the same failure must read the same everywhere."""
    text = str(failure)
    for name, path in job.files.items():
        text = text.replace(str(path), name)
    return text


def _assessed(job: Job) -> Found:
    from flows.assess import assess  # noqa: PLC0415  (in the child, not in the parent)
    from flows.study.manifest import MANIFEST_NAME, read_manifest  # noqa: PLC0415

    if MANIFEST_NAME not in job.files:
        problem = "is not in the package"
        raise InputError(problem, file=MANIFEST_NAME, remedy="A package holds its description beside the signals.")
    text = job.files[MANIFEST_NAME].read_bytes()
    manifest = read_manifest(text, file=MANIFEST_NAME, protocol=job.protocol, site=job.site, files=job.files)
    assessment = assess(job.files, manifest, job.protocol)
    rows = {table: getattr(assessment, table) for table in TABLES}
    return Found(assessment.acquisition, rows, packed(assessment.evidence), manifest.recorded_at_text)


class Workers:
    """A few children that live for a night; one that hangs or dies is replaced. Use it in a with block."""

    def __init__(self, number: int, time_out_s: float = TIME_OUT_S, work: Callable[[Job], Outcome] = assess_job) -> None:
        """Take the number of children, the seconds one package may take, and what they do with a job."""
        self._number, self._time_out_s, self._work = number, time_out_s, work
        self._pool: ProcessPool | None = None
        self._lock = threading.Lock()

    def __enter__(self) -> Self:
        """Start nothing yet: the first job does."""
        return self

    def __exit__(self, *_exception: object) -> None:
        """Stop every child; jobs still waiting are dropped."""
        with self._lock:
            self._stop()

    def submit(self, job: Job) -> Future[Outcome]:
        """Queue a job and return its future, for `outcome`."""
        with self._lock:
            pool = self._pool if self._pool is not None and self._pool.active else self._started()
            future: Future[Outcome] = pool.schedule(self._work, args=(job,), timeout=self._time_out_s)
            return future

    def outcome(self, job: Job, future: Future[Outcome]) -> Outcome:
        """Wait for a job and return what became of it: a child that took too long or died is an answer too."""
        try:
            return self._answer(future)
        except BrokenProcessPool:
            # The children went away before any was known to hold this job: nothing is known against it, so it gets a child of its own.
            return self._alone(job)

    def _alone(self, job: Job) -> Outcome:
        with Workers(1, self._time_out_s, self._work) as alone:
            try:
                return alone._answer(alone.submit(job))
            except BrokenProcessPool as failure:
                return Refused(Trouble.DIED, f"the program could not assess this package: its process ended ({failure})")

    def _answer(self, future: Future[Outcome]) -> Outcome:
        from pebble import ProcessExpired  # noqa: PLC0415

        try:
            return future.result()
        except TimeoutError:
            return Refused(Trouble.TIME_OUT, f"the program could not assess this package within {self._time_out_s:g} s")
        except ProcessExpired as end:
            return Refused(Trouble.DIED, f"the program could not assess this package: its process ended with code {end.exitcode}")

    def _started(self) -> ProcessPool:
        from pebble import ProcessPool  # noqa: PLC0415

        self._stop()
        self._pool = ProcessPool(max_workers=self._number, initializer=_one_thread, context=_BareSpawn())
        return self._pool

    def _stop(self) -> None:
        if self._pool is not None:
            self._pool.stop()  # type: ignore[no-untyped-call]
            self._pool.join()
            self._pool = None


def _one_thread() -> None:
    """Let each child compute on one thread: there is a child a core, and sums do not depend on how they were split."""
    for name in _ONE_THREAD:
        os.environ[name] = "1"


class _BareProcess(SpawnProcess):
    """A child that is not told the parent's main module."""

    _launching = threading.Lock()

    @staticmethod
    def _Popen(process: Any) -> Any:  # noqa: ANN401, N802  (the name multiprocessing calls)
        from multiprocessing.popen_spawn_posix import Popen  # noqa: PLC0415

        with _BareProcess._launching:
            main = sys.modules["__main__"]
            sys.modules["__main__"] = ModuleType("__main__")
            try:
                return Popen(process)
            finally:
                sys.modules["__main__"] = main


class _BareSpawn(SpawnContext):
    """A context whose processes start bare."""

    Process = _BareProcess
