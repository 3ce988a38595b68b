"""One acquisition from its files to its rows, through real packages on disk."""

from collections import Counter
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from checks.spoils import PRESSURE_OFFSET
from checks.tables import ALL as TABLES
from flows.assess import assess
from flows.errors import InputError
from flows.sources.simulated.acquisition import PRESSURE, TIME, VOLUME, rest_and_ramp
from flows.sources.simulated.faults import with_columns
from flows.sources.simulated.recorded import ORDINARY
from flows.sources.simulated.rhythm import Conditions
from flows.study.protocol import parse_protocol
from metrics.indices import ALL as INDICES
from metrics.indices.card import Source
from tests.flows.made_packages import (
    BARE,
    COLUMNS,
    OF_THE_NIGHT,
    RAMP,
    REST,
    acquisition,
    assessed,
    declaring,
    indices,
    of_run,
    packed,
    published,
    rejections,
    run_row,
    solving_once,
    strict_json,
)

OUT_OF_SIGHT = {"V20", "V30"}
"""End-diastolic pressures of ordinary hearts never come near 20 mmHg."""
CHIEF = [index for index in INDICES if index.primary and index.chamber != "RV" and index.name not in OUT_OF_SIGHT]
EVERY_INDEX = {index.name for index in CHIEF}
SLOPES = {index.name for index in CHIEF if index.source is not Source.STEADY}


@pytest.fixture(scope="module", autouse=True)
def _hearts_solved_once():
    with pytest.MonkeyPatch.context() as patch:
        solving_once(patch)
        yield


@pytest.fixture(scope="module")
def sound():
    return acquisition()


@pytest.fixture(scope="module")
def found(sound, tmp_path_factory):
    return assessed(tmp_path_factory.mktemp("sound") / "package", sound)


def test_a_sound_acquisition_is_accepted_with_every_beat_and_every_index(found):
    assert (found.acquisition["verdict"], found.acquisition["reasons"]) == ("accepted", None)
    assert found.acquisition["beats"] == found.acquisition["beats_accepted"] == len(found.beats) > 20
    assert {row["verdict"] for row in found.runs} == {"usable"}
    assert published(found) == EVERY_INDEX
    assert not [row for row in found.rejections if row["decisive"]]


def test_every_row_has_the_columns_of_its_table(found):
    assert set(found.acquisition) == set(COLUMNS["acquisitions"]) - OF_THE_NIGHT
    for name in ("runs", "beats", "rejections", "indices"):
        rows = getattr(found, name)
        assert rows
        assert all(set(row) == set(COLUMNS[name]) for row in rows), name
    assert {*found.measures[0]} == {"site", "acquisition", "run", "beat", "check", "level", "value", "verdict", "limit", "unit", "revision"}


def test_every_row_keeps_the_schema_of_its_table(found):
    tables = {str(table.Config.name): table for table in TABLES}
    for name in ("runs", "beats", "rejections", "indices"):
        kinds = tables[name].empty().dtypes
        rows = getattr(found, name)
        frame = pd.DataFrame({column: pd.array([row[column] for row in rows], dtype=kind) for column, kind in kinds.items()})
        tables[name].validate(frame, lazy=True)


def test_the_truth_is_found_within_a_few_percent(found, sound):
    rest, ramp = sound.truth["rest"], sound.truth["ramp"]
    expected = {
        "EDV": (rest.edv_ml, 0.02),
        "SV": (rest.sv_ml, 0.03),
        "ESP": (rest.esp_mmhg, 0.03),
        "Pmax": (rest.pmax_mmhg, 0.02),
        "Ea": (rest.ea_mmhg_per_ml, 0.04),
        "SW": (rest.sw_mmhg_ml, 0.03),
        "HR": (rest.heart_rate_per_min, 0.01),
        "dPdt_max": (rest.dpdt_max_mmhg_per_s, 0.05),
        "Ees": (ramp.ees_mmhg_per_ml, 0.08),
        "PRSW": (ramp.prsw_mmhg, 0.08),
    }
    for name, (value, tolerance) in expected.items():
        assert indices(found)[name]["value"] == pytest.approx(value, rel=tolerance), name


