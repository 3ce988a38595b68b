"""Each check of runs and acquisitions fires in the study of faults at each level it declares.

The cases stand in `firing_cases.txt`; written anew by

    python tests/bench/detection_runs.py --pairs 6 --out study && python tests/bench/firing_cases.py study/detection_runs.csv
"""

from functools import cache
from pathlib import Path

import pytest

from tests.bench.detection_cases import Case, verdicts
from tests.bench.detection_runs import wanted

CASES = Path(__file__).with_name("firing_cases.txt").read_text(encoding="utf-8").splitlines()
ELSEWHERE = {
    "pressure-points suspect": "the study's protocol demands two points; test_pressure_points.py",
    "pressure-zero suspect": "no fault of the study takes one reading of two; test_pressure_calibration.py",
    **dict.fromkeys(
        [
            "clock-agreement suspect",
            "dpdt-quantisation suspect",
            "edp-drift suspect",
            "edp-step suspect",
            "end-systole-hum fail",
            "reference-stroke-volume suspect",
            "ringing suspect",
            "segment-phase suspect",
            "volume-clipping suspect",
        ],
        "no severity of the study falls between the two bounds in any heart tried; the check's own tests",
    ),
}
"""Levels that no case of the study has, and where they are shown."""


def case_of(line):
    level, fault, place, heart, rate_hz = line.split()
    return Case(level, fault, int(place) - 1, heart, float(rate_hz))


@cache
def fired():
    """Every verdict beside pass in the cases, with one case that had it."""
    return {verdict: line for line in CASES for verdict in verdicts(case_of(line))}


@pytest.mark.parametrize("verdict", sorted(wanted()))
def test_every_level_a_check_declares_is_seen(verdict):
    assert verdict in fired() or verdict in ELSEWHERE


def test_nothing_that_the_study_shows_is_said_to_stand_elsewhere():
    assert not set(ELSEWHERE) & set(fired())
