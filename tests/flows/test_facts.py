import json
from dataclasses import replace

import pytest

from flows.facts import acquisition_facts, missing_required, run_facts
from flows.study.manifest import read_manifest
from flows.study.protocol import parse_protocol
from metrics.signals.facts import ReferenceVolumes, ZeroReading

ZEROS = {"zero_before": {"at": "2026-03-04T08:55:00+01:00", "mmhg": 0.2}, "zero_after": {"at": "2026-03-04T10:05:00+01:00", "mmhg": 1.1}}


def run(name="rest-1", **changes):
    declared = {
        "run": name,
        "kind": "steady",
        "stage": "baseline",
        "file": f"{name}.csv",
        "sampling_rate_hz": 250,
        "started_at": "2026-03-04T09:20:00+01:00",
        "ended_at": "2026-03-04T09:20:32+01:00",
        "heart_rate_per_min": 70,
        "channels": {"pressure": {"column": "p", "unit": "mm[Hg]"}, "volume": {"column": "v", "unit": "mL", "calibrated": True}},
    }
    declared |= changes
    return {key: value for key, value in declared.items() if value is not None}


def manifest(*runs, **changes):
    declared = {
        "format": 1,
        "study": "tarn",
        "site": "harbour",
        "subject": "H-014",
        "visit": "baseline",
        "acquisition": "H-014-baseline",
        "recorded_at": "2026-03-04T09:12:00+01:00",
        "chamber": "LV",
        "calibration": {"pressure": ZEROS},
        "runs": list(runs) or [run()],
    }
    return read_manifest(json.dumps(declared | changes).encode(), file="acquisition.json", protocol=None)


def facts(declared, name="rest-1"):
    return run_facts(declared, next(one for one in declared.runs if one.run == name))


def protocol(tables=""):
    text = f'[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n{tables}'
    return parse_protocol(text.encode(), file="protocol.toml")


def test_clock_times_become_seconds_from_the_run_s_first_sample():
    found = facts(manifest())
    assert found.duration_s == 32.0
    assert found.pressure.zeros == (ZeroReading(0.2, -1500.0), ZeroReading(1.1, 2700.0))


def test_the_same_instants_in_another_time_zone_are_the_same_seconds():
    summer = manifest(run(started_at="2026-03-04T08:20:00Z", ended_at="2026-03-04T03:20:32-05:00"))
    assert facts(summer).duration_s == 32.0
    assert facts(summer).pressure == facts(manifest()).pressure


@pytest.mark.parametrize("missing", ["started_at", "ended_at"])
def test_without_both_clock_times_there_is_no_duration(missing):
    assert facts(manifest(run(**{missing: None}))).duration_s is None


def test_without_a_start_the_zeros_have_no_place_in_time():
    found = facts(manifest(run(started_at=None)))
    assert found.pressure.zeros == (ZeroReading(0.2, None), ZeroReading(1.1, None))


def test_many_zeros_and_points_are_kept_in_their_order():
    pressure = ZEROS | {
        "zeros": [{"at": "2026-03-04T09:20:00+01:00", "mmhg": 0.5}, {"mmhg": 0.7}],
        "zero_sd_mmhg": 0.3,
        "points": [{"applied_mmhg": 0, "read_mmhg": 0.1}, {"applied_mmhg": 100, "read_mmhg": 100.6}],
    }
    found = facts(manifest(calibration={"pressure": pressure})).pressure
    assert [(zero.mmhg, zero.at_s) for zero in found.zeros] == [(0.2, -1500.0), (0.5, 0.0), (0.7, None), (1.1, 2700.0)]
    assert found.points == ((0.0, 0.1), (100.0, 100.6))
    assert found.zero_sd_mmhg == 0.3


def test_a_run_s_own_calibration_replaces_the_acquisition_s():
    own = {"pressure": {"points": [{"applied_mmhg": 0, "read_mmhg": 0}, {"applied_mmhg": 50, "read_mmhg": 55}]}}
    declared = manifest(run(), run("rest-2", calibration=own))
    assert facts(declared, "rest-2").pressure.zeros == ()
    assert facts(declared, "rest-2").pressure.points == ((0.0, 0.0), (50.0, 55.0))
    assert facts(declared).pressure.points == ()


def test_a_re_zero_in_one_run_breaks_the_zero_line_of_the_others_too():
    events = [{"at_s": 10.0, "kind": "re-zero"}, {"at_s": 12.0, "kind": "cough"}]
    later = run("rest-2", started_at="2026-03-04T09:30:00+01:00", ended_at="2026-03-04T09:30:30+01:00")
    declared = manifest(run(events=events), later, run("rest-3", started_at=None, ended_at=None))
    assert facts(declared).pressure.re_zeros_s == (10.0,)
    assert facts(declared, "rest-2").pressure.re_zeros_s == (-590.0,)
    assert facts(declared, "rest-3").pressure.re_zeros_s == ()


