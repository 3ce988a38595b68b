"""What the pages draw: bounded in size, JSON-able, and true to the rows."""

import json
from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict
from checks.verdicts import Finding
from flows.evidence import LOOPS_SHOWN, REJECTED_SHOWN, TRACE_POINTS, grouped, shown_beats, template, trace
from flows.sources.simulated.acquisition import ECG, PRESSURE, TIME, VOLUME
from flows.sources.simulated.rhythm import Conditions
from tests.checks.made_subjects import CHECKS, drawn
from tests.flows.made_packages import RAMP, REST, acquisition, assessed, declaring, of_run, solving_once, strict_json


@pytest.fixture(scope="module", autouse=True)
def _hearts_solved_once():
    with pytest.MonkeyPatch.context() as patch:
        solving_once(patch)
        yield


@pytest.fixture(scope="module")
def found(tmp_path_factory):
    early = replace(REST, conditions=Conditions(duration_s=18.0, premature_s=(8.0,)))
    return assessed(tmp_path_factory.mktemp("evidence") / "package", acquisition(early, RAMP))


@pytest.fixture(scope="module")
def long(tmp_path_factory):
    """An acquisition whose steady run has some 700 beats, every tenth of them with a lost sample or two."""
    sound = acquisition(REST)
    beats, rate = sound.truth["rest"].beats, 250.0
    low, high = round(float(beats.start_s[0]) * rate), round(float(beats.end_s[-1]) * rate)
    times = -(-700 // len(beats))
    columns = {name: np.tile(values[low:high], times) for name, values in sound.columns["rest"].items() if name != TIME}
    for name in (PRESSURE, VOLUME):
        columns[name][0::3000] = np.nan
        columns[name][1::3000] = np.nan
        columns[name][2::3000] = np.nan
    columns = {TIME: np.arange(columns[ECG].size) / rate} | columns

    def change(manifest):
        del of_run(manifest, "rest")["ended_at"]

    many = replace(declaring(sound, change), columns={"rest": columns})
    return assessed(tmp_path_factory.mktemp("long") / "package", many)


def test_the_evidence_is_json_without_nan_and_comes_back_as_it_was(found):
    text = strict_json(found.evidence)
    assert json.loads(text) == json.loads(json.dumps(found.evidence))
    assert "NaN" not in text
    assert "Infinity" not in text
    assert set(found.evidence) == {"acquisition", "runs", "findings", "indices"}


def test_the_acquisition_is_named_and_its_calibration_told(found):
    named = found.evidence["acquisition"]
    assert (named["site"], named["subject"], named["visit"], named["chamber"]) == ("harbour", "H-1", "visit-1", "LV")
    assert named["recorded_at"].startswith("2026-02-02T08:00:00")
    labels = [label for label, _ in named["calibration"]]
    assert len(labels) == len(set(labels)) >= 6
    assert all(isinstance(text, str) and text for _, text in named["calibration"])
    assert dict(named["calibration"])["Pressure zeros"] == "0 mmHg, 0 mmHg"


def test_a_run_s_verdict_beats_and_window_are_those_of_the_rows(found):
    for drawn_run, row in zip(found.evidence["runs"], found.runs, strict=True):
        for name in ("run", "kind", "stage", "manoeuvre", "verdict", "reasons", "sampling_rate_hz", "duration_s"):
            assert drawn_run[name] == row[name]
        mine = [beat for beat in found.beats if beat["run"] == row["run"]]
        assert [(beat["beat"], beat["verdict"], beat["edv_ml"]) for beat in drawn_run["beats"]] == [
            (beat["beat"], beat["verdict"], beat["edv_ml"]) for beat in mine
        ]
        assert (drawn_run["window_s"] is None) is (row["kind"] == "steady")
        assert (drawn_run["line"] is None) is (row["kind"] == "steady")
    low, high = found.evidence["runs"][1]["window_s"]
    inside = [beat for beat in found.beats if beat["in_window"]]
    assert low == pytest.approx(inside[0]["start_s"])
    assert high == pytest.approx(inside[-1]["end_s"])


def test_the_line_drawn_is_the_index_published(found):
    line = found.evidence["runs"][1]["line"]
    values = {row["index"]: row["value"] for row in found.indices if row["primary"]}
    assert line["ees_mmhg_per_ml"] == pytest.approx(values["Ees"])
    assert line["v0_ml"] == pytest.approx(values["V0"])
    inside = [beat["beat"] for beat in found.beats if beat["in_window"] and beat["verdict"] == "accepted"]
    assert line["beat"] == inside
    assert len(line["volume_ml"]) == len(line["pressure_mmhg"]) == len(inside)


def test_every_loop_has_48_points_and_goes_round_its_beat(found):
    drawn_run = found.evidence["runs"][0]
    assert [loop["beat"] for loop in drawn_run["loops"]] == [beat["beat"] for beat in drawn_run["beats"]]
    for loop, beat in zip(drawn_run["loops"], drawn_run["beats"], strict=True):
        assert len(loop["pressure_mmhg"]) == len(loop["volume_ml"]) == 48
        assert loop["volume_ml"][0] == pytest.approx(beat["edv_ml"], abs=2.5)
        assert max(loop["pressure_mmhg"]) == pytest.approx(beat["pmax_mmhg"], abs=4.0)
    shape = drawn_run["template"]
    assert max(shape["pressure_mmhg"]) == pytest.approx(np.median([beat["pmax_mmhg"] for beat in drawn_run["beats"]]), abs=4.0)


def test_what_was_found_is_told_once_a_check_and_run_fails_first(found):
    told = found.evidence["findings"]
    assert [(entry["check"], entry["verdict"], entry["count"]) for entry in told[:2]] == [
        ("cycle-length", "fail", 1),
        ("post-premature", "fail", 1),
    ]
    assert told[0]["beats"] == [told[1]["beats"][0] - 1]
    assert told[0]["at_s"] == pytest.approx(8.0, abs=1.0)
    verdicts = [entry["verdict"] for entry in told]
    assert verdicts == sorted(verdicts, key=["fail", "not evaluated", "suspect"].index)
    keys = [(entry["check"], entry["run"], entry["verdict"]) for entry in told]
    assert len(keys) == len(set(keys))


def test_the_indices_of_whole_stages_are_kept_each_estimator_beside_the_primary_one(found):
    assert found.evidence["indices"] == [row for row in found.indices if row["run"] is None]
    assert {row["index"] for row in found.evidence["indices"] if row["primary"]} == {row["index"] for row in found.indices}


def test_seven_hundred_beats_keep_the_evidence_bounded(long):
    (drawn_run,) = long.evidence["runs"]
    assert len(drawn_run["beats"]) > 650
    rejected = [beat["beat"] for beat in drawn_run["beats"] if beat["verdict"] == "rejected"]
    assert 20 < len(rejected) < REJECTED_SHOWN
    shown = {loop["beat"] for loop in drawn_run["loops"]}
    assert set(rejected) <= shown
    assert len(shown) <= LOOPS_SHOWN
    assert len(drawn_run["trace"]["time_s"]) <= TRACE_POINTS
    assert len(strict_json(long.evidence)) < 700_000
    told = next(entry for entry in long.evidence["findings"] if entry["check"] == "missing-samples")
    assert told["count"] == len(told["beats"]) == len(rejected)


@pytest.mark.parametrize(("count", "lost"), [(10, 0), (160, 160), (161, 0), (700, 20), (700, 300), (700, 700)])
def test_of_many_beats_the_rejected_are_shown_first_and_the_others_thinned(count, lost):
    accepted = np.ones(count, dtype=bool)
    accepted[np.linspace(0, count - 1, lost).astype(int)] = False
    shown = shown_beats(accepted)
    assert shown.tolist() == sorted(set(shown.tolist()))
    assert shown.size <= LOOPS_SHOWN
    if count <= LOOPS_SHOWN:
        assert shown.size == count
    else:
        assert (~accepted[shown]).sum() == min((~accepted).sum(), REJECTED_SHOWN)
        sound = int(accepted.sum())
        assert accepted[shown].sum() == min(sound, LOOPS_SHOWN - min((~accepted).sum(), REJECTED_SHOWN))


@pytest.mark.parametrize("count", [1, 2, 1499, 1500, 1501, 2999, 3000, 3001, 4499, 4500, 60_000])
def test_a_trace_is_small_in_order_and_keeps_its_extremes(count):
    rng = np.random.default_rng(count)
    pressure, volume = rng.normal(60.0, 30.0, count), rng.normal(100.0, 20.0, count)
    pressure[count // 2], volume[count // 3] = 400.0, 900.0
    signals = replace(drawn().signals, pressure_mmhg=pressure, volume_ml=volume)
    drawn_trace = trace(signals)
    times = drawn_trace["time_s"]
    assert len(times) == len(drawn_trace["pressure_mmhg"]) == len(drawn_trace["volume_ml"]) <= TRACE_POINTS
    assert times == sorted(set(times))
    assert max(drawn_trace["pressure_mmhg"]) == pytest.approx(pressure.max(), abs=0.01)
    assert min(drawn_trace["pressure_mmhg"]) == pytest.approx(pressure.min(), abs=0.01)
    assert max(drawn_trace["volume_ml"]) == pytest.approx(volume.max(), abs=0.01)
    assert times[-1] <= count / 200.0


def test_without_an_accepted_beat_there_is_no_template():
    shapes = np.arange(96.0).reshape(2, 48)
    assert template(shapes, shapes, np.zeros(2, dtype=bool)) is None
    assert template(shapes, shapes, np.array([False, True]))["volume_ml"] == shapes[1].tolist()


def finding(check, run, verdict, *, beat=None, value=None, limit=None, decisive=True):
    return Finding(CHECKS[check], run, beat, 1.0, verdict, decisive, value, limit, f"{check} {beat}", "reject")


def test_findings_are_grouped_worst_first_and_the_worst_of_each_speaks():
    told = grouped(
        [
            finding("loop-closure", "rest", Verdict.SUSPECT, beat=1, value=0.1, limit=0.08, decisive=False),
            finding("loop-closure", "rest", Verdict.FAIL, beat=2, value=0.2, limit=0.15),
            finding("loop-closure", "rest", Verdict.FAIL, beat=5, value=0.6, limit=0.15),
            finding("loop-closure", "ramp", Verdict.FAIL, beat=3, value=0.3, limit=0.15),
            finding("duration", "rest", Verdict.FAIL, value=0.2, limit=0.05),
            finding("zero-drift", None, Verdict.FAIL, value=6.0, limit=5.0),
            finding("sampling-rate", "rest", Verdict.NOT_EVALUATED, decisive=False),
            finding("landmarks", "rest", Verdict.NOT_EVALUATED, beat=7),
        ]
    )
    assert [(entry["check"], entry["run"], entry["verdict"], entry["beats"]) for entry in told] == [
        ("zero-drift", None, "fail", []),
        ("duration", "rest", "fail", []),
        ("loop-closure", "rest", "fail", [2, 5]),
        ("landmarks", "rest", "not evaluated", [7]),
        ("loop-closure", "ramp", "fail", [3]),
        ("loop-closure", "rest", "suspect", [1]),
    ]
    assert (told[2]["value"], told[2]["reason"], told[2]["count"]) == (0.6, "loop-closure 5", 2)
    assert told[0]["spoils"] == sorted(CHECKS["zero-drift"].spoils)
    assert told[0]["remedy"] == CHECKS["zero-drift"].remedy


def test_nothing_found_is_nothing_told():
    assert grouped([]) == []
