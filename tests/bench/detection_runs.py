"""How faults of whole runs and acquisitions fare: is what they move withheld, the rest published, and the right check named?

``python -m tests.bench.detection_runs`` assesses every fault of `ACQUISITION_LADDERS` and `RUN_LADDERS` at its six severities, each in a
few of 12 hearts x 250 and 1000 Hz in turn, beside the same acquisition without the fault, and then sound acquisitions. It prints totals
and the worst offenders, writes a table and a picture, and leaves with 1 when a target is missed. ``--full`` takes every heart and rate.

A fault matters for an index where it moves it by more than 5 % (V0: 3 mL) and more than half its interval against the sound twin. A
published value is right where it is that near to the twin's or to the truth. What was withheld was so rightly where it would have been
wrong, needlessly where it would have been right and the signals themselves are sound, and cautiously where they are not.
"""

from __future__ import annotations

import argparse
import csv
import os
import sys
import tempfile
from collections import Counter
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from multiprocessing import get_context
from pathlib import Path

from checks import ALL as CHECKS
from checks.acquisition.visits_agree import ALL as ACROSS_VISITS
from checks.check import Check, Level
from flows.sources.simulated.corpus import hearts
from flows.sources.simulated.heart import HEARTS
from tests.bench.detection_cases import (
    CAUTIOUSLY,
    KINDS,
    LADDERS,
    NEEDLESSLY,
    RIGHT,
    WRONG,
    Case,
    Clean,
    Examined,
    Outcome,
    clean_ones,
    examined,
    keep_signals_in,
    signal_folder,
)
from tests.bench.detection_picture import picture

RATES_HZ = (250.0, 1000.0)
SEVERITIES = 6
HOW_MANY_HEARTS = 12
PAIRS = 2
"""How many of the hearts and rates each severity of each fault is tried in where not all are asked for."""

PUBLISHED_RIGHT = 0.95
NAMED = 0.95
SUSPECT = 0.01
WORST = 100


@dataclass(frozen=True, slots=True)
class Totals:
    """The numbers that have targets."""

    wrong: int
    wrong_but_told: int
    right: int
    needless: int
    cautious: int
    matters: int
    named: int
    clean_verdicts: int
    clean_fails: int
    clean_suspects: int
    clean_withheld: int

    @property
    def right_share(self) -> float:
        """Return the share published of what could be published rightly, of signals the fault does not reach or evidence undoes."""
        return self.right / max(self.right + self.needless, 1)

    @property
    def named_share(self) -> float:
        """Return the share of the cases that matter in which a check made for the fault did not pass."""
        return self.named / max(self.matters, 1)

    def missed(self) -> list[str]:
        """Return every missed target as a sentence."""
        suspects = self.clean_suspects / max(self.clean_verdicts, 1)
        targets = (
            (self.wrong == 0, f"{self.wrong} indices published and wrong, 0 allowed"),
            (self.right_share >= PUBLISHED_RIGHT, f"{self.right_share:.1%} published where that is right, {PUBLISHED_RIGHT:.0%} wanted"),
            (self.named_share >= NAMED, f"the right check named in {self.named_share:.1%}, {NAMED:.0%} wanted"),
            (self.clean_fails == 0, f"{self.clean_fails} checks fail on sound acquisitions, 0 allowed"),
            (suspects <= SUSPECT, f"{suspects:.2%} of verdicts on sound acquisitions suspect, {SUSPECT:.0%} allowed"),
            (self.clean_withheld == 0, f"{self.clean_withheld} indices withheld from sound acquisitions, 0 allowed"),
        )
        return [sentence for holds, sentence in targets if not holds]


def totals(found: Sequence[Examined], clean: Sequence[Clean]) -> Totals:
    """Return the totals of the study."""
    kinds = Counter(outcome.kind for one in found for outcome in one.outcomes)
    mattering = [one for one in found if one.matters]
    return Totals(
        wrong=kinds[WRONG],
        wrong_but_told=sum(outcome.told for one in found for outcome in one.outcomes),
        right=kinds[RIGHT],
        needless=kinds[NEEDLESSLY],
        cautious=kinds[CAUTIOUSLY],
        matters=len(mattering),
        named=sum(one.is_named for one in mattering),
        clean_verdicts=sum(one.verdicts for one in clean),
        clean_fails=sum(len(one.failed) for one in clean),
        clean_suspects=sum(len(one.suspect) for one in clean),
        clean_withheld=sum(len(one.withheld) for one in clean),
    )


