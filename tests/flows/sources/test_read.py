"""A run's files become channels in base units on one clock."""

import json

import numpy as np
import pytest

from flows.errors import InputError
from flows.sources.read import UNITS, read_run
from flows.study.manifest import read_manifest

CHANNELS = {
    "time": {"column": "t", "unit": "s"},
    "pressure": {"column": "p", "unit": "mm[Hg]"},
    "volume": {"column": "v", "unit": "mL", "calibrated": True},
}


@pytest.fixture
def run(tmp_path):
    """Return a function that writes files and reads the run which names them."""

    def read(files, channels=None, **fields):
        declared = {
            "format": 1,
            "study": "tarn",
            "site": "harbour",
            "subject": "H-001",
            "visit": "baseline",
            "acquisition": "H-001-baseline",
            "recorded_at": "2026-03-04T09:12:00+01:00",
            "chamber": "LV",
            "runs": [
                {"run": "rest-1", "kind": "steady", "file": "rest-1.csv", "sampling_rate_hz": 10, "channels": channels or CHANNELS} | fields
            ],
        }
        manifest = read_manifest(json.dumps(declared).encode(), file="acquisition.json", protocol=None)
        paths = {}
        for number, (name, content) in enumerate(files.items()):
            paths[name] = tmp_path / f"{number}"
            paths[name].write_text(content)
        return read_run(paths, manifest, manifest.runs[0])

    return read


def with_channels(**changes):
    return {name: channel for name, channel in (CHANNELS | changes).items() if channel is not None}


def test_time_stamps_count_from_the_first_sample(run):
    recording = run({"rest-1.csv": "t,p,v\n100.0,1,2\n100.1,3,4\n"})
    assert recording.run == "rest-1"
    assert set(recording.channels) == {"pressure", "volume"}
    pressure = recording.channels["pressure"]
    np.testing.assert_allclose(pressure.time_s, [0.0, 0.1])
    np.testing.assert_array_equal(pressure.samples, [1.0, 3.0])
    assert (pressure.unit, pressure.sampling_rate_hz, pressure.delay_s) == ("mm[Hg]", 10.0, 0.0)


def test_without_a_time_column_the_declared_rate_is_the_time_base(run):
    recording = run({"rest-1.csv": "p,v\n1,2\n3,4\n"}, with_channels(time=None))
    assert recording.channels["pressure"].time_s is None


def test_milliseconds_are_seconds(run):
    recording = run({"rest-1.csv": "t,p,v\n1000,1,2\n1100,3,4\n"}, with_channels(time={"column": "t", "unit": "ms"}))
    np.testing.assert_allclose(recording.channels["volume"].time_s, [0.0, 0.1])


@pytest.mark.parametrize(
    ("channel", "unit", "written", "base"),
    [
        ("pressure", "mm[Hg]", 100.0, 100.0),
        ("pressure", "kPa", 13.3322387415, 100.0),
        ("pressure", "cm[H2O]", 10.0, 7.35559),
        ("volume", "mL", 120.0, 120.0),
        ("volume", "L", 0.12, 120.0),
        ("volume", "mS", 3.0, 3.0),
        ("volume", "S", 0.003, 3.0),
        ("ecg", "mV", 1.0, 1.0),
        ("ecg", "uV", 1000.0, 1.0),
        ("ecg", "V", 0.001, 1.0),
        ("respiration", "cm[H2O]", 10.0, 7.35559),
        ("respiration", "L", 0.5, 500.0),
        ("aortic_pressure", "kPa", 13.3322387415, 100.0),
    ],
)
def test_every_unit_becomes_its_base_unit(run, channel, unit, written, base):
    column = CHANNELS.get(channel, {"column": "x"})["column"]
    recording = run(
        {"rest-1.csv": f"t,p,v,x\n0,{written},{written},{written}\n"}, with_channels(**{channel: {"column": column, "unit": unit}})
    )
    found = recording.channels[channel]
    assert found.unit == UNITS[unit][0]
    np.testing.assert_allclose(found.samples, [base], rtol=1e-6)


