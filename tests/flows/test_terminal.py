"""What a person reads on the terminal: every finding with its remedy, every withheld index with its reason, nothing twice."""

import json
from datetime import datetime, timedelta, timezone

import pytest

from flows.assess import Assessment
from flows.terminal import number_ranges, tables_json, verdict_lines

KEY = {"site": "harbour", "subject": "H-001", "visit": "visit-1", "acquisition": "H-001-visit-1", "chamber": "LV"}


def index(name, **changes):
    row = {"stage": "baseline", "run": None, "index": name, "estimator": "box", "primary": True, "value": 1.23456, "unit": "mL"}
    row |= {"ci_low": None, "ci_high": None, "fit_ci_low": None, "fit_ci_high": None, "status": "published", "reason": None}
    return KEY | row | changes


def beat(number, verdict="rejected", reasons="flat-line;loop-closure"):
    return {"run": "rest", "beat": number, "verdict": verdict, "reasons": reasons}


def finding(check, verdict, **changes):
    row = {"check": check, "run": "rest", "beats": [], "count": 1, "verdict": verdict, "reason": f"{check} said so", "remedy": "mend it"}
    return row | changes


@pytest.fixture
def assessment():
    recorded_at = datetime(2026, 2, 2, 10, 10, tzinfo=timezone(timedelta(hours=1)))
    run = {"run": "rest", "kind": "steady", "stage": "baseline", "manoeuvre": None, "sampling_rate_hz": 250.0, "duration_s": 24.04}
    change = {"from_stage": "baseline", "to_stage": "dose 1", "index": "Ees", "part": "total", "difference": 0.5, "unit": "mm[Hg]/mL"}
    return Assessment(
        acquisition=KEY
        | {"recorded_at": recorded_at, "verdict": "queried", "reasons": "zero-drift", "runs": 1, "beats": 6, "beats_accepted": 2},
        runs=[run | {"verdict": "usable", "reasons": "time-gaps;duration", "beats": 6, "beats_accepted": 2}],
        beats=[beat(1), beat(2), beat(3, reasons="cycle-length"), beat(4), beat(5, "accepted", None), beat(6, "accepted", None)],
        rejections=[],
        indices=[
            index("EDV", ci_low=1.1, ci_high=1.3, fit_ci_low=1.2, fit_ci_high=1.25),
            index("EF", unit="1", fit_ci_low=1.2, fit_ci_high=1.25),
            index("EDV", primary=False, estimator="other"),
            index("EDP", status="withheld", value=None, reason="the zero moved"),
            index("ESP", status="withheld", value=None, reason="the zero moved"),
            index("Ees", status="withheld", value=None, reason="no ramp"),
        ],
        changes=[change | {"ci_low": 0.1, "ci_high": 0.9, "status": "published"}, change | {"status": "withheld"}],
        evidence={
            "findings": [
                finding("zero-drift", "fail", run=None),
                finding("flat-line", "fail", beats=[1, 2, 4], count=3),
                finding("range-edp", "suspect"),
                finding("post-premature", "not evaluated"),
            ],
        },
    )


def test_the_whole_page(assessment):
    assert "\n".join(verdict_lines(assessment)) == (
        "QUERIED  H-001-visit-1 (harbour, subject H-001, visit-1), LV, 2 of 6 beats accepted\n"
        "\n"
        "Why\n"
        "  fail     zero-drift: zero-drift said so\n"
        "           to do: mend it\n"
        "  fail     flat-line in rest, 3 beats: flat-line said so\n"
        "           to do: mend it\n"
        "  suspect  range-edp in rest: range-edp said so\n"
        "\n"
        "Runs\n"
        "  usable    rest: steady baseline, 24.0 s at 250 Hz, 2 of 6 beats accepted (time-gaps, duration)\n"
        "\n"
        "Rejected beats\n"
        "  rest: 1-2, 4 for flat-line, loop-closure\n"
        "  rest: 3 for cycle-length\n"
        "\n"
        "Indices (95 % interval)\n"
        "  baseline  EDV  1.235 mL  1.1 to 1.3              box\n"
        "  baseline  EF   1.235     1.2 to 1.25, fit alone  box\n"
        "\n"
        "Changes between stages (95 % interval)\n"
        "  baseline to dose 1  Ees total  0.5 mm[Hg]/mL  0.1 to 0.9\n"
        "\n"
        "Withheld\n"
        "  baseline  EDP, ESP: the zero moved\n"
        "  baseline  Ees: no ramp\n"
        "\n"
        "For research and quality assurance only; not for diagnosis or treatment. Licensed clinicians and local rules decide."
    )


def test_what_is_empty_has_no_heading():
    bare = Assessment(KEY | {"verdict": "accepted", "beats": 0, "beats_accepted": 0}, [], [], [], [])
    lines = verdict_lines(bare)
    assert lines[0].startswith("ACCEPTED")
    assert len(lines) == 3


def test_tables_as_json_hold_instants_in_utc_and_null(assessment):
    tables = json.loads(tables_json(assessment))
    assert tables["acquisition"]["recorded_at"] == "2026-02-02T09:10:00Z"
    assert tables["runs"][0]["manoeuvre"] is None
    assert "evidence" not in tables


def test_what_is_no_json_is_an_error_not_a_guess(assessment):
    assessment.acquisition["beats"] = float("nan")
    with pytest.raises(ValueError, match="JSON compliant"):
        tables_json(assessment)
    assessment.acquisition["beats"] = {1}
    with pytest.raises(TypeError, match="set has no place"):
        tables_json(assessment)


@pytest.mark.parametrize(("numbers", "text"), [([], ""), ([4], "4"), ([3, 1, 2], "1-3"), ([1, 3, 4], "1, 3-4")])
def test_numbers_in_short(numbers, text):
    assert number_ranges(numbers) == text
