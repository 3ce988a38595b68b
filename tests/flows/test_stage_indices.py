"""What a failed check withholds, and how runs of a stage are pooled."""

import functools
from collections import Counter
from dataclasses import replace

import numpy as np
import pytest

from checks import ALL
from checks.check import Judged, Level, Verdict
from checks.spoils import EVERYTHING
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.stage_indices import PRE_ONSET, Stage, index_rows, stage_v0_ml, stages_of
from metrics.indices import ALL as INDICES
from metrics.indices.card import Source
from tests.checks.made_subjects import CHECKS, declared, judged_run, simulated

OUT_OF_SIGHT = frozenset({"V20", "V30"})
"""An ordinary left ventricle's end-diastolic pressures never come near 20 mmHg."""
KNOWN = frozenset(index.name for index in INDICES if index.chamber != "RV") - OUT_OF_SIGHT
BY_NAME = {index.name: index for index in INDICES if index.primary}
STEADY = frozenset(index.name for index in INDICES if index.primary and index.source is Source.STEADY)
AREA_M2 = 1.9
REST = Conditions(duration_s=10.0)
RAMP = Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=4.0))


@functools.cache
def run(name, kind="steady", seed=0, manoeuvre="caval-balloon", stage="baseline"):
    """A judged run of an ordinary heart with nothing wrong."""
    conditions = REST if kind == "steady" else RAMP
    facts = {"run": name, "stage": stage, "manoeuvre": None if kind == "steady" else manoeuvre}
    return judged_run(declared(simulated("normal", conditions, seed=seed), **facts))


def ramp(name="ramp", seed=1, **declarations):
    return run(name, "preload-reduction", seed, **declarations)


def failing(verdict, check):
    """The same run with a check failed."""
    failed = Judged(check, np.array([9.0]), (Verdict.FAIL,), np.array([1.0]), np.array([np.nan]))
    kept = tuple(judged for judged in verdict.judged if judged.check.name != check.name)
    return replace(verdict, judged=(failed, *kept))


def rows(*runs, failed=(), bsa_m2=AREA_M2):
    """Every row of the primary estimators of what an ordinary heart lets be seen."""
    chief = {(index.name, index.estimator) for index in INDICES if index.primary}
    found = every_row(*runs, failed=failed, bsa_m2=bsa_m2)
    shown = [row for row in found if row["index"] in KNOWN]
    return [row for row in shown if (row["index"], row["estimator"]) in chief or row["estimator"] == PRE_ONSET]


def every_row(*runs, failed=(), bsa_m2=AREA_M2):
    reasons = {check.name: f"{check.name} failed" for check in failed}
    (stage,) = stages_of(runs, tuple(failed), reasons, bsa_m2)
    return index_rows(stage)


def primary(found):
    return {row["index"]: row for row in found if row["primary"]}


def withheld(found):
    return {name for name, row in primary(found).items() if row["status"] == "withheld"}


def test_a_sound_stage_publishes_every_index_once_and_beside_it_each_run_that_bears_it():
    found = rows(run("rest"), ramp())
    assert withheld(found) == set()
    assert Counter(row["index"] for row in found if row["primary"]) == dict.fromkeys(KNOWN, 1)
    assert all(row["run"] is None for row in found if row["primary"])
    beside = {(row["index"], row["run"]) for row in found if not row["primary"]}
    assert beside == {(name, "rest" if name in STEADY else "ramp") for name in KNOWN}
    assert all(np.isfinite(row["value"]) and row["beats"] >= 3 for row in found)


def test_a_single_run_s_row_says_what_the_pooled_row_says():
    found = rows(run("rest"), ramp())
    for name, row in primary(found).items():
        (beside,) = [other for other in found if other["index"] == name and not other["primary"]]
        assert beside["value"] == pytest.approx(row["value"]), name
        assert (beside["beats"], beside["estimator"], beside["unit"]) == (row["beats"], row["estimator"], row["unit"])


