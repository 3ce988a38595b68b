"""The fewest cases of the fault study in which each check of runs and acquisitions fires at each level it declares.

``python tests/bench/firing_cases.py detection_runs.csv`` reads the table a study wrote and prints the lines of
`tests/checks/firing_cases.txt`, which a test goes through; what the study never saw is told on stderr.
"""

from __future__ import annotations

import csv
import sys
from collections.abc import Iterable, Mapping
from pathlib import Path

from tests.bench.detection_cases import Case
from tests.bench.detection_runs import wanted

COSTS = 3
"""What a heart and rate not yet among the chosen costs, in verdicts: each has to be simulated."""


def seen(rows: Iterable[Mapping[str, str]]) -> dict[Case, frozenset[str]]:
    """Return the verdicts beside pass that each case of a study's table had, as "name fail"."""
    found: dict[Case, frozenset[str]] = {}
    for row in rows:
        rate_hz = float(row["rate_hz"])
        case = next(
            case
            for place in range(6)
            if f"{(case := Case(row['level'], row['fault'], place, row['heart'], rate_hz)).severity:g}" == row["severity"]
        )
        found[case] = frozenset(f"{name} {verdict}" for verdict in ("failed", "suspect") for name in row[verdict].split(";") if name)
    return {case: frozenset(name.replace(" failed", " fail") for name in names) for case, names in found.items()}


def cover(found: Mapping[Case, frozenset[str]]) -> tuple[list[Case], set[str]]:
    """Return cases that together show every wanted verdict, greedily few, and the verdicts no case shows."""
    left, chosen = wanted(), list[Case]()
    while True:
        here = {(case.heart, case.rate_hz) for case in chosen}
        best = max(found, key=lambda case: COSTS * len(found[case] & left) + ((case.heart, case.rate_hz) in here) - case.rate_hz / 2000.0)
        if not found[best] & left:
            return chosen, left
        chosen.append(best)
        left -= found[best]


def main() -> int:
    """Print the cases."""
    rows: list[dict[str, str]] = []
    for name in sys.argv[1:]:
        with Path(name).open(encoding="utf-8", newline="") as file:
            rows += csv.DictReader(file)
    chosen, left = cover(seen(rows))
    for case in sorted(chosen, key=lambda case: (case.heart, case.rate_hz, case.level, case.fault, case.place)):
        sys.stdout.write(f"{case.level} {case.fault} {case.place + 1} {case.heart} {case.rate_hz:.0f}\n")
    sys.stderr.write("".join(f"never seen: {name}\n" for name in sorted(left)))
    return 0


if __name__ == "__main__":
    sys.exit(main())