def test_events_rhythm_and_conditions_reach_the_run():
    events = [{"at_s": 8.0, "kind": "occlusion-on"}, {"at_s": 15.5, "kind": "occlusion-off"}]
    declared = manifest(
        run("ramp", kind="preload-reduction", manoeuvre="tilt", events=events, respiration="held"),
        rhythm="atrial-fibrillation",
        subject_facts={"bsa_m2": 1.9, "conditions": ["shunt", "mitral-regurgitation"]},
    )
    found = facts(declared, "ramp")
    assert found.events == ((8.0, "occlusion-on"), (15.5, "occlusion-off"))
    assert (found.kind, found.manoeuvre, found.rhythm, found.respiration) == ("preload-reduction", "tilt", "atrial-fibrillation", "held")
    assert found.conditions == {"shunt", "mitral-regurgitation"}
    whole = acquisition_facts(declared, protocol())
    assert (whole.bsa_m2, whole.rhythm, whole.conditions) == (1.9, "atrial-fibrillation", found.conditions)


def test_a_raw_volume_carries_its_constants_and_their_age():
    raw = {"pressure": {"column": "p", "unit": "mm[Hg]"}, "volume": {"column": "v", "unit": "mL", "calibrated": False}}
    volume = {"method": "saline", "alpha": 0.82, "alpha_sd": 0.03, "alpha_vc_ml": 48.0, "at": "2026-03-04T09:05:00+01:00"}
    found = facts(manifest(run(channels=raw), calibration={"volume": volume})).volume
    assert (found.calibrated, found.alpha, found.alpha_vc_ml, found.method) == (False, 0.82, 48.0, "saline")
    assert found.age_hours == pytest.approx(0.25)


def test_a_conductance_is_raw_whatever_is_declared_and_brings_its_geometry():
    channels = {"pressure": {"column": "p", "unit": "mm[Hg]"}, "volume": {"column": "g", "unit": "mS", "calibrated": True}}
    sensors = {"volume": {"kind": "conductance", "electrode_spacing_cm": 1.2, "blood_resistivity_ohm_cm": 150}}
    found = facts(manifest(run(channels=channels), sensors=sensors)).volume
    assert (found.calibrated, found.electrode_spacing_cm, found.blood_resistivity_ohm_cm) == (False, 1.2, 150.0)


def test_segments_in_use_are_numbered_whether_named_by_number_or_column():
    segments = [{"column": f"s{number}", "unit": "mL", "calibrated": True} for number in (1, 2, 3)]
    channels = {"pressure": {"column": "p", "unit": "mm[Hg]"}, "segments": segments}
    for used in ([1, 3], ["s1", "s3"]):
        declared = manifest(run(channels=channels), calibration={"volume": {"segments_used": used}})
        assert facts(declared).segments_used == (1, 3)
    assert facts(manifest(run(channels=channels))).segments_used == ()


def test_the_reference_is_copied_and_may_be_absent():
    reference = {"source": "CMR", "edv_ml": 140, "esv_ml": 65, "sv_ml": 75, "sv_sd_ml": 4}
    declared = manifest(calibration={"volume": {"reference": reference}})
    assert acquisition_facts(declared, protocol()).reference == ReferenceVolumes("CMR", 140.0, 65.0, 75.0, 4.0)
    assert acquisition_facts(manifest(), protocol()).reference is None


def test_runs_are_counted_by_kind():
    declared = manifest(run(), run("rest-2"), run("ramp", kind="preload-reduction"))
    assert acquisition_facts(declared, protocol()).runs_by_kind == {"steady": 2, "preload-reduction": 1}


VISIT = (
    '[[visits]]\nname = "baseline"\nrequired_runs = ["steady", "steady", "preload-reduction"]\nrequired_stages = ["baseline", "infusion"]\n'
)


def test_what_the_visit_demands_and_the_package_lacks_is_named_in_the_protocol_s_order():
    assert missing_required(manifest(), protocol(VISIT)) == ("steady", "preload-reduction", "infusion")
    complete = manifest(run(), run("rest-2", stage="infusion"), run("ramp", kind="preload-reduction"))
    assert missing_required(complete, protocol(VISIT)) == ()


def test_the_stage_changes_are_counted_from_is_the_protocol_s():
    assert acquisition_facts(manifest(), protocol()).reference_stage is None
    stages = '[[stages]]\nname = "infusion"\n[[stages]]\nname = "baseline"\nreference = true\n'
    assert acquisition_facts(manifest(), protocol(stages)).reference_stage == "baseline"


def test_a_visit_the_protocol_does_not_list_demands_nothing():
    assert missing_required(manifest(), protocol()) == ()
    assert missing_required(manifest(visit="month-6"), protocol(VISIT)) == ()


def test_facts_hold_no_clock():
    found = facts(manifest())
    assert replace(found, duration_s=32.0) == found
    assert "2026" not in repr(found)
    assert "2026" not in repr(acquisition_facts(manifest(), protocol(VISIT)))
