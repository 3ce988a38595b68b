"""Settings of the orchestration, to be put in place before it is imported: quiet, offline, its records inside the study's store.

They are set as defaults of the environment, because its own settings files are read from the working directory only. Whoever sets one of
these variables keeps it. Figures: measured with Prefect 3.9 ([C]); without the recorder's batches an in-process server loses records.
"""

from __future__ import annotations

import os
from pathlib import Path

from flows.flow_server import live_server
from flows.intake.durable import make_folder

DEFAULTS = {
    "DO_NOT_TRACK": "1",
    "PREFECT_SERVER_ANALYTICS_ENABLED": "false",
    "PREFECT_SERVER_UI_SHOW_PROMOTIONAL_CONTENT": "false",
    "PREFECT_TELEMETRY_ENABLE_RESOURCE_METRICS": "false",
    "PREFECT_SERVER_REGISTER_BLOCKS_ON_START": "false",
    "PREFECT_SERVER_EPHEMERAL_STARTUP_TIMEOUT_SECONDS": "90",
    "PREFECT_LOGGING_LEVEL": "WARNING",
    "PREFECT_SERVER_LOGGING_LEVEL": "CRITICAL",
    "PREFECT_LOGGING_TO_API_WHEN_MISSING_FLOW": "ignore",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_READ_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_TASK_RUN_RECORDER_FLUSH_INTERVAL": "1",
    "PREFECT_SERVER_SERVICES_EVENT_PERSISTER_BATCH_SIZE": "200",
    "PREFECT_SERVER_SERVICES_EVENT_PERSISTER_READ_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_EVENT_PERSISTER_FLUSH_INTERVAL": "1",
    "PREFECT_SERVER_SERVICES_TRIGGERS_READ_BATCH_SIZE": "100",
    "PREFECT_SERVER_SERVICES_DB_VACUUM_ENABLED": "events,flow_runs",
    "PREFECT_SERVER_CONCURRENCY_LEASE_STORAGE": "prefect.server.concurrency.lease_storage.filesystem",
    "PREFECT_FLOWS_HEARTBEAT_FREQUENCY": "30",
}


def settle(store: Path) -> None:
    """Put the settings in place, with the orchestration's home in ``store``; what the environment holds already stays.

    Where the study is served, its server is used; otherwise a night starts one of its own and ends it.
    """
    for name, value in {**DEFAULTS, "PREFECT_HOME": str(store / "prefect")}.items():
        os.environ.setdefault(name, value)
    make_folder(Path(os.environ["PREFECT_HOME"]))  # it makes its home itself, but not the folders above
    if "PREFECT_API_URL" not in os.environ:
        url = live_server(store)
        if url is not None:
            os.environ["PREFECT_API_URL"] = url