def test_detected_beats_are_accepted_plus_rejected_everywhere(tmp_path):
    early = replace(REST, conditions=Conditions(duration_s=18.0, premature_s=(8.0, 13.0)))
    found = assessed(tmp_path / "package", acquisition(early, RAMP))
    verdicts = Counter(row["verdict"] for row in found.beats)
    assert set(verdicts) == {"accepted", "rejected"}
    assert found.acquisition["beats"] == verdicts.total()
    assert found.acquisition["beats_accepted"] == verdicts["accepted"]
    for run in found.runs:
        mine = [row for row in found.beats if row["run"] == run["run"]]
        assert run["beats"] == len(mine)
        assert run["beats_accepted"] == sum(row["verdict"] == "accepted" for row in mine)
        assert [row["beat"] for row in mine] == list(range(1, len(mine) + 1))
    for beat in found.beats:
        own = [row for row in found.rejections if (row["run"], row["beat"]) == (beat["run"], beat["beat"]) and row["decisive"]]
        assert (beat["verdict"] == "rejected") is bool(own)
        assert beat["reasons"] == (";".join(sorted(row["check"] for row in own)) or None)
    assert verdicts["rejected"] == 4
    assert found.acquisition["verdict"] == "accepted"


def test_exactly_one_row_of_an_index_is_primary_in_each_stage(tmp_path, found):
    two = acquisition(*rest_and_ramp(), *rest_and_ramp("infusion", hour=0.75))
    for one in (found, assessed(tmp_path / "package", two)):
        counts = Counter((row["stage"], row["index"]) for row in one.indices if row["primary"])
        assert set(counts.values()) == {1}
        assert {index for _, index in counts} == EVERY_INDEX | OUT_OF_SIGHT
        assert all(row["run"] is None for row in one.indices if row["primary"])
        rows = Counter((row["stage"], row["index"], row["estimator"], row["run"]) for row in one.indices)
        assert set(rows.values()) == {1}


def test_the_same_package_is_assessed_alike_twice_and_leaves_its_files_alone(tmp_path, sound, found):
    files, _ = packed(tmp_path / "package", sound)
    before = {name: path.read_bytes() for name, path in files.items()}
    again = assessed(tmp_path / "package", sound)
    assert again == found
    assert strict_json(again.evidence) == strict_json(found.evidence)
    assert {name: path.read_bytes() for name, path in files.items()} == before


@pytest.mark.parametrize("lost", ["rest", "ramp"])
def test_a_run_that_cannot_be_read_is_unusable_and_the_others_go_on(tmp_path, sound, lost):
    folder = tmp_path / "package"
    files, manifest = packed(folder, sound)
    files[f"{lost}.csv"].write_bytes(b"")
    found = assess(files, manifest, BARE)
    other = "ramp" if lost == "rest" else "rest"
    row = run_row(found, lost)
    assert (row["verdict"], row["reasons"], row["beats"], row["duration_s"]) == ("unusable", "readable", 0, None)
    assert run_row(found, other)["verdict"] == "usable"
    assert found.acquisition["verdict"] == "queried"
    assert found.acquisition["reasons"] == "readable"
    (told,) = [row for row in rejections(found, "readable") if row["decisive"]]
    assert "is empty" in told["reason"]
    assert told["run"] == lost
    if lost == "ramp":
        assert published(found) == EVERY_INDEX - SLOPES
    else:
        assert published(found) == EVERY_INDEX
        assert indices(found)["EDV"]["estimator"] == "pre-onset"
        assert "is empty" in indices(found)["EDV"]["reason"]
    strict_json(found.evidence)


def test_when_no_run_can_be_read_the_package_is_refused_with_every_reason(tmp_path, sound):
    files, manifest = packed(tmp_path / "package", sound)
    files["rest.csv"].write_bytes(b"")
    files["ramp.csv"].write_text("t_s;p;v\n1,5;2,5;3,5\n")
    with pytest.raises(InputError) as caught:
        assess(files, manifest, BARE)
    assert "rest.csv: is empty" in str(caught.value)
    assert "ramp.csv" in str(caught.value)
    assert caught.value.remedy


