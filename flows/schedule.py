"""The service that runs a study's night every night: one at a time, whatever became of the one before.

The night begins at 04:15 of the study's time zone. No zone of the time-zone database skips or repeats that time when its clocks change
(computed over 2024 to 2038 by its test; [C]), so that every day has exactly one night.
"""

from __future__ import annotations

import os
import sys
from typing import TYPE_CHECKING, Any

from flows.flow_server import flow_server
from flows.prefect_settings import settle
from flows.steps.opening import is_held
from flows.study.protocol import read_protocol

if TYPE_CHECKING:
    from pathlib import Path

CRON = "15 4 * * *"
_SILENCE_S = 90


def serve(study: Path, cron: str = CRON) -> None:
    """Stay and run the night of the study folder ``study`` whenever ``cron`` says, in the study's time zone, until told to end.

    Nights that a dead process left open are closed first. Raises InputError for a study that cannot be used.
    """
    study = study.absolute()
    protocol = read_protocol(study)
    store = study / "store"
    settle(store)
    with flow_server(store) as url:
        os.environ["PREFECT_API_URL"] = url
        from prefect.client.schemas.objects import ConcurrencyLimitConfig, ConcurrencyLimitStrategy  # noqa: PLC0415
        from prefect.schedules import Cron  # noqa: PLC0415
        from prefect.types.entrypoint import EntrypointType  # noqa: PLC0415

        from flows.nightly_flow import nightly  # noqa: PLC0415  (the settings come first)

        closed = close_stale_runs(store)
        watch_for_silence()
        lines = [f"closed: {name}, left open by a process that no longer exists" for name in closed]
        lines += [
            f"serving the nights of {protocol.study.name} ({cron}, {protocol.study.timezone}); pages at {url.removesuffix('/api')}",
            "",
        ]
        sys.stderr.write("\n".join(lines))
        nightly.serve(
            name=protocol.study.name,
            schedule=Cron(cron, timezone=protocol.study.timezone),
            parameters={"study": str(study)},
            limit=1,
            global_limit=ConcurrencyLimitConfig(limit=1, collision_strategy=ConcurrencyLimitStrategy.CANCEL_NEW),
            pause_on_shutdown=False,
            print_starting_message=False,
            entrypoint_type=EntrypointType.MODULE_PATH,
        )


def close_stale_runs(store: Path) -> list[str]:
    """Mark every run that a dead process left open as crashed and return their names; while a night holds the study, none is touched.

    An open run would keep the only slot, and cancel every night to come.
    """
    from prefect.client.orchestration import get_client  # noqa: PLC0415
    from prefect.client.schemas.filters import FlowRunFilter, FlowRunFilterState, FlowRunFilterStateType  # noqa: PLC0415
    from prefect.client.schemas.objects import StateType  # noqa: PLC0415
    from prefect.states import Crashed  # noqa: PLC0415

    if is_held(store):
        return []
    unended = [StateType.RUNNING, StateType.PENDING, StateType.CANCELLING]
    chosen = FlowRunFilter(state=FlowRunFilterState(type=FlowRunFilterStateType(any_=unended)))
    with get_client(sync_client=True) as client:
        stale = client.read_flow_runs(flow_run_filter=chosen)
        for run in stale:
            client.set_flow_run_state(run.id, Crashed(message="Left open by a process that no longer exists."), force=True)
    return sorted(run.name for run in stale)


def watch_for_silence() -> None:
    """Let the server mark a run as crashed whose process has fallen silent; called again, it leaves the rule as it is."""
    from datetime import timedelta  # noqa: PLC0415

    from prefect.automations import Automation  # noqa: PLC0415
    from prefect.client.schemas.objects import StateType  # noqa: PLC0415
    from prefect.events.actions import ChangeFlowRunState  # noqa: PLC0415
    from prefect.events.schemas.automations import EventTrigger, Posture  # noqa: PLC0415
    from prefect.events.schemas.events import ResourceSpecification  # noqa: PLC0415

    name = "a night that fell silent has crashed"
    beat = "prefect.flow-run.heartbeat"
    ends = {f"prefect.flow-run.{end}" for end in ("Completed", "Failed", "Cancelled", "Crashed")}
    read: Any = Automation.read
    try:
        read(name=name)
    except ValueError:
        trigger = EventTrigger(
            after={beat},
            expect={beat} | ends,
            match=ResourceSpecification({"prefect.resource.id": ["prefect.flow-run.*"]}),
            for_each={"prefect.resource.id"},
            posture=Posture.Proactive,
            threshold=1,
            within=timedelta(seconds=_SILENCE_S),
        )
        action = ChangeFlowRunState(state=StateType.CRASHED, message="No sign of life: the process is lost.")
        create: Any = Automation(name=name, trigger=trigger, actions=[action]).create
        create()  # outside an event loop both do their work at once, whatever their types say
