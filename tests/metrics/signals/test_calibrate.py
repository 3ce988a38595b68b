import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metrics.signals.calibrate import calibrated, calibrated_pressure_mmhg, calibrated_volume_ml, two_point_line, zero_error_mmhg
from metrics.signals.facts import PressureCalibration, RunFacts, VolumeCalibration, ZeroReading
from metrics.signals.filters import zero_phase
from metrics.signals.recording import Channel, Recording

RATE_HZ = 250.0
FACTS = RunFacts("rest", "steady", sampling_rate_hz=RATE_HZ)


def zeros(*readings, **fields):
    return PressureCalibration(zeros=tuple(ZeroReading(mmhg, at_s) for at_s, mmhg in readings), **fields)


def at(calibration, *times_s):
    return zero_error_mmhg(np.array(times_s, dtype=np.float64), calibration).tolist()


def ejection(count=1000, rate_hz=RATE_HZ):
    """Pressure and volume of a made-up heart beating at 1 Hz, smooth enough for the filter to leave alone."""
    time_s = np.arange(count) / rate_hz
    return 60.0 + 50.0 * np.sin(2.0 * np.pi * time_s), 100.0 + 30.0 * np.cos(2.0 * np.pi * time_s)


def recording(pressure=None, volume=None, **others):
    default_pressure, default_volume = ejection()
    channels = {
        "pressure": Channel(default_pressure, "mm[Hg]", RATE_HZ) if pressure is None else pressure,
        "volume": Channel(default_volume, "mL", RATE_HZ) if volume is None else volume,
    }
    return Recording("rest", channels | others)


def test_the_two_point_line_of_a_sensor_in_its_own_units():
    # worked: .10 at 0 and 1.10 at 100 mmHg make .75 a pressure of 65
    points = ((0.0, 0.10), (100.0, 1.10))
    assert calibrated_pressure_mmhg(np.array([0.75]), np.zeros(1), PressureCalibration(points)) == pytest.approx(65.0)


def test_more_than_two_points_are_fitted_and_fewer_than_two_leave_the_pressure_alone():
    assert two_point_line(((0.0, 1.0), (50.0, 54.0), (100.0, 101.0))) == pytest.approx((1.0, 2.0))
    assert two_point_line(()) == two_point_line(((100.0, 98.0),)) == two_point_line(((50.0, 49.0), (50.0, 51.0))) == (1.0, 0.0)


def test_a_sensor_that_reads_the_same_at_every_pressure_has_no_line():
    with pytest.raises(ValueError, match="same"):
        two_point_line(((0.0, 3.0), (100.0, 3.0)))


def test_zero_drifts_along_a_straight_line_between_its_readings():
    # worked: 0.5 before, 3.5 an hour later, so 1.5 after 20 min, and 12 becomes 10.5
    drift = zeros((0.0, 0.5), (3600.0, 3.5))
    assert at(drift, 0.0, 1200.0, 3600.0) == pytest.approx([0.5, 1.5, 3.5])
    assert calibrated_pressure_mmhg(np.array([12.0]), np.array([1200.0]), drift) == pytest.approx(10.5)


def test_outside_its_readings_the_nearest_zero_holds_and_their_order_does_not_matter():
    assert at(zeros((3600.0, 3.5), (0.0, 0.5)), -900.0, 7200.0) == [0.5, 3.5]


def test_a_zero_reading_passes_the_two_point_line_too():
    shown = zeros((0.0, 2.25), points=((0.0, 1.2), (100.0, 106.2)))
    assert at(shown, 5.0) == pytest.approx([1.0])
    assert calibrated_pressure_mmhg(np.array([1.2 + 1.05 * 91.0]), np.zeros(1), shown) == pytest.approx(90.0)


def test_the_zero_line_is_broken_where_the_recorder_was_zeroed_again():
    pieces = zeros((0.0, 1.0), (100.0, 3.0), (200.0, 0.0), (300.0, 2.0), re_zeros_s=(150.0,))
    assert at(pieces, 50.0, 140.0, 149.9, 150.0, 160.0, 250.0, 400.0) == pytest.approx([2.0, 3.0, 3.0, 0.0, 0.0, 1.0, 2.0])


def test_a_piece_without_a_reading_of_its_own_has_no_known_error():
    assert at(zeros((0.0, 4.0), re_zeros_s=(10.0,)), 5.0, 15.0) == [4.0, 0.0]


def test_readings_without_a_clock_give_their_mean_and_no_reading_gives_nothing():
    assert at(zeros((None, 1.0), (None, 4.0)), 0.0, 100.0) == [2.5, 2.5]
    assert at(zeros((0.0, 1.0), (None, 4.0)), 0.0, 100.0) == [2.5, 2.5]
    assert at(PressureCalibration(), 0.0, 100.0) == [0.0, 0.0]


@given(st.floats(-10.0, 10.0), st.floats(0.5, 2.0), st.floats(-5.0, 5.0), st.lists(st.floats(-50.0, 300.0), min_size=1, max_size=8))
def test_what_a_sensor_does_to_a_pressure_is_undone(shift, gain, error, pressures):
    true = np.array(pressures)
    shown = gain * (true + error) + shift
    calibration = zeros((0.0, gain * error + shift), points=((0.0, shift), (100.0, 100.0 * gain + shift)))
    np.testing.assert_allclose(calibrated_pressure_mmhg(shown, np.zeros(true.size), calibration), true, atol=1e-8)


