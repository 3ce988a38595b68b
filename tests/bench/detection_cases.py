"""What becomes of each index when an acquisition has one fault of one severity in it: the cases of `detection_runs`.

An acquisition with the fault and its sound twin (the same heart, seed and noise) go the program's own way. Both are assessed once more
with every bound at which a check of a run or an acquisition fails taken away, where something was withheld: what would have been
published then says whether withholding was right.
"""

from __future__ import annotations

import functools
import json
import math
import os
import tempfile
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from checks import ALL as CHECKS
from checks.acquisition.copied_signal import CHECK as COPIED_SIGNAL
from checks.check import Check, Level, Limits
from flows.assess import Assessment, assess
from flows.errors import InputError
from flows.publish.copies import copies
from flows.sources.simulated.acquisition import Acquisition
from flows.sources.simulated.corpus import Shelf, clean_acquisition, clean_recipe, reached
from flows.sources.simulated.heart import CLOSED_HEARTS, HEARTS
from flows.sources.simulated.ladders import ACQUISITION_LADDERS, RUN_LADDERS, Ladder
from flows.sources.simulated.reading import true_indices
from flows.sources.simulated.rhythm import Breathing, Conditions
from flows.study.manifest import read_manifest
from flows.study.protocol import parse_protocol

SHARE = 0.05
"""How far an index may be moved, as a fraction of it, before that matters; V0 crosses zero and has a bound in mL."""
V0_ML = 3.0

PROTOCOL = parse_protocol(
    b'[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n'
    b'[[visits]]\nname = "visit-1"\nrequired_runs = ["steady", "preload-reduction"]\n'
    b"[limits.pressure-points]\nfail_below = 2\n",
    file="protocol.toml",
)
LADDERS = {("acquisition", ladder.name): ladder for ladder in ACQUISITION_LADDERS} | {
    ("run", ladder.name): ladder for ladder in RUN_LADDERS
}

EVIDENCE_TAKEN = {"zero-missing", "points-missing", "alpha-missing", "alpha-vc-missing", "fluid-filled"}
"""Faults that take away what would tell how large they are: withholding is right at each severity for what the grossest reaches."""
LOOKS_LIKE = {
    "reference-gain-wrong": "alpha-wrong",
    "reference-offset-wrong": "alpha-vc-wrong",
    "saline-disagrees": "alpha-vc-wrong",
    "replicate-shifted": "alpha-vc-wrong",
}
"""Faults of a witness, and the fault of the volumes that contradicts it in the same way: withholding is right for what that reaches."""
IN_SOME_RUNS = {"pressure-sent-in-cmh2o", "volume-calibrated-twice"}
"""Faults by which runs contradict each other: which are right cannot be told, so withholding is for what all could reach."""
SLOPES = frozenset({"Ees", "V0", "Ees_Ea", "PRSW"})
COPIES = {
    "run-copied": SLOPES,
    "run-copied-with-new-noise": SLOPES,
    "run-copied-with-new-ecg": SLOPES,
    "rest-as-ramp": None,
    "subject-swapped": None,
}
"""Faults by which a recording stands for two, and the indices that come from either (None: all): nobody can tell whose it is."""
DISTRUSTED = {"zero-drift", "offset-shown", "rezeroed-silently", "gain-shown"}
"""Faults the evidence undoes up to a bound: a sensor further off is not believed after correction either, which costs sound indices."""

FACES = {
    "pressure-step": ("edp-step", "pressure-shift-elsewhere"),
    "volume-step": ("esv-step", "volume-shift-elsewhere"),
    "pressure-drift": ("edp-drift", "pressure-shift-elsewhere"),
    "volume-drift": ("esv-drift", "volume-shift-elsewhere"),
    "segment-phase": ("segment-swing",),
    "volume-noise": ("volume-noise-intercept",),
    "damping": ("damping-peak", "damping-gross", "pressure-late"),
    "channel-delay": ("channel-delay-gross",),
}
"""Checks made for the same fault as the one a fault names, where it shows at another place or in another quantity."""

