"""Opening a study for a night: one night at a time, on an up-to-date catalogue, with nothing left lying about by a dead one."""

from __future__ import annotations

import fcntl
import os
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager, suppress
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from sqlalchemy.exc import SQLAlchemyError

from flows.catalogue import store
from flows.catalogue.basis import Basis, revisions_sha256
from flows.catalogue.engine import migrate, open_catalogue, writing
from flows.catalogue.outcome import Outcome
from flows.errors import InputError
from flows.intake.durable import make_folder, sweep
from flows.intake.originals import Originals
from flows.publish.refusal import GateRefused
from flows.software import revisions, software_version
from flows.study.protocol import lock_breaches, read_protocol
from flows.workers import TIME_OUT_S, Job, Workers, assess_job

if TYPE_CHECKING:
    from pathlib import Path

    from sqlalchemy import Engine

    from flows.study.protocol import Protocol

URL_VARIABLE = "BEATGATE_DATABASE_URL"
LOCK_NAME = "night.lock"


class AlreadyRunning(InputError):  # noqa: N818  (an outcome with a remedy, not a fault of the program)
    """Another night holds the study."""


@dataclass(frozen=True)
class Options:
    """What a night is told beside its study.

    ``database_url`` None takes BEATGATE_DATABASE_URL, and without that the store's own file. ``retry_failed`` assesses again what took
    too long, died or made the program fail. ``release`` names the release instead of its content. ``work`` is what a child does.
    """

    database_url: str | None = None
    workers: int = field(default_factory=lambda: len(os.sched_getaffinity(0)))
    time_out_s: float = TIME_OUT_S
    retry_failed: bool = False
    release: str | None = None
    work: Callable[[Job], Outcome] = assess_job


@dataclass
class Night:
    """A study while a night holds it. ``assessed`` counts tonight's assessments, ``problems`` is what people should look at."""

    study: Path
    options: Options
    protocol: Protocol
    basis: Basis
    engine: Engine
    originals: Originals
    workers: Workers
    number: int
    assessed: int = 0
    problems: list[str] = field(default_factory=list)
    tried: set[tuple[str, str]] = field(default_factory=set)

    @property
    def store(self) -> Path:
        """The folder the program owns."""
        return self.study / "store"


@contextmanager
def open_night(study: Path, options: Options) -> Iterator[Night]:
    """Yield the study, held by this night alone until the block ends; how it ended is recorded.

    Raises AlreadyRunning while another night holds it, InputError for a protocol that cannot be used, and what the block raises.
    """
    protocol = read_protocol(study)
    stands = revisions()
    breaches = lock_breaches(protocol, stands)
    if breaches:
        problem = f"the study is locked to other revisions: {'; '.join(breaches)}"
        raise InputError(problem, file="protocol.toml", field="study.lock", remedy="Use the software it was locked at, or change the lock.")
    basis = Basis(protocol.study.version, protocol.sha256, revisions_sha256(stands), software_version())
    with ExitStack() as stack:
        stack.enter_context(_held(study / "store"))
        sweep(study / "store")
        sweep(study / "published")
        engine = open_catalogue(study / "store", options.database_url or os.environ.get(URL_VARIABLE))
        stack.callback(engine.dispose)
        migrate(engine)
        with writing(engine) as session:
            number = store.begin_night(session, os.getpid(), at=datetime.now(UTC))
            store.put_basis(session, basis, at=datetime.now(UTC))
        workers = stack.enter_context(Workers(options.workers, options.time_out_s, options.work))
        night = Night(study, options, protocol, basis, engine, Originals(study / "store"), workers, number)
        with _recorded(night):
            yield night


def is_held(folder: Path) -> bool:
    """Say whether a night holds the study whose store is ``folder`` at this moment."""
    try:
        with (folder / LOCK_NAME).open("rb") as handle:
            fcntl.flock(handle, fcntl.LOCK_SH | fcntl.LOCK_NB)
    except FileNotFoundError:
        return False
    except BlockingIOError:
        return True
    return False


def already_running(folder: Path) -> AlreadyRunning:
    """Return the refusal of a second night on the store ``folder``."""
    problem = "a night is already running"
    return AlreadyRunning(problem, file=str(folder / LOCK_NAME), remedy="Wait until it has ended.")


@contextmanager
def _held(folder: Path) -> Iterator[None]:
    """Hold the kernel's lock on the store: it ends with this process, however that ends."""
    make_folder(folder)
    with (folder / LOCK_NAME).open("ab") as handle:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise already_running(folder) from None
        yield


@contextmanager
def _recorded(night: Night) -> Iterator[None]:
    try:
        yield
    except BaseException as failure:
        status = "refused" if isinstance(failure, GateRefused) else "failed"
        _end(night, status, f"{type(failure).__name__}: {failure}")
        raise


def _end(night: Night, status: str, trouble: str) -> None:
    # Where even this cannot be written, the record stays open, and the next night closes it as crashed.
    with suppress(SQLAlchemyError), writing(night.engine) as session:
        store.end_night(session, night.number, status, at=datetime.now(UTC), trouble=trouble)