@pytest.mark.parametrize("check", [check for check in ALL if check.level is Level.ACQUISITION], ids=lambda check: check.name)
def test_a_failed_acquisition_check_withholds_exactly_what_it_spoils(check):
    found = rows(run("rest"), ramp(), failed=(check,))
    assert withheld(found) == check.spoils & KNOWN
    for row in found:
        if row["index"] in check.spoils:
            assert (row["value"], row["status"], row["reason"]) == (None, "withheld", f"{check.name} failed")
            assert (row["beats"], row["fit_ci_low"], row["fit_ci_high"]) == (None, None, None)
        else:
            assert (row["status"], row["reason"]) == ("published", None)


@pytest.mark.parametrize("check", [check for check in ALL if check.level is Level.RUN], ids=lambda check: check.name)
def test_a_run_check_failed_by_every_run_withholds_exactly_what_it_spoils(check):
    found = rows(failing(run("rest"), check), failing(ramp(), check))
    assert withheld(found) == (KNOWN if check.spoils >= EVERYTHING else check.spoils & KNOWN)


@pytest.mark.parametrize("check", [check for check in ALL if check.level is Level.RUN], ids=lambda check: check.name)
def test_of_two_runs_the_spoiled_one_alone_drops_out_and_only_of_what_it_spoils(check):
    clean = primary(rows(run("rest"), run("rest-2", seed=2), ramp(), ramp("ramp-2", 3)))
    spoiled = failing(run("rest-2", seed=2), check), failing(ramp("ramp-2", 3), check)
    found = rows(run("rest"), spoiled[0], ramp(), spoiled[1])
    alone = primary(rows(run("rest"), ramp()))
    assert withheld(found) == set()
    for name, row in primary(found).items():
        expected = alone[name] if name in check.spoils else clean[name]
        # end-systole is found by V0 of the stage's line, and that is another one where an occlusion dropped out
        by_v0 = name in {"ESP", "Ea", "EaI", "Ees_Ea", "PE", "PVA", "efficiency"}
        assert row["value"] == pytest.approx(expected["value"], rel=0.01 if by_v0 else 1e-9), name
        if name in check.spoils:
            assert "without run" in row["reason"]
            assert not {"rest-2", "ramp-2"} & {other["run"] for other in found if other["index"] == name}
        else:
            assert row["reason"] is None


def of_estimator(found, name, estimator):
    return [row for row in found if (row["index"], row["estimator"]) == (name, estimator)]


def test_every_estimator_of_the_chamber_stands_beside_the_primary_one_and_none_of_the_other_chamber():
    found = every_row(run("rest"), ramp())
    here = {(index.name, index.estimator) for index in INDICES if index.chamber != "RV"}
    assert {(row["index"], row["estimator"]) for row in found} == here
    for index in INDICES:
        if index.chamber != "RV" and not index.primary:
            whole, *alone = of_estimator(found, index.name, index.estimator)
            assert (whole["run"], whole["primary"]) == (None, False)
            assert {row["run"] for row in alone} <= {"rest", "ramp"}


def test_without_a_body_surface_area_no_row_speaks_of_it():
    indexed = {"EDVI", "ESVI", "SVI", "CI", "EaI"}
    found = every_row(run("rest"), ramp(), bsa_m2=None)
    assert not indexed & {row["index"] for row in found}
    with_area = primary(every_row(run("rest"), ramp(), bsa_m2=2.0))
    assert indexed <= set(with_area)
    assert with_area["SVI"]["value"] == pytest.approx(with_area["SV"]["value"] / 2.0)
    assert with_area["EaI"]["fit_ci_low"] == pytest.approx(with_area["Ea"]["fit_ci_low"] * 2.0)


