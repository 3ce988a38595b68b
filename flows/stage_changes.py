"""The rows of the `changes` table: what every index differs by between the stage of reference and each other stage.

A row of part ``total`` for each primary index. For SV, ESP and SW further rows split the total among Ees, V0 (together: contractility), Ea
and EDV as the box model has it, and one, ``model-residual``, holds what the box leaves of it: these rows sum to the total. A difference is
withheld when either stage withholds what it is made of, or estimated it in another way.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from flows.stage_indices import PUBLISHED, WITHHELD, Stage, StageValue
from metrics.indices.changes import BOX, CAUSES, RESIDUAL, Calibrations, Stood, difference_of, split_change
from metrics.signals.facts import PressureCalibration, VolumeCalibration

TOTAL = "total"
BOX_ESTIMATOR = "box:shapley"
"""The estimator of a part, and of what the parts leave: never mixed with the total's own."""

ChangeRow = dict[str, object]


@dataclass(frozen=True, slots=True)
class ValuedStage:
    """A stage and its values."""

    stage: Stage
    values: Sequence[StageValue]

    def primary(self) -> dict[str, StageValue]:
        """Return the primary value of each index by its name."""
        return {str(value.row["index"]): value for value in self.values if value.row["primary"]}


def change_rows(stages: Sequence[ValuedStage], reference: str | None) -> list[ChangeRow]:
    """Return the rows of every other stage of an acquisition against the one of reference, the first where none is named.

    Empty where the acquisition has not both. Runs without a stage are compared with nothing.
    """
    named = {one.stage.name: one for one in stages if one.stage.name is not None}
    first = reference if reference is not None else next(iter(named), None)
    if first not in named:
        return []
    return [row for name, other in named.items() if name != first for row in _pair_rows(named[first], other)]


def _pair_rows(before: ValuedStage, after: ValuedStage) -> list[ChangeRow]:
    was, now = before.primary(), after.primary()
    is_one = _calibrations(before.stage) == _calibrations(after.stage) and len(_calibrations(before.stage)) == 1
    rows: list[ChangeRow] = []
    for name in was:
        if name in now:
            pair = (was[name], now[name])
            rows.append(_total(before, after, pair, is_one=is_one))
            if name in BOX and all(cause in was and cause in now for cause in CAUSES):
                rows += _parts(before, after, pair, {cause: (was[cause], now[cause]) for cause in CAUSES}, is_one=is_one)
    return rows


def _calibrations(stage: Stage) -> set[tuple[PressureCalibration, VolumeCalibration]]:
    """Return the different calibrations of a stage's runs: what was declared, whenever it was.

    A re-zero may stand between two runs, so runs that know of one share nothing with the others (its instant is each run's own).
    """
    facts = [run.subject.facts for run in stage.runs]
    return {
        (
            replace(one.pressure, zeros=tuple(replace(zero, at_s=None) for zero in one.pressure.zeros)),
            replace(one.volume, age_hours=None),
        )
        for one in facts
    }


def _total(before: ValuedStage, after: ValuedStage, pair: tuple[StageValue, StageValue], *, is_one: bool) -> ChangeRow:
    row = _row(before, after, pair, TOTAL, str(pair[0].row["estimator"]))
    why = _missing(before, after, pair)
    if why:
        return row | {"reason": why}
    (one, other), calibrations = _stood(pair), _both(pair, is_one=is_one)
    difference, (low, high) = difference_of(one, other, calibrations)
    told = [f"{stage.stage.name}: {value.row['reason']}" for stage, value in zip((before, after), pair, strict=True) if value.row["reason"]]
    told += _without_interval(low, pair)
    return row | {"difference": difference, "ci_low": low, "ci_high": high, "status": PUBLISHED, "reason": "; ".join(told) or None}


def _parts(
    before: ValuedStage,
    after: ValuedStage,
    pair: tuple[StageValue, StageValue],
    causes: dict[str, tuple[StageValue, StageValue]],
    *,
    is_one: bool,
) -> list[ChangeRow]:
    names = (*CAUSES, RESIDUAL)
    rows = {name: _row(before, after, pair, name, BOX_ESTIMATOR) for name in names}
    why = [told for told in (_missing(before, after, one) for one in (pair, *causes.values())) if told]
    if why:
        return [row | {"reason": "; ".join(why)} for row in rows.values()]
    split = split_change(
        _stood(pair), {name: _stood(one) for name, one in causes.items()}, str(pair[0].row["index"]), _both(pair, is_one=is_one)
    )
    made_of = [value for one in (pair, *causes.values()) for value in one]
    return [
        rows[part.name]
        | {"difference": part.difference, "ci_low": part.interval[0], "ci_high": part.interval[1], "status": PUBLISHED}
        | {"reason": "; ".join(_without_interval(part.interval[0], made_of)) or None}
        for part in split
    ]


def _without_interval(low: float | None, made_of: Sequence[StageValue]) -> list[str]:
    """Return why a difference stands without its interval, nothing where it has one."""
    if low is not None:
        return []
    fits = [value.estimate for value in made_of if value.estimate is not None]
    few = any(fit.fit_low is None or fit.fit_high is None for fit in fits)
    return ["no interval: too few beats for one" if few else "no interval: the calibration's uncertainty is not declared"]


def _row(before: ValuedStage, after: ValuedStage, pair: tuple[StageValue, StageValue], part: str, estimator: str) -> ChangeRow:
    return {
        "from_stage": before.stage.name,
        "to_stage": after.stage.name,
        "index": pair[0].row["index"],
        "estimator": estimator,
        "part": part,
        "difference": None,
        "unit": pair[0].row["unit"],
        "ci_low": None,
        "ci_high": None,
        "status": WITHHELD,
        "reason": None,
    }


def _missing(before: ValuedStage, after: ValuedStage, pair: tuple[StageValue, StageValue]) -> str | None:
    """Return why an index has no difference, None when it has."""
    name = pair[0].row["index"]
    lacking = [(value, stage) for value, stage in zip(pair, (before, after), strict=True) if value.estimate is None]
    if lacking:
        return "; ".join(f"{name} is withheld in {stage.stage.name}: {value.row['reason']}" for value, stage in lacking)
    one, other = (value.row["estimator"] for value in pair)
    if one != other:
        return f"{name} is estimated by {one} in {before.stage.name} and by {other} in {after.stage.name}"
    return None


def _stood(pair: tuple[StageValue, StageValue]) -> tuple[Stood, Stood]:
    one, other = (
        Stood(value.estimate, value.sensitivity) for value in pair if value.estimate is not None and value.sensitivity is not None
    )
    return one, other


def _both(pair: tuple[StageValue, StageValue], *, is_one: bool) -> Calibrations:
    return Calibrations(pair[0].doubt, pair[1].doubt, is_one)
