"""Runs whose beats hold nothing: every check says so, none stumbles over an empty median."""

from __future__ import annotations

from dataclasses import fields, replace

import numpy as np
import pytest

from checks import ALL as CHECKS
from checks.subject import RunSubject
from checks.verdicts import Rules, judge_run
from metrics.signals.beats import Beats
from tests.checks.made_subjects import simulated


def emptied(beats: Beats, count: int) -> Beats:
    """Return the first beats with NaN for every value read from them."""
    held = {field.name: getattr(beats, field.name) for field in fields(beats)}
    arrays = {name: values[:count] for name, values in held.items() if isinstance(values, np.ndarray)}
    return replace(beats, **{name: np.full(count, np.nan) if values.dtype.kind == "f" else values for name, values in arrays.items()})


@pytest.mark.parametrize("count", [0, 1, 5])
def test_no_measure_warns_of_what_is_not_there(count: int) -> None:
    whole = simulated()
    assert whole.beats is not None
    subject = RunSubject(whole.facts, whole.recording, whole.signals, emptied(whole.beats, count))
    troubles = [judged.trouble or "" for judged in judge_run(subject, CHECKS, Rules({})).judged]
    assert not [trouble for trouble in troubles if "Warning" in trouble]