RIGHT, WRONG = "published right", "published wrong"
RIGHTLY, CAUTIOUSLY, NEEDLESSLY = "withheld rightly", "withheld cautiously", "withheld needlessly"
KINDS = (WRONG, RIGHT, RIGHTLY, CAUTIOUSLY, NEEDLESSLY)
"""What can become of an index. Cautiously: what was withheld happens to be right, though the signals are off by more than matters, or the
sensor by more than is believed to be corrected."""


@dataclass(frozen=True, slots=True)
class Case:
    """A fault at a severity, the ``place``-th of its ladder, in one heart at one sampling rate."""

    level: str
    fault: str
    place: int
    heart: str
    rate_hz: float

    @property
    def ladder(self) -> Ladder:
        """Return the fault's ladder."""
        return LADDERS[self.level, self.fault]

    @property
    def severity(self) -> float:
        """Return the severity in the ladder's unit."""
        return self.ladder.severities[self.place]


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one index in one case: ``sound`` is what it should be, ``unguarded`` what no failing check would have kept back.

    ``told`` says of a wrong value that its own interval holds the sound one; ``blamed`` are the failed checks that reach the index.
    """

    case: Case
    index: str
    kind: str
    sound: float
    true: float
    value: float
    unguarded: float
    reach: float
    told: bool
    blamed: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Examined:
    """One case: its outcomes, the checks of runs and acquisition that failed or were suspect anywhere, those that should not have passed.

    ``rejecting`` are the checks of beats that rejected one.
    """

    case: Case
    outcomes: tuple[Outcome, ...]
    failed: frozenset[str]
    suspect: frozenset[str]
    expected: frozenset[str]
    rejecting: frozenset[str] = frozenset()

    @property
    def matters(self) -> bool:
        """Return whether the fault moves any index, published or not."""
        return any(outcome.kind in {WRONG, RIGHTLY} for outcome in self.outcomes)

    @property
    def is_named(self) -> bool:
        """Return whether a check made for this fault did not pass."""
        return bool(self.expected & (self.failed | self.suspect | self.rejecting))


@dataclass(frozen=True, slots=True)
class Clean:
    """One acquisition with nothing wrong: which checks of runs and acquisition cried out, of how many verdicts, and what was withheld."""

    heart: str
    rate_hz: float
    variant: str
    verdicts: int
    failed: tuple[str, ...]
    suspect: tuple[str, ...]
    withheld: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Published:
    value: float
    half: float

    def holds(self, value: float) -> bool:
        return abs(value - self.value) <= self.half


def moved(index: str, value: float, sound: float, half: float) -> bool:
    """Return whether a value is off by more than matters: by over 5 % (V0: 3 mL) and by over half the index's interval.

    >>> moved("SV", 66.0, 60.0, 2.0), moved("SV", 62.0, 60.0, 1.0), moved("SV", 66.0, 60.0, 8.0), moved("V0", 8.0, 5.5, 1.0)
    (True, False, False, False)
    """
    bound = V0_ML if index == "V0" else SHARE * abs(sound)
    return not abs(value - sound) <= max(bound, half)


def seed_of(heart: str) -> int:
    """Return the seed of a heart's acquisition, one of its own."""
    return 1 + [one.name for one in HEARTS + CLOSED_HEARTS].index(heart)


