"""Nights killed at chosen points, each followed by a plain one: run as a program, it prints what it found as JSON.

A point is an instant before or after an operation that lasts: a flush, a rename, a link, a commit of the catalogue. The killed night runs
in a fork of this process, which therefore runs no threads of its own and is not the test process.
"""

import json
import os
import shutil
import signal
import sys
from pathlib import Path

import sqlalchemy as sa
from sqlalchemy import event

from flows.catalogue import trail
from flows.catalogue.engine import open_catalogue, reading
from flows.catalogue.types import Base
from flows.nightly import run_night_plain
from flows.steps import opening, publishing
from flows.steps.opening import Options
from tests.flows.made_study import InProcess, make_study, plain_report, published, send
from tests.flows.made_work import work

CLOCKS = {"id", "at", "first_seen_at", "assessed_at", "published_at", "previous_sha256", "row_sha256"}
OPTIONS = Options(work=work)


def prepared(folder):
    """A study with one release, and new uploads that the night to be killed is about: a correction, a refusal, a second site."""
    study = make_study(folder)
    send(study, "up-1", "H-1-baseline")
    run_night_plain(study, OPTIONS)
    send(study, "up-2", "H-1-baseline", note="queried", days=1)
    send(study, "up-3", "H-2-baseline", note="refuse", days=1)
    send(study, "up-4", "W-1-baseline", site="weir", days=1)
    return study


def dump(study):
    """The catalogue without ids, clocks and nights, sorted."""
    engine = open_catalogue(study / "store")
    with reading(engine) as session:
        assert trail.broken_lines(session) == []
        tables = {
            name: sorted(
                json.dumps({column: str(value) for column, value in row._mapping.items() if column not in CLOCKS})
                for row in session.execute(sa.select(table))
            )
            for name, table in Base.metadata.tables.items()
            if name != "nights"
        }
    engine.dispose()
    return tables


def die_at(point, seen):
    """Count the points and kill this process at number ``point``; ``seen`` is told the count after every one."""
    count = 0

    def reach(*_event):
        nonlocal count
        count += 1
        seen(count)
        if count == point:
            os.kill(os.getpid(), signal.SIGKILL)

    def around(operation):
        def counted(*arguments, **named):
            reach()
            answer = operation(*arguments, **named)
            reach()
            return answer

        return counted

    for name in ("fsync", "replace", "rename", "symlink", "fchmod"):
        setattr(os, name, around(getattr(os, name)))
    event.listen(sa.Engine, "commit", reach)
    event.listen(sa.pool.Pool, "reset", reach)


def killed_night(study, point, log):
    """Run a night in a fork that dies at a point; return how many points it saw and whether it was killed."""
    child = os.fork()
    if child == 0:
        die_at(point, lambda count: log.write_text(str(count)))
        sys.stderr = Path(os.devnull).open("w")  # noqa: SIM115  (the fork ends without tidying up)
        run_night_plain(study, OPTIONS)
        os._exit(0)
    _, status = os.waitpid(child, 0)
    return int(log.read_text()), os.WIFSIGNALED(status)


def main(base, points):
    """Kill a night at about ``points`` points spread over it, and compare what the next one leaves with an undisturbed one."""
    opening.Workers, publishing.write_report, publishing.answers = InProcess, plain_report, lambda _tables: []
    sys.stderr = Path(os.devnull).open("w")  # noqa: SIM115  (progress of some fifty nights)
    origin = prepared(base / "origin")
    old = published(origin)
    whole = shutil.copytree(origin, base / "whole", symlinks=True)
    total, was_killed = killed_night(whole, 0, base / "count")
    assert not was_killed
    new, catalogue = published(whole), dump(whole)
    found = []
    for point in range(1, total + 1, max(1, total // points)):
        study = shutil.copytree(origin, base / f"point-{point}", symlinks=True)
        _, was_killed = killed_night(study, point, base / "count")
        shown = published(study)
        release = shown["latest"].removeprefix("-> ")
        sound = {name: content for name, content in shown.items() if name.startswith(f"{release}/")}
        whichever = old if shown["latest"] == old["latest"] else new
        run_night_plain(study, OPTIONS)
        found.append(
            {
                "point": point,
                "killed": was_killed,
                "reader saw a whole release": sound
                == {name: content for name, content in whichever.items() if name.startswith(f"{release}/")},
                "same bytes": published(study) == new,
                "same catalogue": dump(study) == catalogue,
                "nothing left over": not list(study.rglob(".partial-*")),
            },
        )
        shutil.rmtree(study)
    print(json.dumps({"total": total, "moved": old["latest"] != new["latest"], "found": found}))  # noqa: T201  (its answer)


if __name__ == "__main__":
    main(Path(sys.argv[1]), int(sys.argv[2]))