def test_an_estimator_is_withheld_by_what_reaches_that_which_it_rests_on():
    found = every_row(run("rest"), ramp(), failed=(CHECKS["pressure-sensor"],))
    assert "Ees" not in CHECKS["pressure-sensor"].spoils
    assert [row["status"] for row in of_estimator(found, "Ees", BY_NAME["Ees"].estimator)] == ["published"] * 2
    assert [row["status"] for row in of_estimator(found, "Ees", "single-beat:takeuchi")] == ["withheld"] * 2


def test_an_estimator_beside_the_primary_keeps_its_name_before_the_onset():
    found = every_row(ramp())
    assert len(of_estimator(found, "Ees", "pre-onset:single-beat:takeuchi")) == 2
    counted = Counter((row["index"], row["estimator"], row["run"]) for row in found)
    assert set(counted.values()) == {1}


def test_pooled_steady_beats_are_counted_together():
    found = primary(rows(run("rest"), run("rest-2", seed=2)))
    alone = [primary(rows(one))["EDV"]["beats"] for one in (run("rest"), run("rest-2", seed=2))]
    assert found["EDV"]["beats"] == sum(alone)
    assert found["EDV"]["runs"] == 2


def test_two_occlusions_are_pooled_to_the_mean_of_their_lines_with_a_tighter_interval():
    found = rows(run("rest"), ramp(), ramp("ramp-2", 3))
    slopes = [row["value"] for row in found if row["index"] == "Ees" and not row["primary"]]
    pooled = primary(found)["Ees"]
    assert pooled["value"] == pytest.approx(np.mean(slopes))
    assert pooled["runs"] == 2
    widths = [row["fit_ci_high"] - row["fit_ci_low"] for row in found if row["index"] == "Ees" and not row["primary"]]
    assert pooled["fit_ci_high"] - pooled["fit_ci_low"] < max(widths)


def test_manoeuvres_are_never_pooled():
    found = rows(run("rest"), ramp(), ramp("ramp-2", 3), ramp("tilt", 1, manoeuvre="tilt"))
    pooled = primary(found)["Ees"]
    by_run = {row["run"]: row["value"] for row in found if row["index"] == "Ees" and not row["primary"]}
    assert set(by_run) == {"ramp", "ramp-2", "tilt"}
    assert pooled["value"] == pytest.approx(np.mean([by_run["ramp"], by_run["ramp-2"]]))
    assert pooled["runs"] == 2


def test_of_two_manoeuvres_with_one_run_each_the_first_is_the_stage_s():
    found = rows(run("rest"), ramp("tilt", 3, manoeuvre="tilt"), ramp())
    by_run = {row["run"]: row["value"] for row in found if row["index"] == "Ees" and not row["primary"]}
    assert primary(found)["Ees"]["value"] == by_run["tilt"]


def test_without_a_steady_run_the_beats_before_the_onset_stand_in_and_are_called_so():
    found = primary(rows(ramp()))
    assert {row["estimator"] for name, row in found.items() if name in STEADY} == {"pre-onset"}
    assert found["Ees"]["estimator"] == BY_NAME["Ees"].estimator
    steady = primary(rows(run("rest")))
    for name in ("EDV", "SV", "ESP", "HR"):
        assert found[name]["value"] == pytest.approx(steady[name]["value"], rel=0.04), name
    onset = ramp().subject.window.onset_at
    assert found["EDV"]["beats"] == onset


def test_without_an_occlusion_slopes_are_withheld_with_what_is_missing():
    found = primary(rows(run("rest")))
    assert withheld(list(found.values())) == KNOWN - STEADY
    assert found["Ees"]["reason"] == "the stage has no usable preload-reduction run"
    assert found["ESP"]["status"] == "published"


def test_an_unusable_steady_run_leaves_its_place_to_the_beats_before_the_onset_and_says_so():
    found = primary(rows(failing(run("rest"), CHECKS["time-base"]), ramp()))
    assert found["EDV"]["estimator"] == "pre-onset"
    assert found["EDV"]["reason"].startswith("without run rest")
    assert found["EDV"]["status"] == "published"


