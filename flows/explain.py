"""What a check or an index is, in words: what it measures, its limits and their basis, what it spoils or needs."""

from __future__ import annotations

import inspect
import sys

from checks import ALL as CHECKS
from checks.check import Check, Limits
from flows.errors import InputError
from flows.study.names import did_you_mean
from metrics.indices import ALL as INDICES
from metrics.indices.card import Index


def explain(name: str) -> str:
    """Return the explanation of a check or an index; raises InputError ("did you mean") for an unknown name."""
    checks, indices = {check.name: check for check in CHECKS}, {index.name: index for index in INDICES}
    if name in checks:
        return _check(checks[name])
    if name in indices:
        return _index(indices[name])
    remedy = did_you_mean(name, [*checks, *indices])
    problem = "is neither a check nor an index"
    raise InputError(problem, file="explain", field="NAME", value=name, remedy=remedy)


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
    spoilers = [check.name for check in CHECKS if index.name in check.spoils]
    return "\n".join(
        [
            f"{index.name} (index, revision {index.revision}): {index.title}",
            "",
            _source_text(index.compute, index),
            "",
            f"Unit: {index.unit}",
            f"Estimator: {index.estimator}",
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
