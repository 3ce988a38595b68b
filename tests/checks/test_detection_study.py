"""The study of faults of runs and acquisitions, `tests/bench/detection_runs.py`: its cases, its judgement of outcomes, and two of them."""

import xml.etree.ElementTree as ET
from collections import Counter

import pytest

from tests.bench.detection_cases import (
    CAUTIOUSLY,
    KINDS,
    LADDERS,
    NEEDLESSLY,
    RIGHT,
    RIGHTLY,
    WRONG,
    Case,
    Clean,
    Examined,
    Outcome,
    examined,
    moved,
)
from tests.bench.detection_picture import COLOURS, picture
from tests.bench.detection_runs import cases, offenders, table, totals, unnamed

CASE = Case("run", "pressure-step", 4, "normal", 250.0)


def outcome(kind, index="SV", **changes):
    values = {"sound": 60.0, "true": 60.0, "value": 70.0, "unguarded": 70.0, "reach": 10.0, "told": False, "blamed": ()}
    return Outcome(CASE, index, kind, **(values | changes))


def case_of(*kinds, failed=(), expected=("sensor-step",)):
    return Examined(CASE, tuple(outcome(kind) for kind in kinds), frozenset(failed), frozenset(), frozenset(expected))


def sound(failed=(), suspect=(), withheld=(), verdicts=100):
    return Clean("normal", 250.0, "usual", verdicts, failed, suspect, withheld)


@pytest.mark.parametrize("pairs", [1, 2, 5])
def test_hearts_and_rates_have_their_turn_and_every_severity_is_tried(pairs):
    names, hearts, rates = [name for _, name in LADDERS], [f"heart-{number}" for number in range(12)], (250.0, 1000.0)
    chosen = cases(names, range(6), hearts, rates, pairs)
    assert len(chosen) == len(set(chosen)) == len(LADDERS) * 6 * pairs
    assert set(Counter((case.level, case.fault, case.place) for case in chosen).values()) == {pairs}
    turns = Counter((case.heart, case.rate_hz) for case in chosen)
    assert len(turns) == 24
    assert max(turns.values()) - min(turns.values()) <= 1
    assert chosen == cases(names, range(6), hearts, rates, pairs)


def test_all_hearts_and_rates_are_taken_where_all_are_asked_for():
    chosen = cases(["pressure-step"], [0, 5], ["normal", "right"], (250.0, 1000.0), 0)
    assert {(case.heart, case.rate_hz) for case in chosen} == {(h, r) for h in ("normal", "right") for r in (250.0, 1000.0)}
    assert len(chosen) == 8


def test_a_value_is_off_by_more_than_matters_only_beyond_both_bounds():
    assert moved("SV", 66.0, 60.0, 2.0)
    assert not moved("SV", 62.9, 60.0, 0.0)
    assert not moved("SV", 66.0, 60.0, 7.0)
    assert moved("V0", 3.1, 0.0, 1.0)
    assert not moved("V0", -2.9, 0.0, 1.0)
    assert moved("SV", float("nan"), 60.0, 100.0)


def test_totals_count_what_has_a_target():
    found = [
        case_of(RIGHT, RIGHT, RIGHT, RIGHT),
        case_of(WRONG, RIGHTLY, CAUTIOUSLY, NEEDLESSLY),
        case_of(RIGHTLY, RIGHT, failed=("sensor-step",)),
    ]
    sums = totals(found, [sound(suspect=("noise",)), sound(failed=("hum",), withheld=("SW", "Ees"))])
    assert (sums.wrong, sums.right, sums.needless, sums.cautious, sums.matters, sums.named) == (1, 5, 1, 1, 2, 1)
    assert (sums.clean_fails, sums.clean_suspects, sums.clean_withheld, sums.clean_verdicts) == (1, 1, 2, 200)
    assert sums.right_share == pytest.approx(5 / 6)
    assert len(sums.missed()) == 5


def test_no_target_is_missed_where_all_is_well():
    found = [case_of(*[RIGHT] * 20), case_of(RIGHTLY, failed=("sensor-step",))]
    assert totals(found, [sound()] * 3).missed() == []


def test_what_is_missed_is_told_with_fault_severity_and_index():
    found = [case_of(WRONG), case_of(RIGHT), case_of(NEEDLESSLY, failed=("noise",))]
    (told,) = offenders(found, WRONG)
    assert told.split() == ["1", "run", "pressure-step", "10,", "3", "cases:", "SV", "1", "by", "up", "to", "17%", "[no", "check]"]
    assert unnamed(found)[0].endswith("named: nothing")
    assert len(table(found)) == 4


def test_the_picture_is_well_formed_and_shows_every_kind():
    drawn = ET.fromstring(picture([case_of(*KINDS)]))  # noqa: S314  (our own text)
    fills = [element.get("fill") for element in drawn.iter("{http://www.w3.org/2000/svg}rect")]
    assert set(COLOURS.values()) <= set(fills)


def test_an_offset_nobody_can_tell_is_withheld_rightly_and_what_it_cannot_reach_is_published():
    found = examined(Case("acquisition", "zero-missing", 4, "normal", 250.0))
    kinds = {told.index: told.kind for told in found.outcomes}
    assert kinds["EDP"] == kinds["V0"] == RIGHTLY
    assert kinds["SW"] == kinds["dPdt_max"] == kinds["EDV"] == kinds["PRSW"] == RIGHT
    assert found.matters
    assert found.is_named


def test_what_two_points_undo_is_published_rightly():
    found = examined(Case("acquisition", "gain-shown", 3, "normal", 250.0))
    assert {told.kind for told in found.outcomes} == {RIGHT}
    assert not found.matters