def test_conductance_becomes_volume_by_baan():
    # worked: rho 150 ohm cm, L 1 cm, alpha .8, G .90 S, Gp .30 S: alpha Vc 45, so 112.5 mL
    known = VolumeCalibration(alpha=0.8, alpha_vc_ml=45.0, electrode_spacing_cm=1.0, blood_resistivity_ohm_cm=150.0)
    assert calibrated_volume_ml(np.array([900.0]), "mS", known) == pytest.approx(112.5)


def test_raw_volume_becomes_volume_by_gain_and_parallel_volume():
    # worked: raw 180 and 120 against 140 and 65: alpha .8, alpha Vc 68
    raw = VolumeCalibration(calibrated=False, alpha=0.8, alpha_vc_ml=68.0)
    assert calibrated_volume_ml(np.array([180.0, 120.0]), "mL", raw) == pytest.approx([140.0, 65.0])


def test_a_calibrated_volume_is_taken_as_it_is_and_an_unknown_gain_as_one():
    samples = np.array([100.0, 40.0])
    assert calibrated_volume_ml(samples, "mL", VolumeCalibration(alpha=0.5, alpha_vc_ml=30.0)).tolist() == [100.0, 40.0]
    assert calibrated_volume_ml(samples, "mL", VolumeCalibration(calibrated=False)).tolist() == [100.0, 40.0]
    assert calibrated_volume_ml(samples, "mL", VolumeCalibration(calibrated=False, alpha_vc_ml=30.0)).tolist() == [70.0, 10.0]


@pytest.mark.parametrize("lacking", ["electrode_spacing_cm", "blood_resistivity_ohm_cm"])
def test_conductance_without_its_constants_is_refused(lacking):
    known = {"electrode_spacing_cm": 1.0, "blood_resistivity_ohm_cm": 150.0}
    del known[lacking]
    with pytest.raises(ValueError, match="electrode_spacing_cm and blood_resistivity_ohm_cm"):
        calibrated_volume_ml(np.ones(3), "mS", VolumeCalibration(**known))


def test_a_run_is_calibrated_then_filtered():
    pressure, volume = ejection()
    shown = recording(Channel(1.05 * (pressure + 2.0) + 1.2, "mm[Hg]", RATE_HZ), Channel(0.8 * volume + 68.0, "mL", RATE_HZ))
    facts = RunFacts(
        "rest",
        "steady",
        sampling_rate_hz=RATE_HZ,
        pressure=zeros((0.0, 3.3), points=((0.0, 1.2), (100.0, 106.2))),
        volume=VolumeCalibration(calibrated=False, alpha=0.8, alpha_vc_ml=68.0),
    )
    signals = calibrated(shown, facts)
    np.testing.assert_allclose(signals.pressure_mmhg, zero_phase(pressure, RATE_HZ), atol=1e-9)
    np.testing.assert_allclose(signals.volume_ml, zero_phase(volume, RATE_HZ), atol=1e-9)
    assert signals.dpdt_mmhg_per_s.max() == pytest.approx(100.0 * np.pi, rel=1e-3)
    assert signals.sampling_rate_hz == RATE_HZ
    assert not signals.missing.any()
    assert signals.ecg_mv is None


def test_segments_in_use_are_summed():
    _, volume = ejection()
    segments = {f"segment-{number}": Channel(volume * share, "mL", RATE_HZ) for number, share in enumerate((0.5, 0.3, 0.2, 9.0), 1)}
    channels = {"pressure": recording().channels["pressure"], **segments}
    some = calibrated(Recording("rest", channels), RunFacts("rest", "steady", segments_used=(1, 2, 3)))
    np.testing.assert_allclose(some.volume_ml, zero_phase(volume, RATE_HZ), atol=1e-9)
    every = calibrated(Recording("rest", channels), RunFacts("rest", "steady"))
    np.testing.assert_allclose(every.volume_ml, 10.0 * zero_phase(volume, RATE_HZ), atol=1e-9)
    for missing in (RunFacts("rest", "steady", segments_used=(1, 7)), RunFacts("rest", "steady")):
        present = channels if missing.segments_used else {"pressure": channels["pressure"]}
        with pytest.raises(ValueError, match="neither a volume channel nor the segments"):
            calibrated(Recording("rest", present), missing)


def test_a_channel_without_a_single_value_is_refused():
    with pytest.raises(ValueError, match="holds no value"):
        calibrated(recording(volume=Channel(np.full(1000, np.nan), "mL", RATE_HZ)), FACTS)


def test_noise_is_measured_in_its_own_units():
    rng = np.random.default_rng(7)
    pressure, volume = ejection(5000)
    noisy = recording(
        Channel(pressure + rng.normal(0.0, 0.5, 5000), "mm[Hg]", RATE_HZ), Channel(volume + rng.normal(0.0, 2.0, 5000), "mL", RATE_HZ)
    )
    signals = calibrated(noisy, FACTS)
    assert signals.volume_noise_ml / signals.pressure_noise_mmhg == pytest.approx(4.0, rel=0.05)
    assert 0.6 * 0.5 < signals.pressure_noise_mmhg < 0.5
    quiet = calibrated(recording(), FACTS)
    assert quiet.pressure_noise_mmhg < 0.005


@pytest.mark.parametrize("count", [1, 2, 10])
def test_a_run_of_a_few_samples_is_calibrated_all_the_same(count):
    pressure, volume = ejection(count)
    signals = calibrated(recording(Channel(pressure, "mm[Hg]", RATE_HZ), Channel(volume, "mL", RATE_HZ)), FACTS)
    np.testing.assert_array_equal(signals.pressure_mmhg, pressure)
    assert signals.time_s.size == count