def test_a_run_whose_clock_steps_back_is_unusable_for_that_and_not_for_being_unreadable(tmp_path, sound):
    stamps = sound.columns["rest"]["t_s"].copy()
    stamps[1200:] -= 2.0
    found = assessed(tmp_path / "package", with_columns(sound, "rest", {"t_s": stamps}))
    assert (run_row(found, "rest")["verdict"], run_row(found, "rest")["reasons"]) == ("unusable", "time-base")
    assert found.acquisition["reasons"] == "time-base"


def test_without_an_ecg_beats_are_found_by_pressure_alone(tmp_path, found):
    without = assessed(tmp_path / "package", acquisition(with_ecg=False))
    assert without.evidence["runs"][0]["detector"] == "pressure"
    assert found.evidence["runs"][0]["detector"] == "ecg"
    assert without.acquisition["verdict"] == "accepted"
    assert abs(without.acquisition["beats"] - found.acquisition["beats"]) <= 1
    for name in EVERY_INDEX:
        assert indices(without)[name]["value"] == pytest.approx(indices(found)[name]["value"], rel=0.02, abs=1.0), name


def test_without_time_stamps_the_declared_rate_is_the_time_base(tmp_path, found):
    without = assessed(tmp_path / "package", acquisition(with_time=False))
    assert without.acquisition["verdict"] == "accepted"
    assert [row["start_s"] for row in without.beats] == pytest.approx([row["start_s"] for row in found.beats], abs=0.005)


def test_without_an_occlusion_slopes_are_withheld_and_the_rest_is_published(tmp_path):
    found = assessed(tmp_path / "package", acquisition(REST))
    assert found.acquisition["verdict"] == "accepted"
    assert published(found) == EVERY_INDEX - SLOPES
    assert all(row["in_window"] is None for row in found.beats)
    assert all(row["esp_mmhg"] is not None and row["ea_mmhg_per_ml"] is not None for row in found.beats)


def test_the_protocol_may_demand_the_occlusion(tmp_path):
    demanding = parse_protocol(
        b'[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "UTC"\n'
        b'[[visits]]\nname = "visit-1"\nrequired_runs = ["steady", "preload-reduction"]\n',
        file="protocol.toml",
    )
    found = assessed(tmp_path / "package", acquisition(REST), demanding)
    assert (found.acquisition["verdict"], found.acquisition["reasons"]) == ("queried", "required-runs")
    (told,) = rejections(found, "required-runs")
    assert (told["decisive"], told["action"], told["run"], told["value"]) == (True, "query", None, None)
    assert published(found) == EVERY_INDEX - SLOPES


def test_without_a_steady_run_the_beats_before_the_occlusion_stand_in(tmp_path, found):
    alone = assessed(tmp_path / "package", acquisition(RAMP))
    assert published(alone) == EVERY_INDEX
    assert indices(alone)["SV"]["estimator"] == "pre-onset"
    assert indices(alone)["SV"]["value"] == pytest.approx(indices(found)["SV"]["value"], rel=0.04)


def test_without_zero_readings_what_an_offset_reaches_is_withheld(tmp_path, sound, found):
    def change(manifest):
        del manifest["calibration"]["pressure"]["zero_before"], manifest["calibration"]["pressure"]["zero_after"]

    offset = assessed(tmp_path / "package", declaring(sound, change))
    assert (offset.acquisition["verdict"], offset.acquisition["reasons"]) == ("queried", "pressure-zero")
    gone = PRESSURE_OFFSET & EVERY_INDEX
    assert {"EDP", "ESP", "Pmax", "Ea", "Ees_Ea", "V0", "PE"} <= gone
    assert published(offset) == EVERY_INDEX - gone
    for name in EVERY_INDEX - gone:
        assert indices(offset)[name]["value"] == pytest.approx(indices(found)[name]["value"], rel=1e-3), name
    (told,) = rejections(offset, "pressure-zero")
    assert (told["action"], told["decisive"]) == ("withhold", True)


