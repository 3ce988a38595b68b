"""Which calibration an interval is of, and what replicates that differ do to it."""

import functools
from dataclasses import replace

import pytest

from checks.verdicts import RunVerdict
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.stage_indices import index_rows, stages_of
from metrics.signals.facts import PressureCalibration, VolumeCalibration, ZeroReading
from tests.checks.made_subjects import CHECKS, declared, judged_run, simulated

RAMP = Conditions(duration_s=14.0, occlusion=Occlusion(onset_s=4.0))
PRESSURE = PressureCalibration(points=((0.0, 0.0), (100.0, 100.0)), zeros=(ZeroReading(0.2, -900.0),), zero_sd_mmhg=0.3)
VOLUME = VolumeCalibration(alpha=0.8, alpha_sd=0.04, alpha_vc_ml=40.0, alpha_vc_sd_ml=2.0)


@functools.cache
def judged(name, kind, seed):
    conditions = Conditions(duration_s=10.0) if kind == "steady" else RAMP
    manoeuvre = None if kind == "steady" else "caval-balloon"
    facts = {"run": name, "stage": "baseline", "manoeuvre": manoeuvre, "pressure": PRESSURE, "volume": VOLUME}
    return judged_run(declared(simulated("normal", conditions, seed=seed), **facts))


def rest(name="rest", seed=0, **calibration) -> RunVerdict:
    return with_own(judged(name, "steady", seed), **calibration)


def ramp(name="ramp", seed=1, **calibration) -> RunVerdict:
    return with_own(judged(name, "preload-reduction", seed), **calibration)


def with_own(verdict, **calibration):
    """The same run, its beats what they were, under another declaration of how uncertain its calibration is."""
    subject = verdict.subject
    again = type(subject)(replace(subject.facts, **calibration), subject.recording, subject.signals, subject.beats, subject.accepted)
    return replace(verdict, subject=again)


def rows(*runs):
    (stage,) = stages_of(runs, (), {}, None)
    return index_rows(stage)


def of(found, index, run=None):
    """The primary row of an index, or the first of one run's."""
    return next(row for row in found if row["index"] == index and row["run"] == run and (row["primary"] or run is not None))


def half(row):
    return (row["ci_high"] - row["ci_low"]) / 2.0


LOOSE = replace(VOLUME, alpha_sd=0.16)
SILENT = replace(VOLUME, alpha_sd=None, alpha_vc_sd_ml=None)


def test_the_calibration_joins_the_interval_of_the_fit():
    found = rows(rest(), ramp())
    for name in ("Ees", "SV", "EDP", "V0", "Ees_Ea", "SW"):
        row = of(found, name)
        assert row["ci_low"] < row["fit_ci_low"] < row["value"] < row["fit_ci_high"] < row["ci_high"]
    rate = of(found, "HR")
    assert (rate["ci_low"], rate["ci_high"]) == (rate["fit_ci_low"], rate["fit_ci_high"])
    # SV: alpha is known to 5 %
    row = of(found, "SV")
    fit = (row["fit_ci_high"] - row["fit_ci_low"]) / 2.0
    assert half(row) == pytest.approx((fit**2 + (1.959964 * 0.05 * row["value"]) ** 2) ** 0.5, rel=0.02)


def test_each_run_s_row_has_its_own_calibration_and_the_pooled_row_the_larger():
    found = rows(rest("one"), rest("two", 2, volume=LOOSE), ramp())
    one, two, both = (of(found, "SV", run) for run in ("one", "two", None))
    assert half(one) == pytest.approx(1.959964 * 0.05 * one["value"], rel=0.05)
    assert half(two) == pytest.approx(1.959964 * 0.2 * two["value"], rel=0.05)
    assert half(both) == pytest.approx(1.959964 * 0.2 * both["value"], rel=0.05)


def test_a_run_that_bears_nothing_takes_no_interval_away():
    unknown = rest("two", 2, volume=SILENT)
    assert of(rows(rest("one"), unknown), "SV")["ci_low"] is None
    spoiled = replace(unknown, doubted_by=(CHECKS["volume-gain-known"],))
    row = of(rows(rest("one"), spoiled), "SV")
    assert row["ci_low"] is not None
    assert row["runs"] == 1


def test_gains_do_not_cancel_between_runs_of_different_calibration():
    assert of(rows(rest(), ramp()), "Ees_Ea")["ci_low"] is not None
    other = rows(rest(), ramp(volume=replace(VOLUME, alpha=0.9)))
    for name in ("Ees_Ea", "PVA", "efficiency"):
        row = of(other, name)
        assert (row["ci_low"], row["ci_high"]) == (None, None)
        assert row["fit_ci_low"] is not None
    assert of(other, "Ees")["ci_low"] is not None


def test_one_calibration_read_from_two_beginnings_is_one():
    later = replace(PRESSURE, zeros=(ZeroReading(0.2, -1500.0),))
    found = rows(rest(), ramp(pressure=later, volume=replace(VOLUME, age_hours=1.0)))
    assert of(found, "Ees_Ea")["ci_low"] is not None


def test_zeros_without_a_clock_reach_the_interval_of_end_diastolic_pressure():
    zeros = (ZeroReading(0.0, None), ZeroReading(3.0, None))
    row = of(rows(rest(pressure=replace(PRESSURE, zeros=zeros))), "EDP")
    assert half(row) == pytest.approx(1.959964 * (1.5**2 + 0.3**2) ** 0.5, rel=0.05)


def test_where_two_points_are_all_that_is_said_of_the_gain_only_what_it_moves_is_untold():
    zeros = (ZeroReading(0.0, None), ZeroReading(3.0, None))
    unsaid = replace(PRESSURE, zeros=zeros, zero_sd_mmhg=None)
    found = rows(rest(pressure=unsaid), ramp(pressure=unsaid))
    assert of(found, "EDP")["ci_low"] is None
    ratio = of(found, "Ees_Ea")
    fit = (ratio["fit_ci_high"] - ratio["fit_ci_low"]) / 2.0
    by_mmhg = ratio["value"] / of(found, "ESP")["value"]
    assert half(ratio) == pytest.approx((fit**2 + (1.959964 * 1.5 * by_mmhg) ** 2) ** 0.5, rel=0.02)