def cases(names: Sequence[str], places: Sequence[int], heart_names: Sequence[str], rates_hz: Sequence[float], pairs: int) -> list[Case]:
    """Return the cases, each severity in ``pairs`` of the hearts and rates in turn (0: in all), so that all have their turn."""
    every = [(heart, rate_hz) for heart in heart_names for rate_hz in rates_hz]
    taken = min(pairs, len(every)) if pairs else len(every)
    chosen, turn = [], 0
    for level, name in LADDERS:
        for place in places if name in names else ():
            # A stride that shares no factor with the number of pairs goes through all of them, hearts and rates alike.
            chosen += [Case(level, name, place, *every[(turn + step) * _stride(len(every)) % len(every)]) for step in range(taken)]
            turn += taken
    return chosen


def _stride(count: int) -> int:
    from math import gcd  # noqa: PLC0415  (this function alone)

    return next(step for step in range(max(count // 3, 1), 2 * count + 2) if gcd(step, count) == 1)


def table(found: Iterable[Examined]) -> list[list[str]]:
    """Return the rows of the table, one an index and case."""
    head = "level fault severity unit heart rate_hz index outcome sound true value unguarded reach blamed expected failed suspect named"
    rows = [head.split()]
    for one in found:
        case = one.case
        tail = [";".join(sorted(names)) for names in (one.expected, one.failed, one.suspect)] + [str(one.is_named)]
        front = [case.level, case.fault, f"{case.severity:g}", case.ladder.unit, case.heart, f"{case.rate_hz:.0f}"]
        for told in one.outcomes:
            numbers = [f"{number:.6g}" for number in (told.sound, told.true, told.value, told.unguarded, told.reach)]
            rows.append([*front, told.index, told.kind, *numbers, ";".join(told.blamed), *tail])
    return rows


def offenders(found: Sequence[Examined], kind: str) -> list[str]:
    """Return who is behind outcomes of one kind, most first: fault, severity, indices with counts, largest shift, failed checks."""
    groups: dict[tuple[str, str, float], list[Outcome]] = {}
    names: dict[tuple[str, str, float], Counter[str]] = {}
    tries: Counter[tuple[str, str, float]] = Counter()
    for one in found:
        key = (one.case.level, one.case.fault, one.case.severity)
        told = [outcome for outcome in one.outcomes if outcome.kind == kind]
        tries[key] += 1
        if told:
            groups.setdefault(key, []).extend(told)
            own = {name for outcome in told for name in outcome.blamed} or (one.failed | one.suspect if kind == WRONG else set())
            names.setdefault(key, Counter()).update(own)
    lines = []
    for key, told in sorted(groups.items(), key=lambda item: (-len(item[1]), item[0])):
        level, fault, severity = key
        indices = Counter(outcome.index for outcome in told).most_common()
        shift = max(abs(outcome.value - outcome.sound) / max(abs(outcome.sound), 1e-9) for outcome in told)
        by = f" by up to {shift:.0%}" if kind == WRONG else ""
        checks = ", ".join(f"{name} {times}" for name, times in names[key].most_common(4)) or "no check"
        told_of = ", ".join(f"{index} {times}" for index, times in indices)
        lines.append(f"{len(told):>4}  {level} {fault} {severity:g}, {tries[key]} cases: {told_of}{by}  [{checks}]")
    return lines


def by_fault(found: Sequence[Examined]) -> list[str]:
    """Return a line a fault: its outcomes, and how often its check was named."""
    lines = [
        f"{'fault':<40}"
        + "".join(f"{kind.replace('published', 'publ.').replace('withheld', 'held'):>17}" for kind in KINDS)
        + "  check named"
    ]
    for level, fault in dict.fromkeys((one.case.level, one.case.fault) for one in found):
        own = [one for one in found if (one.case.level, one.case.fault) == (level, fault)]
        kinds = Counter(outcome.kind for one in own for outcome in one.outcomes)
        mattering = [one for one in own if one.matters]
        expected = sorted(set().union(*(one.expected for one in own)))
        told = ", ".join(name if name in {check.name for check in CHECKS} else f"{name} (none such yet)" for name in expected)
        named = f"  {sum(one.is_named for one in mattering)} of {len(mattering)}  {told}"
        lines.append(f"{level + ' ' + fault:<40}" + "".join(f"{kinds[kind]:>17}" for kind in KINDS) + named)
    return lines


def unnamed(found: Sequence[Examined]) -> list[str]:
    """Return where the right check was not named though the fault matters, most first, with the checks that were."""
    counts: Counter[tuple[str, float]] = Counter()
    others: dict[tuple[str, float], Counter[str]] = {}
    for one in found:
        if one.matters and not one.is_named:
            key = (f"{one.case.level} {one.case.fault}", one.case.severity)
            counts[key] += 1
            others.setdefault(key, Counter()).update(one.failed | one.suspect)
    lines = []
    for key, count in sorted(counts.items(), key=lambda item: (-item[1], item[0])):
        names = ", ".join(f"{name} {times}" for name, times in others[key].most_common(5)) or "nothing"
        lines.append(f"{key[0]:<40}{key[1]:>8g}{count:>4}  named: {names}")
    return lines


def never_fired(found: Sequence[Examined]) -> list[str]:
    """Return the verdicts that checks of runs and acquisitions declare a bound for and that no case had, as "name fail".

    Those across a subject's visits need several acquisitions: `tests/flows/test_jumps_across_visits.py` makes them fire.
    """
    fired = {f"{name} fail" for one in found for name in one.failed} | {f"{name} suspect" for one in found for name in one.suspect}
    return sorted(wanted() - fired)


def wanted() -> set[str]:
    """Return the verdicts that the checks of runs and acquisitions declare bounds for, as "name fail"."""
    judged = [check for check in CHECKS if check.level is not Level.BEAT and check not in ACROSS_VISITS]
    return {verdict for check in judged for verdict in declared(check)}


def declared(check: Check) -> list[str]:
    """Return the verdicts beside pass that a check has a bound for, as "name fail"."""
    bounds = {bound.split("_")[0] for limits in (check.limits, check.limits_rv) if limits is not None for bound in limits.declared()}
    return [f"{check.name} {verdict}" for verdict in sorted(bounds)]


def cries(clean: Sequence[Clean]) -> list[str]:
    """Return what was found in sound acquisitions, most first."""
    counts: Counter[tuple[str, str, str]] = Counter()
    for one in clean:
        for verdict, names in (("fail", one.failed), ("suspect", one.suspect), ("withheld", one.withheld)):
            counts.update((verdict, name, f"{one.heart} {one.variant} {one.rate_hz:.0f} Hz") for name in names)
    return [
        f"{verdict:<10}{name:<28}{count:>4}  {who}" for (verdict, name, who), count in sorted(counts.items(), key=lambda i: (i[0], -i[1]))
    ]


def report(found: Sequence[Examined], clean: Sequence[Clean]) -> list[str]:
    """Return the lines of the printed report: totals, missed targets, offenders."""
    sums = totals(found, clean)
    kinds = Counter(outcome.kind for one in found for outcome in one.outcomes)
    cried = f"{sums.clean_fails} fail, {sums.clean_suspects} suspect, {sums.clean_withheld} indices withheld"
    lines = [
        f"{len(found)} faulty acquisitions, {kinds.total()} indices: " + ", ".join(f"{kinds[kind]} {kind}" for kind in KINDS),
        f"published and wrong: {sums.wrong}, of which {sums.wrong_but_told} hold what is right in their own interval",
        f"published where that is right: {sums.right_share:.1%} ({sums.needless} withheld needlessly, {sums.cautious} cautiously)",
        f"right check named: {sums.named} of {sums.matters} cases that matter, {sums.named_share:.1%}",
        f"{len(clean)} sound acquisitions, {sums.clean_verdicts} verdicts: {cried}",
        "never fired: " + (", ".join(never_fired(found)) or "none"),
        "",
        *(f"MISSED: {sentence}" for sentence in sums.missed()),
    ]
    for kind in (WRONG, NEEDLESSLY):
        told = offenders(found, kind)
        lines += ["", f"-- {kind}: {len(told)} faults and severities, the worst first", *told[:WORST]]
    sections = (("right check not named", unnamed(found)), ("sound acquisitions", cries(clean)), ("fault by fault", by_fault(found)))
    for title, told in sections:
        lines += ["", f"-- {title}", *told]
    return lines


def _group(group: Sequence[Case]) -> list[Examined]:
    return [examined(case) for case in group]


def _clean_group(pair: tuple[str, float]) -> list[Clean]:
    return list(clean_ones(*pair))


def measured(
    chosen: Sequence[Case], sound: Sequence[tuple[str, float]], workers: int, tell: Callable[[str], object]
) -> tuple[list[Examined], list[Clean]]:
    """Return what was found of all cases and sound acquisitions, in their order, telling how far it has come."""
    order = {case: place for place, case in enumerate(chosen)}
    # One heart and rate after the other, so that each worker solves few hearts at a time.
    grouped: dict[tuple[str, float], list[Case]] = {}
    for case in chosen:
        grouped.setdefault((case.heart, case.rate_hz), []).append(case)
    chunks = [own[start : start + 12] for own in grouped.values() for start in range(0, len(own), 12)]
    found: list[Examined] = []
    clean: list[Clean] = []
    with (
        signal_folder() as folder,
        ProcessPoolExecutor(workers, get_context("spawn"), initializer=keep_signals_in, initargs=(folder,)) as pool,
    ):
        faulty = [pool.submit(_group, chunk) for chunk in chunks]
        healthy = [pool.submit(_clean_group, pair) for pair in sound]
        try:
            for done in as_completed(faulty):
                found += done.result()
                tell(f"\r{len(found)} of {len(chosen)} faulty acquisitions      ")
            for number, ready in enumerate(healthy, 1):
                clean += ready.result()
                tell(f"\r{number} of {len(sound)} sound hearts      ")
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise
    tell("\n")
    return sorted(found, key=lambda one: order[one.case]), clean


def _arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--full", action="store_true", help="every heart and rate (about 10,000 acquisitions, the better part of an hour)")
    parser.add_argument("--hearts", type=int, default=HOW_MANY_HEARTS, help="the first so many of the 12 hearts, left and right in turn")
    parser.add_argument("--rates", default="250,1000", help="sampling rates in Hz, joined by commas")
    parser.add_argument("--faults", default="", help="names of faults, joined by commas (default all)")
    parser.add_argument("--severities", default="1,2,3,4,5,6", help="places on the ladder, 1 the mildest, joined by commas")
    parser.add_argument("--pairs", type=int, default=PAIRS, help="in how many hearts and rates each severity is tried (0: all; default 2)")
    parser.add_argument("--no-clean", action="store_true", help="leave out the sound acquisitions")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--out", type=Path, help="folder for table, report and picture (default a new temporary one)")
    return parser.parse_args()


def main() -> int:
    """Measure, print and write; return 1 when a target is missed."""
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
        os.environ.setdefault(name, "1")
    asked = _arguments()
    known = {name for _, name in LADDERS}
    names = [name for name in asked.faults.split(",") if name] or sorted(known)
    if unknown := set(names) - known:
        sys.stderr.write(f"no such fault: {', '.join(sorted(unknown))}; there are {', '.join(sorted(known))}\n")
        return 2
    rates_hz = [float(text) for text in asked.rates.split(",")]
    places = [int(text) - 1 for text in asked.severities.split(",")]
    heart_names = [heart.name for heart in hearts(asked.hearts)]
    chosen = cases(names, places, heart_names, rates_hz, 0 if asked.full else asked.pairs)
    sound = [(name, rate_hz) for name in dict.fromkeys([*(heart.name for heart in HEARTS), *heart_names]) for rate_hz in rates_hz]
    if not asked.full:
        sound = sound[:: len(rates_hz)] if len(rates_hz) == 1 else [pair for at, pair in enumerate(sound) if at % 4 in {0, 3}]
    found, clean = measured(chosen, [] if asked.no_clean else sound, asked.workers, sys.stderr.write)
    out = asked.out or Path(tempfile.mkdtemp(prefix="detection-"))
    out.mkdir(parents=True, exist_ok=True)
    lines = report(found, clean)
    with (out / "detection_runs.csv").open("w", encoding="utf-8", newline="") as file:
        csv.writer(file, lineterminator="\n").writerows(table(found))
    (out / "detection_runs.svg").write_text(picture(found), encoding="utf-8")
    (out / "detection_runs.txt").write_text("\n".join(lines) + "\n", encoding="utf-8")
    sys.stdout.write("\n".join([*lines, "", f"table and picture: {out}"]) + "\n")
    return 1 if totals(found, clean).missed() else 0


if __name__ == "__main__":
    sys.exit(main())