def test_a_single_zero_reading_is_told_and_withholds_nothing(tmp_path, sound):
    def change(manifest):
        del manifest["calibration"]["pressure"]["zero_after"]

    one = assessed(tmp_path / "package", declaring(sound, change))
    assert one.acquisition["verdict"] == "accepted"
    assert published(one) == EVERY_INDEX
    assert [row["verdict"] for row in rejections(one, "pressure-zero")] == ["suspect"]
    assert [row["verdict"] for row in rejections(one, "zero-drift")] == ["not evaluated"]


def test_without_a_reference_nothing_is_compared(tmp_path):
    found = assessed(tmp_path / "package", acquisition(reference=None))
    assert found.acquisition["verdict"] == "accepted"
    for check in ("reference-stroke-volume", "reference-volumes"):
        assert [(row["verdict"], row["decisive"]) for row in rejections(found, check)] == [("not evaluated", False)]


def test_a_constant_offset_the_zeros_show_is_undone(tmp_path, found):
    shifted = acquisition(catheter=replace(ORDINARY, zero_error_mmhg=7.0, pressure_gain=1.02, pressure_shift_mmhg=3.0))
    undone = assessed(tmp_path / "package", shifted)
    assert undone.acquisition["verdict"] == "accepted"
    for name in EVERY_INDEX:
        assert indices(undone)[name]["value"] == pytest.approx(indices(found)[name]["value"], rel=0.02, abs=0.3), name


@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_a_right_ventricle_is_judged_by_its_own_limits(tmp_path, rate_hz):
    right = acquisition(heart="right", rate_hz=rate_hz)
    found = assessed(tmp_path / "package", right)
    assert (found.acquisition["chamber"], found.acquisition["verdict"]) == ("RV", "accepted")
    assert found.acquisition["beats"] == found.acquisition["beats_accepted"]
    # V100 and V120 are a left ventricle's; this right one falls too briefly for a time constant and never fills to 10 mmHg
    assert published(found) == EVERY_INDEX - {"V100", "V120", "tau", "Pinf", "EDPVR_stiffness"}
    assert indices(found)["EDV"]["value"] == pytest.approx(right.truth["rest"].edv_ml, rel=0.02)
    assert indices(found)["Ees"]["value"] == pytest.approx(right.truth["ramp"].ees_mmhg_per_ml, rel=0.1)


def test_a_saline_run_is_listed_and_calibrates_instead_of_being_judged(tmp_path, sound):
    def change(manifest):
        volume = {"volume": dict(of_run(manifest, "rest")["channels"]["volume"])}
        saline = {"run": "saline-1", "kind": "saline", "file": "saline-1.csv", "sampling_rate_hz": 250.0, "channels": volume}
        manifest["runs"].append(saline)

    columns = {**sound.columns, "saline-1": {VOLUME: sound.columns["rest"][VOLUME][499::-1]}}
    with_saline = replace(declaring(sound, change), columns=columns)
    found = assessed(tmp_path / "package", with_saline)
    assert found.acquisition["verdict"] == "accepted"
    assert found.acquisition["runs"] == 3
    row = run_row(found, "saline-1")
    assert (row["verdict"], row["beats"], row["reasons"]) == ("usable", 0, None)
    assert {row["stage"] for row in found.indices} == {"baseline"}
    strict_json(found.evidence)

    files, manifest = packed(tmp_path / "broken", with_saline)
    files["saline-1.csv"].write_bytes(b"")
    broken = assess(files, manifest, BARE)
    assert (run_row(broken, "saline-1")["verdict"], broken.acquisition["verdict"]) == ("unusable", "queried")
    assert published(broken) == EVERY_INDEX


def test_two_stages_have_their_indices_each(tmp_path):
    stronger = replace(acquisition().recipe.heart, ees_mmhg_per_ml=3.6)
    two = acquisition(REST, RAMP, *rest_and_ramp("infusion", hour=0.75, heart=stronger))
    found = assessed(tmp_path / "package", two)
    assert {row["stage"] for row in found.indices} == {"baseline", "infusion"}
    assert published(found, "baseline") == published(found, "infusion") == EVERY_INDEX
    before, after = (indices(found, stage)["Ees"]["value"] for stage in ("baseline", "infusion"))
    assert after == pytest.approx(1.5 * before, rel=0.12)


