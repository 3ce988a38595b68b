"""What stages of one acquisition differ by, from packages on disk and from values alone."""

from collections import Counter

import pandas as pd
import pytest

from checks.tables.changes import Changes
from flows.sources.simulated.acquisition import RECORDING_HOUR, rest_and_ramp
from flows.sources.simulated.heart import heart_named, inotrope
from flows.stage_changes import BOX_ESTIMATOR, ValuedStage, change_rows
from flows.stage_indices import Stage, StageValue
from flows.study.protocol import parse_protocol
from metrics.indices import ALL as INDICES
from metrics.indices.card import Estimate, Sensitivity
from metrics.indices.changes import BOX, CAUSES, RESIDUAL
from metrics.signals.uncertainty import CalibrationUncertainty
from tests.flows.made_packages import acquisition, assessed, declaring, indices, of_run, solving_once

STRONGER = rest_and_ramp("infusion", RECORDING_HOUR + 0.4, inotrope(heart_named("normal")))
PROTOCOL = """
[study]
name = "tarn"
version = "1"
[sites.harbour]
timezone = "UTC"
[[stages]]
name = "baseline"
[[stages]]
name = "infusion"
reference = true
"""


@pytest.fixture(scope="module", autouse=True)
def _hearts_solved_once():
    with pytest.MonkeyPatch.context() as patch:
        solving_once(patch)
        yield


@pytest.fixture(scope="module")
def both_stages():
    return acquisition(*rest_and_ramp(), *STRONGER)


@pytest.fixture(scope="module")
def found(both_stages, tmp_path_factory):
    return assessed(tmp_path_factory.mktemp("stages") / "package", declaring(both_stages, certain))


def certain(manifest):
    """Declare every uncertainty there is, so that every interval can be told."""
    manifest.setdefault("calibration", {}).setdefault("pressure", {}).update(
        {"zero_sd_mmhg": 0.5, "points": [{"applied_mmhg": 0.0, "read_mmhg": 0.0}, {"applied_mmhg": 100.0, "read_mmhg": 100.0}]}
    )
    manifest["calibration"].setdefault("volume", {}).update(
        {"method": "saline", "alpha": 1.0, "alpha_sd": 0.04, "alpha_vc_ml": 0.0, "alpha_vc_sd_ml": 3.0}
    )


def totals(found):
    return {row["index"]: row for row in found.changes if row["part"] == "total"}


def parts(found, index):
    return {row["part"]: row for row in found.changes if row["index"] == index and row["part"] != "total"}


def test_every_primary_index_of_both_stages_has_one_total_that_is_their_difference(found):
    before, after = indices(found, "baseline"), indices(found, "infusion")
    assert set(totals(found)) == set(before) & set(after)
    assert max(Counter((row["index"], row["part"]) for row in found.changes).values()) == 1
    for name, row in totals(found).items():
        assert (row["from_stage"], row["to_stage"], row["estimator"]) == ("baseline", "infusion", before[name]["estimator"])
        if row["status"] == "published":
            assert row["difference"] == pytest.approx(after[name]["value"] - before[name]["value"])
            assert row["ci_low"] <= row["difference"] <= row["ci_high"]
        else:
            assert name in row["reason"]
            assert row["difference"] is row["ci_low"] is row["ci_high"] is None


def test_the_rows_are_those_of_the_published_table(found):
    table = pd.DataFrame(found.changes)[list(Changes.to_schema().columns)]
    assert not Changes.validate(table.astype({"reason": "str", "unit": "str"}), lazy=True).empty
    assert {row["site"] for row in found.changes} == {"harbour"}


def test_what_a_common_calibration_leaves_uncertain_cancels(found):
    both = [indices(found, stage)["EDV"] for stage in ("baseline", "infusion")]
    widths = [row["ci_high"] - row["ci_low"] for row in both]
    change = totals(found)["EDV"]
    assert change["ci_high"] - change["ci_low"] < 0.5 * min(widths)


@pytest.mark.parametrize("index", sorted(BOX))
def test_parts_sum_to_the_measured_change(found, index):
    split = parts(found, index)
    assert tuple(split) == (*CAUSES, RESIDUAL)
    assert {row["estimator"] for row in split.values()} == {BOX_ESTIMATOR}
    assert sum(row["difference"] for row in split.values()) == pytest.approx(totals(found)[index]["difference"], abs=1e-9)
    assert all(row["ci_low"] <= row["difference"] <= row["ci_high"] for row in split.values())


def test_an_inotrope_s_change_is_put_down_to_contractility(found):
    # nothing but the slope and the rate of the heart was changed
    split = parts(found, "SV")
    assert split["Ees"]["difference"] + split["V0"]["difference"] > 5.0
    assert split["EDV"]["difference"] < 0.0
    assert abs(split[RESIDUAL]["difference"]) < 1.5