def examined(case: Case) -> Examined:
    """Return what becomes of the indices in one case."""
    acquisition, truth = clean_acquisition(case.heart, case.rate_hz, seed_of(case.heart))
    twin = _twin(case.heart, case.rate_hz)
    injected = case.ladder.inject(acquisition, case.severity)
    true = true_indices(injected.acquisition) if injected.truth_is_its_own else truth
    found = _assessed(injected.acquisition)
    is_copied = injected.other is not None and _is_sent_twice(found, _assessed(injected.other))
    published = {} if is_copied else _values(found)
    unguarded: Mapping[tuple[str, str], _Published] = published
    if any(key not in published for key in twin):
        unguarded = _values(_assessed(injected.acquisition, guarded=False))
    failed, suspect = _named(found)
    if is_copied:
        failed = failed | {COPIED_SIGNAL.name}
    reach = {(one.stage, one.index): one for one in reached(acquisition, case.ladder, case.severity)}
    doubtful = _doubtful(case, acquisition, twin)
    names = frozenset(name for one in injected.expected for name in (one.check, *FACES.get(one.check, ())))
    outcomes = []
    for key, sound in twin.items():
        index, actual = key[1], true.get(key, math.nan)
        value, open_value = (one.get(key, _Published(math.nan, 0.0)) for one in (published, unguarded))
        # Where the heart itself was in another state, its own truth is all there is to hold a value against.
        expected = _Published(actual, max(sound.half, value.half)) if injected.truth_is_its_own else sound
        is_right, would_be_right = (_is_right(index, one.value, expected, actual) for one in (value, open_value))
        shift = reach[key].change if key in reach else math.nan
        is_reached = key in reach and moved(index, sound.value + shift, sound.value, sound.half)
        blamed = tuple(sorted(name for name in failed if index in _CARDS[name].spoils)) if key not in published else ()
        if key in published:
            kind = RIGHT if is_right else WRONG
        elif not would_be_right or key in doubtful:
            kind = RIGHTLY
        else:
            kind = CAUTIOUSLY if is_reached or (case.fault in DISTRUSTED and names >= set(blamed) > set()) else NEEDLESSLY
        told = kind == WRONG and (value.holds(expected.value) or value.holds(actual))
        outcomes.append(Outcome(case, index, kind, expected.value, actual, value.value, open_value.value, shift, told, blamed))
    return Examined(case, tuple(outcomes), failed, suspect, names, _rejecting(found))


def verdicts(case: Case) -> frozenset[str]:
    """Return the verdicts beside pass that checks of runs and acquisition have in one case, as "name fail"."""
    acquisition, _ = clean_acquisition(case.heart, case.rate_hz, seed_of(case.heart))
    injected = case.ladder.inject(acquisition, case.severity)
    failed, suspect = _named(_assessed(injected.acquisition))
    return frozenset(f"{name} fail" for name in failed) | frozenset(f"{name} suspect" for name in suspect)


def _is_right(index: str, value: float, sound: _Published, true: float) -> bool:
    return not moved(index, value, sound.value, sound.half) or not moved(index, value, true, sound.half)


def _is_sent_twice(found: Assessment | None, other: Assessment | None) -> bool:
    """Return whether a night that holds both acquisitions finds that they share a recording."""
    if found is None or other is None:
        return False
    rows = [*found.channels, *other.channels]
    columns = {name: [row[name] for row in rows] for name in ("acquisition", "run", "channel", "sha256")}
    return found.acquisition["acquisition"] in copies(columns)


def _doubtful(case: Case, acquisition: Acquisition, twin: Mapping[tuple[str, str], _Published]) -> set[tuple[str, str]]:
    """Return the indices nobody can tell to be sound, though they may be: the evidence is gone, or a witness contradicts them."""
    if case.fault in EVIDENCE_TAKEN or (case.fault in IN_SOME_RUNS and case.severity):
        told = reached(acquisition, case.ladder, case.ladder.severities[-1])
    elif case.fault in COPIES:
        own = COPIES[case.fault]
        return {key for key in twin if own is None or key[1] in own} if case.severity else set()
    elif case.fault in LOOKS_LIKE:
        told = reached(acquisition, LADDERS["acquisition", LOOKS_LIKE[case.fault]], case.severity)
    else:
        return set()
    keys = {(one.stage, one.index): one for one in told}
    return {k for k, sound in twin.items() if k in keys and moved(k[1], sound.value + keys[k].change, sound.value, sound.half)}


_CARDS = {check.name: check for check in CHECKS}
_READABLE = frozenset({"readable"})


@functools.lru_cache(maxsize=4)
def _twin(heart: str, rate_hz: float) -> dict[tuple[str, str], _Published]:
    acquisition, _ = clean_acquisition(heart, rate_hz, seed_of(heart))
    return _values(_assessed(acquisition))


def signal_folder() -> tempfile.TemporaryDirectory[str]:
    """Return a folder for signal files that goes when it is closed, in memory where there is such a place."""
    memory = Path("/dev/shm")  # noqa: S108  (a folder of our own in it, readable by nobody else)
    return tempfile.TemporaryDirectory(prefix="detection-", dir=memory if memory.is_dir() else None)


_FOLDERS: list[tempfile.TemporaryDirectory[str] | Path] = []