def test_what_needs_shut_valves_is_withheld_where_one_is_declared_to_leak():
    rest = run("rest")
    leaking = replace(
        rest, subject=replace(rest.subject, facts=replace(rest.subject.facts, conditions=frozenset({"mitral-regurgitation"})))
    )
    for verdict, status in ((rest, "published"), (leaking, "withheld")):
        told = {row["status"] for row in every_row(verdict, ramp()) if row["estimator"] == "single-beat:takeuchi"}
        assert told == {status}


def test_beats_that_the_same_check_cannot_judge_do_not_stand_in():
    found = primary(rows(failing(run("rest"), CHECKS["edp-drift"]), ramp()))
    assert found["EDP"]["status"] == "withheld"
    assert found["EDP"]["reason"].startswith("without run rest")
    assert found["EDV"]["estimator"] == BY_NAME["EDV"].estimator


def test_only_accepted_beats_bear_an_index():
    whole = run("rest")
    names = list(whole.rejected_by)
    names[2:5] = [("range-edv",)] * 3
    fewer = replace(whole, rejected_by=tuple(names))
    assert primary(rows(fewer))["EDV"]["beats"] == primary(rows(whole))["EDV"]["beats"] - 3
    lost = replace(whole, rejected_by=(("range-edv",),) * len(names))
    found = primary(rows(lost))
    assert found["EDV"]["status"] == "withheld"
    assert "0 accepted steady beats" in found["EDV"]["reason"]


def test_end_systole_is_found_by_v0_of_the_stage_s_own_line_where_there_is_one():
    with_line, without = stages_of((run("rest"), ramp()), (), {}, None)[0], stages_of((run("rest"),), (), {}, None)[0]
    assert stage_v0_ml(with_line) == pytest.approx(primary(index_rows(with_line))["V0"]["value"])
    assert stage_v0_ml(without) is None
    failed = stages_of((run("rest"), failing(ramp(), CHECKS["preload-beats"])), (), {}, None)[0]
    assert stage_v0_ml(failed) is None


def test_stages_stand_in_the_order_their_first_run_does_and_a_missing_label_is_a_stage_of_its_own():
    runs = (run("b", stage="infusion"), run("a"), run("c", stage="infusion"), run("d", stage=None))
    stages = stages_of(runs, (), {}, None)
    assert [stage.name for stage in stages] == ["infusion", "baseline", None]
    assert [[one.subject.facts.run for one in stage.runs] for stage in stages] == [["b", "c"], ["a"], ["d"]]


def test_a_saline_run_belongs_to_no_stage():
    saline = replace(run("rest"), subject=declared(run("rest").subject, kind="saline", run="saline-1"))
    (stage,) = stages_of((run("rest"), saline), (), {}, None)
    assert [one.subject.facts.run for one in stage.runs] == ["rest"]


def test_a_stage_knows_its_runs_by_kind():
    stage = Stage("baseline", (run("rest"), ramp()), (), {})
    assert [one.subject.facts.run for one in stage.of_kind("preload-reduction")] == ["ramp"]


def test_an_index_never_holds_a_value_beside_withheld_nor_infinity():
    every = (
        every_row(run("rest"), ramp(), ramp("ramp-2", 3)) + every_row(run("rest")) + every_row(ramp(), failed=(CHECKS["pressure-zero"],))
    )
    for row in every:
        assert (row["value"] is None) is (row["status"] == "withheld")
        assert row["machine_status"] == row["status"]
        numbers = [row[name] for name in ("value", "ci_low", "ci_high", "fit_ci_low", "fit_ci_high") if row[name] is not None]
        assert np.isfinite(numbers).all()
        if row["value"] is not None and row["fit_ci_low"] is not None:
            assert row["fit_ci_low"] <= row["value"] <= row["fit_ci_high"]
        if row["status"] == "withheld":
            assert row["reason"]