def test_a_declared_delay_is_kept_in_seconds_and_not_removed_here(run):
    recording = run({"rest-1.csv": "t,p,v\n0,1,2\n"}, with_channels(pressure={"column": "p", "unit": "mm[Hg]", "delay_ms": 12}))
    assert recording.channels["pressure"].delay_s == pytest.approx(0.012)


def test_a_channel_of_its_own_file_keeps_its_place_on_the_common_clock(run):
    channels = with_channels(ecg={"column": "e", "unit": "mV", "file": "ecg.csv", "sampling_rate_hz": 20})
    recording = run({"rest-1.csv": "t,p,v\n5.0,1,2\n5.1,3,4\n", "ecg.csv": "e,t\n7,5.05\n8,5.1\n9,5.15\n"}, channels)
    np.testing.assert_allclose(recording.channels["pressure"].time_s, [0.0, 0.1])
    np.testing.assert_allclose(recording.channels["ecg"].time_s, [0.05, 0.1, 0.15])
    assert recording.channels["ecg"].sampling_rate_hz == 20.0


def test_a_file_without_the_time_column_is_timed_by_its_rate(run):
    channels = with_channels(ecg={"column": "e", "unit": "mV", "file": "ecg.csv", "sampling_rate_hz": 20})
    recording = run({"rest-1.csv": "t,p,v\n5.0,1,2\n", "ecg.csv": "e\n7\n8\n"}, channels)
    assert recording.channels["ecg"].time_s is None


def test_a_slower_channel_in_the_same_file_ends_where_its_samples_end(run):
    channels = with_channels(respiration={"column": "r", "unit": "V", "sampling_rate_hz": 5})
    recording = run({"rest-1.csv": "t,p,v,r\n0,1,2,1\n0.1,1,2,\n0.2,1,2,\n"}, channels)
    assert recording.channels["respiration"].time_s is None
    np.testing.assert_array_equal(recording.channels["respiration"].samples, [1000.0])
    assert recording.channels["pressure"].samples.size == 3


def test_segments_are_numbered_in_the_order_given(run):
    channels = with_channels(volume=None, segments=[{"column": "g2", "unit": "mS"}, {"column": "g1", "unit": "mS"}])
    recording = run({"rest-1.csv": "t,p,g1,g2\n0,1,5,6\n"}, channels)
    assert set(recording.channels) == {"pressure", "segment-1", "segment-2"}
    np.testing.assert_array_equal(recording.channels["segment-1"].samples, [6.0])


def test_a_dead_channel_beside_pressure_and_volume_is_left_out_but_these_are_refused(run):
    channels = with_channels(ecg={"column": "e", "unit": "mV"})
    assert "ecg" not in run({"rest-1.csv": "t,p,v,e\n0,1,2,\n0.1,1,2,\n"}, channels).channels
    with pytest.raises(InputError, match=r"rest-1.csv: v: holds no sample at all") as caught:
        run({"rest-1.csv": "t,p,v\n0,1,\n0.1,1,\n"})
    assert caught.value.remedy


def test_a_line_without_its_time_is_refused(run):
    with pytest.raises(InputError, match=r"rest-1.csv: t: line 3 has no time stamp"):
        run({"rest-1.csv": "t,p,v\n0,1,2\n,1,2\n0.2,1,2\n"})


def test_a_missing_file_is_answered_with_the_nearest_name(run):
    with pytest.raises(InputError, match="is not in the package") as caught:
        run({"rest_1.csv": "t,p,v\n0,1,2\n"})
    assert caught.value.remedy == "Did you mean 'rest_1.csv'?"


def test_a_kind_nobody_reads_is_named_with_the_kinds_that_are(run):
    with pytest.raises(InputError, match="kind that cannot be read") as caught:
        run({"rest-1.pickle": "x"}, file="rest-1.pickle")
    assert ".csv" in caught.value.remedy


def test_an_upper_case_ending_is_the_same_kind(run):
    assert run({"REST.CSV": "t,p,v\n0,1,2\n"}, file="REST.CSV").channels["volume"].samples.size == 1


def test_time_going_backwards_is_for_the_checks_not_for_the_reader(run):
    recording = run({"rest-1.csv": "t,p,v\n5,1,2\n4,1,2\n6,1,2\n"})
    np.testing.assert_array_equal(recording.channels["pressure"].time_s, [0.0, -1.0, 1.0])