def keep_signals_in(folder: str) -> None:
    """Let this process write its signal files into a folder of its own within ``folder``."""
    _FOLDERS.append(Path(folder) / str(os.getpid()))


@functools.cache
def _shelf() -> Shelf:
    if not _FOLDERS:
        _FOLDERS.append(signal_folder())
    kept = _FOLDERS[0]
    return Shelf(kept if isinstance(kept, Path) else Path(kept.name), most=24)


def _assessed(acquisition: Acquisition, *, guarded: bool = True) -> Assessment | None:
    """Return the assessment, None of an acquisition that cannot be read at all."""
    files = _shelf().files(acquisition)
    protocol = PROTOCOL if guarded else PROTOCOL.model_copy(update={"limits": _NEVER_FAILING})
    try:
        manifest = read_manifest(json.dumps(acquisition.manifest).encode(), file="acquisition.json", protocol=protocol)
        return assess(files, manifest, protocol)
    except InputError:
        return None


def _without_fails(limits: Limits) -> dict[str, float]:
    never = {"fail_above": math.inf, "fail_below": -math.inf}
    return {name: bound for name, bound in never.items() if name in limits.declared()}


_NEVER_FAILING = {check.name: _without_fails(check.limits) for check in CHECKS if check.level is not Level.BEAT}


def _values(found: Assessment | None) -> dict[tuple[str, str], _Published]:
    """Return what was published, by stage and index, with half the width of its interval."""
    if found is None:
        return {}
    rows: Sequence[Mapping[str, Any]] = [row for row in found.indices if row["primary"] and row["status"] == "published"]
    return {(row["stage"], row["index"]): _Published(row["value"], _half(row)) for row in rows}


def _half(row: Mapping[str, Any]) -> float:
    for low, high in (("ci_low", "ci_high"), ("fit_ci_low", "fit_ci_high")):
        if row[low] is not None and row[high] is not None:
            return 0.5 * float(row[high] - row[low])
    return 0.0


def _named(found: Assessment | None) -> tuple[frozenset[str], frozenset[str]]:
    """Return the checks of runs and acquisition that failed, and those that were suspect, in any of them."""
    if found is None:
        return _READABLE, frozenset()
    above = [(str(row["check"]), row["verdict"]) for row in found.rejections if _card(row).level is not Level.BEAT]
    failed = frozenset(name for name, verdict in above if verdict == "fail")
    return failed, frozenset(name for name, verdict in above if verdict == "suspect")


def _rejecting(found: Assessment | None) -> frozenset[str]:
    """Return the checks of beats that rejected a beat."""
    rows = () if found is None else found.rejections
    return frozenset(str(row["check"]) for row in rows if row["decisive"] and _card(row).level is Level.BEAT)


def _card(row: Mapping[str, object]) -> Check:
    return _CARDS[str(row["check"])]


BREATHING = Breathing()
VARIANTS: dict[str, dict[str, Conditions]] = {
    "usual": {},
    "breathing": {"rest": Conditions(duration_s=20.0, breathing=BREATHING)},
    "irregular": {"rest": Conditions(duration_s=20.0, rr_spread=0.08)},
}
"""What a sound heart may do at rest, and says so: nothing unusual, breathe, beat unevenly."""


def clean_ones(heart: str, rate_hz: float) -> Iterator[Clean]:
    """Return what is found in acquisitions of a heart that have nothing wrong with them."""
    for number, (variant, conditions) in enumerate(VARIANTS.items()):
        recipe = clean_recipe(heart, rate_hz, 20 + 10 * number + seed_of(heart), conditions=conditions)
        acquisition, _ = clean_acquisition(recipe.heart, rate_hz, recipe.seed // 100, conditions=conditions)
        found = _assessed(acquisition)
        if found is None:
            yield Clean(heart, rate_hz, variant, 0, ("readable",), (), ())
            continue
        above = [row for row in found.measures if _card(row).level is not Level.BEAT and row["verdict"] != "not evaluated"]
        named = {verdict: tuple(str(row["check"]) for row in above if row["verdict"] == verdict) for verdict in ("fail", "suspect")}
        withheld = tuple(str(row["index"]) for row in found.indices if row["primary"] and row["status"] != "published")
        yield Clean(heart, rate_hz, variant, len(above), named["fail"], named["suspect"], withheld)