def test_occlusions_of_one_stage_are_pooled_and_manoeuvres_never(tmp_path):
    again = replace(RAMP, run="ramp-2", hour=0.5)
    third = replace(RAMP, run="ramp-3", hour=0.55)
    plain = acquisition(REST, RAMP, again, third)

    def change(manifest):
        of_run(manifest, "ramp-2")["manoeuvre"] = "tilt"

    pooled, apart = assessed(tmp_path / "pooled", plain), assessed(tmp_path / "apart", declaring(plain, change))
    ees = indices(pooled)["Ees"]["estimator"]
    by_run = {row["run"]: row["value"] for row in pooled.indices if row["index"] == "Ees" and row["run"] and row["estimator"] == ees}
    assert set(by_run) == {"ramp", "ramp-2", "ramp-3"}
    assert indices(pooled)["Ees"]["value"] == pytest.approx(sum(by_run.values()) / 3.0)
    assert indices(apart)["Ees"]["value"] == pytest.approx((by_run["ramp"] + by_run["ramp-3"]) / 2.0)
    assert (indices(pooled)["Ees"]["runs"], indices(apart)["Ees"]["runs"]) == (3, 2)


def test_of_two_steady_runs_the_clipped_one_drops_out_of_what_it_spoils_alone(tmp_path):
    sound = acquisition(REST, replace(REST, run="rest-2", hour=0.4), RAMP)
    top = float(sound.columns["rest-2"][PRESSURE].max())
    clipped = with_columns(sound, "rest-2", {PRESSURE: sound.columns["rest-2"][PRESSURE].clip(max=0.8 * top)})
    found = assessed(tmp_path / "package", clipped)
    assert (run_row(found, "rest-2")["verdict"], run_row(found, "rest-2")["reasons"]) == (
        "usable",
        "pressure-clipping;pressure-clipping-end-systole;pressure-clipping-work",
    )
    assert found.acquisition["verdict"] == "queried"
    assert published(found) == EVERY_INDEX
    runs = {name: row["runs"] for name, row in indices(found).items()}
    assert (runs["Pmax"], runs["SW"], runs["EDV"], runs["HR"]) == (1, 1, 2, 2)
    assert "without run rest-2" in indices(found)["Pmax"]["reason"]
    assert indices(found)["EDV"]["reason"] is None


def test_an_acquisition_none_of_whose_runs_counts_is_rejected_with_the_checks_that_did_it(tmp_path, sound):
    swapped = sound
    for run, columns in sound.columns.items():
        swapped = with_columns(swapped, run, {PRESSURE: columns[VOLUME], VOLUME: columns[PRESSURE]})
    found = assessed(tmp_path / "package", swapped)
    assert found.acquisition["verdict"] == "rejected"
    assert "swapped-channels" in found.acquisition["reasons"].split(";")
    assert found.acquisition["reasons"].split(";") == sorted(set(found.acquisition["reasons"].split(";")))
    assert published(found) == set()
    assert all(row["reason"] for row in found.indices)
    strict_json(found.evidence)


def test_limits_and_policy_of_the_protocol_are_obeyed(tmp_path, sound, found):
    text = b'[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "UTC"\n'
    strict = parse_protocol(text + b"[limits.range-edv]\nfail_above = 100.0\n", file="protocol.toml")
    stricter = assessed(tmp_path / "limits", sound, strict)
    large = [row for row in found.beats if row["edv_ml"] > 100.0]
    assert len([row for row in stricter.beats if row["verdict"] == "rejected"]) == len(large) > 5
    assert {row["limit"] for row in rejections(stricter, "range-edv")} == {100.0}
    suspect = parse_protocol(text + b'[policy]\nsuspect = "reject"\n[limits.loop-closure]\nsuspect_above = 0.0\n', file="protocol.toml")
    doubted = assessed(tmp_path / "policy", sound, suspect)
    told = rejections(doubted, "loop-closure")
    decisive = [row for row in told if row["verdict"] == "suspect"]
    assert all(row["decisive"] and row["action"] == "reject" for row in decisive)
    required = parse_protocol(text + b'[policy]\nrequired_checks = ["cycle-length"]\n', file="protocol.toml")
    demanding = assessed(tmp_path / "required", sound, required)
    assert [row["beat"] for row in demanding.beats if row["verdict"] == "rejected"] == [1, 1]


