"""What a check or an index is, in words: what it measures, its limits and their basis, what it spoils or needs; a table of all checks."""

from __future__ import annotations

import inspect
import re
import sys

from checks import ALL as CHECKS
from checks import spoils
from checks.check import Check, Level, Limits
from flows.errors import InputError
from flows.study.names import did_you_mean
from metrics.indices import ALL as INDICES
from metrics.indices.card import Index


def explain(name: str) -> str:
    """Return the explanation of a check or an index; raises InputError ("did you mean") for an unknown name."""
    checks = {check.name: check for check in CHECKS}
    indices: dict[str, list[Index]] = {}
    for index in INDICES:
        indices.setdefault(index.name, []).append(index)
    if name in checks:
        return _check(checks[name])
    if name in indices:
        return "\n\n".join(_index(index) for index in sorted(indices[name], key=lambda index: not index.primary))
    remedy = did_you_mean(name, [*checks, *indices])
    problem = "is neither a check nor an index"
    raise InputError(problem, file="explain", field="NAME", value=name, remedy=remedy)


def checks_table() -> str:
    """Return the text of `checks/README.md`: one table of all checks, in the order they are evaluated in."""
    head = ("check", "looks at", "title", "measures", "unit", "limits", "a fail withholds", "revision")
    rows = [
        (
            f"`{check.name}`",
            f"each {check.level}",
            check.title,
            _measured(check),
            "-" if check.is_fact else check.unit,
            _bounds(check),
            _spoiled(check),
            str(check.revision),
        )
        for check in CHECKS
    ]
    lines = ["| " + " | ".join(cell.replace("|", "\\|") for cell in row) + " |" for row in (head, *rows)]
    lines.insert(1, "|" + "---|" * len(head))
    told = "What every check measures and where its limits stand; `beatgate explain NAME` tells why, from which source, and what to do."
    return "\n".join(["# Checks", "", told, "Written by `flows.explain.checks_table`; a test holds it against the code.", "", *lines, ""])


def _measured(check: Check) -> str:
    """Return the first line of a measure's docstring, without what only callers need."""
    lines = (check.measure.__doc__ or "").strip().splitlines()
    if not lines:
        return check.title.removesuffix(" possible")
    return re.sub(r"[;,]? ?shape \([^)]*\)", "", lines[0]).removeprefix("Return ").rstrip(".")


def _bounds(check: Check) -> str:
    sides = [("", check.limits)] + ([("right ventricle: ", check.limits_rv)] if check.limits_rv is not None else [])
    told = [label + ", ".join(f"{n.replace('_', ' ')} {getattr(limits, n):g}" for n in limits.declared()) for label, limits in sides]
    return "; ".join(told)


def _spoiled(check: Check) -> str:
    """Return the name of the set of indices a fail withholds, or how many there are where none has that name."""
    if check.level is Level.BEAT:
        return "the beat"
    if not check.spoils:
        return "nothing"
    named = [name for name, value in vars(spoils).items() if isinstance(value, frozenset) and value == check.spoils]
    return (f"`{named[0]}`, " if named else "") + f"{len(check.spoils)} indices"


def _check(check: Check) -> str:
    lines = [f"{check.name} (check on each {check.level}, revision {check.revision}): {check.title}", "", _source_text(check.measure), ""]
    lines += [f"Measured in: {check.unit}"] if not check.is_fact else ["A fact: it holds or it does not."]
    lines += _limits("Limits", check.limits)
    if check.limits_rv is not None:
        lines += _limits("Limits in the right ventricle", check.limits_rv)
    lines.append(f"In a protocol: [limits.{check.name}] with " + ", ".join(check.limits.declared()))
    if check.spoils:
        lines.append("A fail withholds: " + ", ".join(sorted(check.spoils)))
    if check.corrected:
        lines.append("Short of a fail the fault is taken out by calibration, and recorded as such.")
    if check.required:
        lines.append("Required: a beat it cannot evaluate is rejected.")
    return "\n".join([*lines, f"Remedy: {check.remedy}"])


def _limits(label: str, limits: Limits) -> list[str]:
    bounds = ", ".join(f"{name.replace('_', ' ')} {getattr(limits, name):g}" for name in limits.declared())
    return [f"{label}: {bounds}", f"Basis: {limits.basis}"]


def _index(index: Index) -> str:
    spoilers = [check.name for check in CHECKS if index.exposed & check.spoils]
    return "\n".join(
        [
            f"{index.name} (index, revision {index.revision}): {index.title}",
            "",
            _source_text(index.compute, index),
            "",
            f"Unit: {index.unit}",
            f"Estimator: {index.estimator}" + ("" if index.primary else " (beside the primary one, never mixed with it)"),
            f"Needs: {index.needs}",
            "Withheld when one of these fails: " + ", ".join(spoilers),
        ]
    )


def _source_text(measure: object, card: Index | None = None) -> str:
    """Return the docstring of the module a card stands in: what is measured, why, and the published source."""
    home = inspect.getmodule(measure)
    if card is not None:
        cards = (module for name, module in sorted(sys.modules.items()) if name.startswith("metrics.indices."))
        home = next((module for module in cards if any(value is card for value in vars(module).values())), home)
    return inspect.cleandoc((home.__doc__ if home is not None else None) or "")
