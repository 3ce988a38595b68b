"""Stand-ins for what a child process does with a job: they need no signals, and misbehave when the package asks for it."""

import os
import signal
import sys
import time
from datetime import UTC, datetime

from flows.catalogue.evidence_files import packed
from flows.catalogue.outcome import Found, Refused, Trouble
from flows.errors import InputError
from flows.workers import _damage, assess_job
from tests.flows.made_rows import found_rows


def work(job):
    """Answer by the first word of the package's note.txt: hang, die, leave, raise, refuse, queried, modules; else found."""
    damaged = assess_job(job) if job.damage or _damage(job) else None
    if damaged is not None:
        return damaged
    note = job.files["note.txt"].read_text(encoding="utf-8").split() if "note.txt" in job.files else []
    match note[:1]:
        case ["hang"]:
            time.sleep(600)
        case ["die"]:
            os.kill(os.getpid(), signal.SIGKILL)
        case ["leave"]:
            os._exit(3)
        case ["raise"]:
            return Refused(Trouble.PROGRAM, "the program could not assess this package: ValueError: made to fail")
        case ["refuse"]:
            return Refused(Trouble.INPUT, str(InputError("is made to be refused", file="note.txt", remedy="Send another.")))
        case ["modules"]:
            return Refused(Trouble.PROGRAM, " ".join(sorted({name.split(".")[0] for name in sys.modules})))
        case ["threads"]:
            return Refused(Trouble.PROGRAM, os.environ["OPENBLAS_NUM_THREADS"])
    return found(job, "queried" if note[:1] == ["queried"] else "accepted")


def found(job, verdict):
    """An outcome that depends on the job's content alone."""
    import json  # noqa: PLC0415

    manifest = json.loads(job.files["acquisition.json"].read_bytes())
    rows = found_rows(job.site, manifest["acquisition"], subject=manifest["subject"], visit=manifest["visit"], verdict=verdict)
    acquisition = rows.pop("acquisition") | {"recorded_at": datetime.fromisoformat(manifest["recorded_at"]).astimezone(UTC)}
    return Found(acquisition, rows, packed({"acquisition": manifest["acquisition"]}), manifest["recorded_at"])
