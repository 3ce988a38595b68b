"""A check of an acquisition that speaks of its runs one by one acts on those it fails, and on no other."""

from dataclasses import replace

import numpy as np
import pytest

from checks.check import Check, Level, Limits, Measured, Verdict
from checks.spoils import EVERYTHING
from checks.subject import AcquisitionSubject
from checks.verdicts import Rules, doubted, judge_acquisition, judge_run
from metrics.signals.facts import AcquisitionFacts
from tests.checks.made_subjects import drawn

VALUES = {"rest": 3.0, "ramp": 1.0, "other": np.nan}


def card(spoils):
    measured = Measured(np.array(list(VALUES.values())), runs=tuple(VALUES))
    return Check(
        "owl", Level.ACQUISITION, lambda _: measured, "1", Limits(fail_above=2.0), "{value:g} over {limit:g}", "Owl", spoils=spoils
    )


def acted(spoils, run):
    """What the check said of the acquisition, and the verdict on one run after it."""
    subject = drawn(facts=replace(drawn().facts, run=run))
    (judged,), findings = judge_acquisition(AcquisitionSubject(AcquisitionFacts()), [card(spoils)], Rules({}))
    before = judge_run(subject, [], Rules({}))
    return judged, findings, before, doubted(before, findings)


def test_each_run_has_a_value_and_a_verdict_of_its_own():
    judged, findings, *_ = acted(EVERYTHING, "rest")
    assert judged.runs == ("rest", "ramp", "other")
    assert judged.verdict == (Verdict.FAIL, Verdict.PASS, Verdict.NOT_EVALUATED)
    assert [(row.run, row.beat, row.decisive, row.value, row.action) for row in findings] == [
        ("rest", None, True, 3.0, "reject"),
        ("other", None, False, None, "none"),
    ]


def test_a_run_it_fails_is_unusable_and_loses_its_beats():
    _, findings, before, after = acted(EVERYTHING, "rest")
    assert before.is_usable
    assert not after.is_usable
    assert after.failed[-1].name == "owl"
    assert set(after.rejected_by) == {("owl",)}
    assert not after.accepted.any()
    assert not after.subject.accepted.any()
    assert findings[0] in after.findings


@pytest.mark.parametrize("run", ["ramp", "other", "unnamed"])
def test_a_run_it_does_not_fail_stands(run):
    _, _, before, after = acted(EVERYTHING, run)
    assert after.is_usable
    assert after.rejected_by == before.rejected_by
    assert after.spoiled == before.spoiled


def test_one_that_spoils_a_part_leaves_the_beats_alone():
    _, _, before, after = acted(frozenset({"Ees"}), "rest")
    assert after.is_usable
    assert after.spoiled == before.spoiled | {"Ees"}
    assert after.rejected_by == before.rejected_by