def test_the_stage_of_reference_is_the_protocol_s_else_the_first(both_stages, found, tmp_path):
    named = parse_protocol(PROTOCOL.encode(), file="protocol.toml")
    turned = assessed(tmp_path / "package", declaring(both_stages, certain), named)
    assert {(row["from_stage"], row["to_stage"]) for row in turned.changes} == {("infusion", "baseline")}
    for name, row in totals(turned).items():
        if row["status"] == "published":
            assert row["difference"] == pytest.approx(-totals(found)[name]["difference"]), name


def test_one_stage_has_no_changes(tmp_path):
    assert assessed(tmp_path / "package", acquisition()).changes == []


def test_runs_calibrated_apart_have_the_wider_interval(both_stages, found, tmp_path):
    def apart(manifest):
        certain(manifest)
        for plan in STRONGER:
            own = {"method": "saline", "alpha": 1.0, "alpha_sd": 0.04, "alpha_vc_ml": 0.5, "alpha_vc_sd_ml": 3.0}
            of_run(manifest, plan.run)["calibration"] = {"pressure": manifest["calibration"]["pressure"], "volume": own}

    again = totals(assessed(tmp_path / "package", declaring(both_stages, apart)))["EDV"]
    one = totals(found)["EDV"]
    assert again["difference"] == pytest.approx(one["difference"])
    assert again["ci_high"] - again["ci_low"] > 3.0 * (one["ci_high"] - one["ci_low"])


CERTAIN = CalibrationUncertainty(volume_gain=0.1)
NOW = {"Ees": 2.0, "V0": 10.0, "Ea": 2.0, "EDV": 130.0, "SV": 60.0, "ESP": 120.0, "SW": 7200.0}


def valued(stage, *, withheld=(), estimator="one", few=(), reason=None, more=0.0, doubt=CERTAIN):
    values = []
    for name, was in NOW.items():
        value = was + more
        out = name in withheld
        row = {"index": name, "estimator": estimator, "primary": True, "unit": "mL", "reason": "the heart is shy" if out else reason}
        half = (None, None) if name in few else (value - 1.0, value + 1.0)
        estimate = None if out else Estimate(value, *half, 9)
        values.append(StageValue(row, estimate, None if out else Sensitivity(volume_gain=value), doubt))
    return ValuedStage(Stage(stage, (), (), {}), values)


def of(rows, index, part):
    return next(row for row in rows if (row["index"], row["part"]) == (index, part))


def test_a_difference_is_withheld_with_what_it_lacks_and_where():
    rows = change_rows([valued("rest"), valued("drug", withheld=("V0",))], None)
    assert of(rows, "V0", "total")["reason"] == "V0 is withheld in drug: the heart is shy"
    for index in BOX:
        assert of(rows, index, "total")["status"] == "published"
        for part in (*CAUSES, RESIDUAL):
            row = of(rows, index, part)
            assert (row["status"], row["difference"], row["reason"]) == ("withheld", None, "V0 is withheld in drug: the heart is shy")
    neither = change_rows([valued("rest", withheld=("EDV",)), valued("drug", withheld=("EDV",))], None)
    assert of(neither, "EDV", "total")["reason"] == "EDV is withheld in rest: the heart is shy; EDV is withheld in drug: the heart is shy"


def test_estimates_of_two_kinds_are_never_subtracted():
    rows = change_rows([valued("rest"), valued("drug", estimator="pre-onset")], None)
    assert {row["status"] for row in rows} == {"withheld"}
    assert of(rows, "SV", "total")["reason"] == "SV is estimated by one in rest and by pre-onset in drug"


def test_a_difference_without_an_interval_says_why_and_notes_are_carried_on():
    rows = change_rows([valued("rest", few=("SV",)), valued("drug", reason="without run two: cut short")], None)
    row = of(rows, "SV", "total")
    assert (row["status"], row["ci_low"]) == ("published", None)
    assert row["reason"] == "drug: without run two: cut short; no interval: too few beats for one"
    rows = change_rows([valued("rest", doubt=CalibrationUncertainty()), valued("drug", doubt=CalibrationUncertainty(), more=5.0)], None)
    assert of(rows, "SV", "total")["reason"] == "no interval: the calibration's uncertainty is not declared"


def test_a_stage_without_a_name_and_a_reference_that_was_not_recorded_are_compared_with_nothing():
    assert change_rows([valued(None), valued("drug")], None) == []
    assert change_rows([valued("rest"), valued("drug")], "sham") == []
    assert change_rows([], None) == []


def test_every_other_stage_is_held_against_the_one_of_reference():
    rows = change_rows([valued("low"), valued("rest"), valued("high")], "rest")
    assert {(row["from_stage"], row["to_stage"]) for row in rows} == {("rest", "low"), ("rest", "high")}


def test_what_is_split_is_published_by_indices_there_are():
    assert {*BOX, *CAUSES} <= {index.name for index in INDICES if index.primary}
