"""The night as the orchestration runs it: one flow a night, tasks of some twenty packages, progress and a summary on its pages.

This module imports the orchestration; `flows.nightly` imports it once the settings are in place. Parameters are paths and names only: a
database's address, which may hold a password, is never among them.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from contextvars import ContextVar
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar, cast

from prefect import flow, task
from prefect.artifacts import (
    create_markdown_artifact,
    create_progress_artifact,
    create_table_artifact,
    update_progress_artifact,
)
from prefect.cache_policies import NO_CACHE
from prefect.client.orchestration import get_client
from prefect.client.schemas.filters import (
    FlowRunFilter,
    FlowRunFilterId,
    TaskRunFilter,
    TaskRunFilterState,
    TaskRunFilterStateType,
)
from prefect.client.schemas.objects import State, StateType
from prefect.events.worker import EventsWorker
from prefect.futures import as_completed
from prefect.states import Failed
from prefect.task_runners import ThreadPoolTaskRunner
from prefect.utilities.annotations import quote

from flows.errors import InputError
from flows.nightly import Progress
from flows.publish.refusal import GateRefused
from flows.steps.assessing import assess_chunk, chunks
from flows.steps.opening import Options, open_night
from flows.steps.publishing import NightResult, publish_night
from flows.steps.receiving import pending, receive

if TYPE_CHECKING:
    from uuid import UUID

    from prefect.futures import PrefectFuture
    from prefect.task_runners import TaskRunner

    from flows.steps.opening import Night
    from flows.workers import Job

_THREADS = 4
"""Tasks at a time. They only wait for children, whose number is set elsewhere; each keeps twenty packages queued."""

_DRAIN_S = 30.0

_Value = TypeVar("_Value")
_runner = cast("TaskRunner[PrefectFuture[Any]]", ThreadPoolTaskRunner(max_workers=_THREADS))


class EngineFailed(Exception):  # noqa: N818  (the night itself has not failed: it has not begun)
    """The orchestration did not get as far as the night."""


@dataclass
class _Call:
    """A call from this process: options that no record may hold, and whether the night began."""

    options: Options
    has_begun: bool = False


_call: ContextVar[_Call | None] = ContextVar("call", default=None)


@task(name="assess", task_run_name="assess-{number}", cache_policy=NO_CACHE, persist_result=False)
def assess_packages(number: int, night: Night, jobs: list[Job], done: Callable[[], None]) -> int:
    """Assess a chunk of packages; the thread waits for children."""
    del number
    return assess_chunk(night, jobs, done)


@flow(name="nightly", task_runner=_runner, persist_result=False)
def nightly(study: str, *, retry_failed: bool = False) -> Any:  # noqa: ANN401  (a result or a failed state)
    """Run a night over the study folder ``study``; ``retry_failed`` assesses again what took too long, died or made the program fail."""
    # A thin body: a service hands the flow to a child with all that its body names, and by name only what is a function of a module.
    return _night(Path(study), Options(retry_failed=retry_failed))


def run_flow(study: Path, options: Options) -> NightResult:
    """Run the flow in this process and return the night's result once its records are complete.

    Raises what the night raises, and EngineFailed when the orchestration failed before the night began.
    """
    call = _Call(options)
    token = _call.set(call)
    try:
        state = cast("State[Any]", nightly(str(study), return_state=True))
    except Exception as failure:
        if call.has_begun:
            raise
        message = f"{type(failure).__name__}: {failure}"
        raise EngineFailed(message) from failure
    finally:
        _call.reset(token)
    if state.state_details.flow_run_id is not None:
        _drain(state.state_details.flow_run_id)
    if not call.has_begun:
        raise EngineFailed(state.message or state.name or "no reason given")
    return cast("NightResult", state.result())


def _night(study: Path, options: Options) -> Any:  # noqa: ANN401  (a result or a failed state)
    """Run the steps of a night; a call from this process brings options of its own."""
    call = _call.get() or _Call(options)
    call.has_begun = True
    try:
        with open_night(study, call.options) as night:
            arrivals = receive(night)
            while jobs := pending(night, arrivals):
                _assess(night, jobs)
            result = publish_night(night)
    except (InputError, GateRefused) as refusal:
        create_markdown_artifact(f"**Nothing was published.** {refusal}", key="night")
        return Failed(message=str(refusal), data=refusal)
    _show(result)
    return result


def _assess(night: Night, jobs: list[Job]) -> None:
    progress = Progress(len(jobs))
    bar = create_progress_artifact(progress=0.0, key="assessed", description="Packages assessed")
    futures = {
        assess_packages.submit(number, _as_is(night), _as_is(chunk), _as_is(progress.one_more)): len(chunk)
        for number, chunk in enumerate(chunks(jobs), start=1)
    }
    done = 0
    for future in as_completed(list(futures)):
        future.result()
        done += futures[future]
        update_progress_artifact(cast("UUID", bar), progress=100.0 * done / len(jobs))


def _as_is(value: _Value) -> _Value:
    """Return the value wrapped so that the orchestration hands it on without looking inside."""
    return cast("_Value", quote(value))


def _show(result: NightResult) -> None:
    table = [{"site": site, **count} for site, count in result.counts.items()]
    create_table_artifact(table, key="packages", description="Packages of each site by status")
    problems = "\n".join(f"- {problem}" for problem in result.problems) or "Nothing needs a look."
    create_markdown_artifact(f"Release `{result.release}`, {result.assessed} packages assessed tonight.\n\n{problems}", key="night")


def _drain(flow_run: UUID) -> None:
    """Wait until the server has stored the end of every task: its records travel as events, and a process that ends drops them."""
    EventsWorker.drain_all()
    of_this_run = FlowRunFilter(id=FlowRunFilterId(any_=[flow_run]))
    unended = [StateType.PENDING, StateType.RUNNING, StateType.SCHEDULED]
    still_open = TaskRunFilter(state=TaskRunFilterState(type=TaskRunFilterStateType(any_=unended)))
    until = time.monotonic() + _DRAIN_S
    quiet = 0
    with get_client(sync_client=True) as client:
        while quiet < 2 and time.monotonic() < until:
            left = client.read_task_runs(flow_run_filter=of_this_run, task_run_filter=still_open, limit=1)
            quiet = 0 if left else quiet + 1
            time.sleep(0.5)
