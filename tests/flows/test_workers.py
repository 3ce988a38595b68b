"""Children that assess packages: what a hanging, dying or failing one costs, and what they do not import."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from flows.catalogue.outcome import Found, Refused, Trouble
from flows.study.protocol import bare_protocol
from flows.workers import Job, Workers, assess_job
from tests.flows.made_work import work

PROTOCOL = bare_protocol("tarn", "harbour")
MANIFEST = '{"acquisition": "%s", "subject": "H-1", "visit": "v", "recorded_at": "2026-03-04T09:12:00+01:00"}'


@pytest.fixture
def job(tmp_path):
    def make(note, name="a"):
        folder = tmp_path / name
        folder.mkdir()
        (folder / "acquisition.json").write_text(MANIFEST % name)
        (folder / "note.txt").write_text(note)
        return Job("harbour", "p", name * 64, {path.name: path for path in folder.iterdir()}, PROTOCOL)

    return make


def test_a_hang_a_death_and_a_refusal_cost_their_own_package_only(job):
    notes = ["fine", "hang", "fine", "die", "leave", "fine", "refuse", "raise", "fine"]
    jobs = [job(note, f"n{number}") for number, note in enumerate(notes)]
    with Workers(2, time_out_s=2.0, work=work) as workers:
        futures = [workers.submit(one) for one in jobs]
        outcomes = [workers.outcome(one, future) for one, future in zip(jobs, futures, strict=True)]
    troubles = [outcome.trouble if isinstance(outcome, Refused) else None for outcome in outcomes]
    assert troubles == [None, Trouble.TIME_OUT, None, Trouble.DIED, Trouble.DIED, None, Trouble.INPUT, Trouble.PROGRAM, None]
    assert [one.acquisition["acquisition"] for one in outcomes if isinstance(one, Found)] == ["n0", "n2", "n5", "n8"]
    assert outcomes[1].reason == "the program could not assess this package within 2 s"


def test_children_compute_on_one_thread_and_import_no_orchestration(job):
    jobs = [job("modules", "m"), job("threads", "t")]
    with Workers(1, work=work) as workers:
        modules, threads = (workers.outcome(one, workers.submit(one)).reason for one in jobs)
    assert {"prefect", "great_expectations", "pytest", "sqlalchemy"}.isdisjoint(modules.split())
    assert threads == "1"


def test_a_pool_whose_children_all_went_away_is_started_anew(job):
    with Workers(1, work=work) as workers:
        first = job("fine", "a")
        assert isinstance(workers.outcome(first, workers.submit(first)), Found)
        (child,) = workers._pool._pool_manager.worker_manager.workers
        os.kill(child, signal.SIGKILL)
        until = time.monotonic() + 20
        while workers._pool.active and time.monotonic() < until:
            time.sleep(0.02)
        second = job("fine", "b")
        assert isinstance(workers.outcome(second, workers.submit(second)), Found)


def test_a_failure_reads_the_same_wherever_the_store_lies(tmp_path, monkeypatch):
    path = tmp_path / "acquisition.json"
    path.write_bytes(b"{}")

    def broken(*_arguments, **_facts):
        message = f"cannot use {path}"
        raise RuntimeError(message)

    monkeypatch.setattr("flows.study.manifest.read_manifest", broken)
    outcome = assess_job(Job("harbour", "p", "a" * 64, {"acquisition.json": path}, PROTOCOL))
    assert outcome == Refused(Trouble.PROGRAM, "the program could not assess this package: RuntimeError: cannot use acquisition.json")


def test_a_package_without_its_description_is_refused_in_words():
    outcome = assess_job(Job("harbour", "p", "a" * 64, {"rest-1.csv": Path("rest-1.csv")}, PROTOCOL))
    assert isinstance(outcome, Refused)
    assert outcome.trouble == "input"
    assert outcome.reason.startswith("acquisition.json: is not in the package")


def test_no_child_outlives_a_killed_parent(tmp_path):
    script = tmp_path / "parent.py"
    script.write_text(
        "import sys, time\n"
        "from pathlib import Path\n"
        "from flows.workers import Job, Workers\n"
        "from flows.study.protocol import bare_protocol\n"
        "from tests.flows.made_work import work\n"
        "assert __name__ == '__main__', 'a child ran the main module again'\n"
        f"(Path({str(tmp_path)!r}) / 'note.txt').write_text('refuse')\n"
        f"job = Job('harbour', 'p', 'a', {{'note.txt': Path({str(tmp_path)!r}) / 'note.txt'}}, bare_protocol('tarn', 'harbour'))\n"
        "with Workers(2, work=work) as workers:\n"
        "    workers.outcome(job, workers.submit(job))\n"
        "    print(*workers._pool._pool_manager.worker_manager.workers, flush=True)\n"
        "    time.sleep(60)\n"
    )
    root = Path(__file__).parents[2]
    with subprocess.Popen(
        [sys.executable, script], stdout=subprocess.PIPE, text=True, env=os.environ | {"PYTHONPATH": str(root)}
    ) as parent:
        children = [int(word) for word in parent.stdout.readline().split()]
        assert len(children) == 2
        parent.kill()
    until = time.monotonic() + 10
    while any(Path(f"/proc/{child}").exists() for child in children) and time.monotonic() < until:
        time.sleep(0.05)
    assert not any(Path(f"/proc/{child}").exists() for child in children)