def test_every_evaluated_value_is_kept_passes_too(found):
    by_level = Counter(row["level"] for row in found.measures)
    assert set(by_level) == {"acquisition", "run", "beat"}
    assert all((row["beat"] is None) is (row["level"] != "beat") for row in found.measures)
    assert {row["verdict"] for row in found.measures} <= {"pass", "suspect", "fail", "not evaluated"}
    passes = [row for row in found.measures if row["verdict"] == "pass"]
    assert passes
    assert all(row["value"] is not None and row["limit"] is None for row in passes)
    keys = [(row["run"], row["beat"], row["check"]) for row in found.measures]
    assert len(keys) == len(set(keys))
    told = {(row["run"], row["beat"], row["check"]) for row in found.rejections if row["beat"] is not None}
    assert told <= set(keys)


def rolled(count):
    return np.random.default_rng(5).standard_normal(count)


MUTILATIONS = {
    "noise": lambda c: {PRESSURE: 50.0 + 30.0 * rolled(c[PRESSURE].size), VOLUME: 100.0 + 20.0 * rolled(c[VOLUME].size)[::-1]},
    "constant": lambda c: {PRESSURE: np.full(c[PRESSURE].size, 7.0), VOLUME: np.zeros(c[VOLUME].size)},
    "upside down": lambda c: {PRESSURE: -c[PRESSURE]},
    "swapped": lambda c: {PRESSURE: c[VOLUME], VOLUME: c[PRESSURE]},
    "backwards": lambda c: {name: c[name][::-1] for name in (PRESSURE, VOLUME)},
    "huge": lambda c: {PRESSURE: 1e12 * c[PRESSURE], VOLUME: -1e9 * c[VOLUME]},
    "one value": lambda c: {VOLUME: np.where(np.arange(c[VOLUME].size) == 40, c[VOLUME], np.nan)},
    "two thirds lost": lambda c: {name: np.where(np.arange(c[name].size) % 3 == 0, c[name], np.nan) for name in (PRESSURE, VOLUME)},
    "a jump of an hour": lambda c: {TIME: np.where(c[TIME] > 4.0, c[TIME] + 3600.0, c[TIME])},
    "time stands still": lambda c: {TIME: np.zeros(c[TIME].size)},
    "one sample": lambda c: {name: values[:1] for name, values in c.items()},
    "a third of a beat": lambda c: {name: values[:80] for name, values in c.items()},
}


@pytest.mark.parametrize("how", MUTILATIONS)
def test_whatever_a_run_holds_the_assessment_stands_and_no_number_in_it_is_wild(tmp_path, sound, found, how):
    columns = sound.columns["rest"]
    broken = assessed(tmp_path / "package", with_columns(sound, "rest", MUTILATIONS[how](dict(columns))))
    strict_json(broken.evidence)
    rows = [broken.acquisition, *broken.runs, *broken.beats, *broken.rejections, *broken.indices, *broken.measures]
    numbers = [value for row in rows for value in row.values() if isinstance(value, float)]
    assert np.isfinite(numbers).all()
    verdicts = Counter(row["verdict"] for row in broken.beats)
    assert broken.acquisition["beats"] == verdicts["accepted"] + verdicts["rejected"]
    assert not any("Warning" in row["reason"] for row in broken.rejections)
    mine = [row for row in broken.beats if row["run"] == "rest"]
    unit_is_wrong = {"pressure-units", "volume-units"} <= set((run_row(broken, "rest")["reasons"] or "").split(";"))
    assert unit_is_wrong or sum(row["verdict"] == "accepted" for row in mine) <= len(mine) // 2
    slope = indices(broken)["Ees"]
    assert slope["status"] == "withheld" or slope["value"] == pytest.approx(indices(found)["Ees"]["value"])
