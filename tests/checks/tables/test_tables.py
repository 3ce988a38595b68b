"""The published tables' schemas: the contract's columns, and what each refuses."""

import pandas as pd
import pandera.errors
import pytest

from checks.tables import ALL, Acquisitions, Beats, Packages, Rejections
from checks.tables.kinds import CONTRACT

COLUMNS = {
    "packages": "site, package, acquisition, version, status, reason, received_at, package_sha256",
    "acquisitions": "site, subject, visit, acquisition, version, chamber, recorded_at, received_at, verdict, machine_verdict, decided_by, "
    "reasons, runs, beats, beats_accepted, package_sha256, protocol_version, protocol_sha256, software_version",
    "runs": "site, acquisition, run, kind, stage, manoeuvre, sampling_rate_hz, duration_s, verdict, machine_verdict, decided_by, reasons, "
    "beats, beats_accepted",
    "beats": "site, acquisition, run, beat, start_s, end_systole_s, end_s, verdict, machine_verdict, decided_by, reasons, in_window, rr_s, "
    "edv_ml, esv_ml, sv_ml, ef, edp_mmhg, esp_mmhg, pmax_mmhg, sw_mmhg_ml, ea_mmhg_per_ml, dpdt_max_mmhg_per_s, dpdt_min_mmhg_per_s, "
    "tau_ms",
    "rejections": "site, acquisition, run, beat, at_s, check, verdict, decisive, value, limit, unit, reason, action",
    "indices": "site, subject, visit, acquisition, chamber, stage, run, index, estimator, primary, value, unit, ci_low, ci_high, "
    "fit_ci_low, fit_ci_high, beats, runs, status, machine_status, reason",
    "changes": "site, subject, visit, acquisition, from_stage, to_stage, index, estimator, part, difference, unit, ci_low, ci_high, "
    "status, reason",
}


UNITS = {
    "_s": "s",
    "_ms": "ms",
    "_hz": "Hz",
    "_ml": "mL",
    "_mmhg": "mm[Hg]",
    "_mmhg_ml": "mm[Hg].mL",
    "_mmhg_per_s": "mm[Hg]/s",
    "_mmhg_per_ml": "mm[Hg]/mL",
}


def frame(schema, **values):
    """One row of a table: every column missing but the given."""
    empty = schema.empty()
    return pd.DataFrame({name: pd.Series([values.get(name)], dtype=dtype) for name, dtype in empty.dtypes.items()})


def refused(schema, **values):
    """The (column, check) pairs a schema refuses in one row."""
    with pytest.raises(pandera.errors.SchemaErrors) as caught:
        schema.validate(frame(schema, **values), lazy=True)
    cases = caught.value.failure_cases
    return set(zip(cases["column"], cases["check"].str.split("(").str[0], strict=True))


A_PACKAGE = {"site": "harbour", "package": "p1", "status": "waiting"}
A_BEAT = {"site": "harbour", "acquisition": "a", "run": "r", "beat": 1, "verdict": "accepted", "machine_verdict": "accepted"}
A_REJECTION = {
    "site": "harbour",
    "acquisition": "a",
    "check": "flat-line",
    "verdict": "fail",
    "decisive": True,
    "reason": "flat",
    "action": "reject",
}


def test_columns_and_order_are_the_contract_s():
    assert CONTRACT == 1
    assert {model.Config.name: ", ".join(model.to_schema().columns) for model in ALL} == COLUMNS
    assert [model.Config.name for model in ALL] == list(COLUMNS)


@pytest.mark.parametrize("schema", ALL, ids=lambda schema: schema.Config.name)
def test_every_column_says_what_it_means_and_every_number_names_its_unit(schema):
    for name, column in schema.to_schema().columns.items():
        assert column.description, name
        assert "unit" in column.metadata, name
        endings = [ending for ending in UNITS if name.endswith(ending)]
        if str(column.dtype) == "float64" and endings:
            assert column.metadata["unit"] == UNITS[max(endings, key=len)], name


@pytest.mark.parametrize("schema", ALL, ids=lambda schema: schema.Config.name)
def test_keys_name_columns_of_existing_tables(schema):
    columns = {name: text.split(", ") for name, text in COLUMNS.items()}
    keys = schema.get_metadata()[schema.Config.name]["dataframe"]
    assert set(keys["primary_key"]) <= set(columns[schema.Config.name])
    for foreign in keys["foreign_keys"]:
        assert set(foreign["fields"]) <= set(columns[schema.Config.name])
        assert set(foreign["references"]) <= set(columns[foreign["table"]])


@pytest.mark.parametrize("schema", ALL, ids=lambda schema: schema.Config.name)
def test_an_empty_table_is_a_table(schema):
    schema.validate(schema.empty(), lazy=True)


def test_missing_is_null_and_accepted():
    Packages.validate(frame(Packages, **A_PACKAGE), lazy=True)
    Beats.validate(frame(Beats, **A_BEAT), lazy=True)
    Rejections.validate(frame(Rejections, **A_REJECTION), lazy=True)


@pytest.mark.parametrize(
    ("schema", "row", "wrong"),
    [
        (Packages, A_PACKAGE | {"status": "lost"}, ("status", "isin")),
        (Packages, A_PACKAGE | {"status": None}, ("status", "not_nullable")),
        (Packages, A_PACKAGE | {"reason": ""}, ("reason", "str_length")),
        (Packages, A_PACKAGE | {"version": 0}, ("version", "greater_than_or_equal_to")),
        (Packages, A_PACKAGE | {"package_sha256": "ABC"}, ("package_sha256", "str_matches")),
        (Beats, A_BEAT | {"edv_ml": float("inf")}, ("edv_ml", "less_than")),
        (Beats, A_BEAT | {"esv_ml": float("-inf")}, ("esv_ml", "greater_than")),
        (Beats, A_BEAT | {"beat": 0}, ("beat", "greater_than_or_equal_to")),
        (Beats, A_BEAT | {"verdict": "queried"}, ("verdict", "isin")),
        (Rejections, A_REJECTION | {"verdict": "pass"}, ("verdict", "isin")),
        (Rejections, A_REJECTION | {"reason": None}, ("reason", "not_nullable")),
    ],
)
def test_a_wrong_cell_is_named(schema, row, wrong):
    assert refused(schema, **row) == {wrong}


def test_a_column_too_many_too_few_or_out_of_place_is_refused():
    good = frame(Packages, **A_PACKAGE)
    for bad in (good.assign(note="x"), good.drop(columns="reason"), good[[*reversed(good.columns)]]):
        with pytest.raises((pandera.errors.SchemaErrors, pandera.errors.SchemaError)):
            Packages.validate(bad, lazy=True)


def test_a_naive_instant_is_refused():
    bad = frame(Packages, **A_PACKAGE)
    bad["received_at"] = pd.Series([pd.Timestamp("2026-03-04T08:12:00")], dtype="datetime64[us]")
    with pytest.raises(pandera.errors.SchemaErrors, match="received_at"):
        Packages.validate(bad, lazy=True)


def test_an_acquisition_without_a_verdict_is_refused():
    with pytest.raises(pandera.errors.SchemaErrors, match="verdict"):
        Acquisitions.validate(frame(Acquisitions, site="harbour", version=1, runs=1, beats=0, beats_accepted=0), lazy=True)
