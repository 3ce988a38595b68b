import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metrics.signals.filters import CUTOFF_HZ, SLOPE_ORDER, slope_per_s, zero_phase

RATES_HZ = (250.0, 360.0, 1000.0)


@pytest.mark.parametrize("rate_hz", RATES_HZ)
def test_a_pulse_is_smoothed_but_not_shifted(rate_hz):
    time_s = np.arange(round(2.0 * rate_hz)) / rate_hz
    centre = time_s.size // 2
    pulse = np.exp(-0.5 * ((time_s - time_s[centre]) / 0.02) ** 2)
    smooth = zero_phase(pulse, rate_hz)
    assert smooth.argmax() == centre
    reach = np.arange(1, round(0.2 * rate_hz))
    np.testing.assert_allclose(smooth[centre + reach], smooth[centre - reach], atol=1e-9)
    assert np.sum(time_s * smooth) / np.sum(smooth) == pytest.approx(time_s[centre], abs=1e-9)


def test_running_time_backwards_changes_nothing():
    samples = np.random.default_rng(1).normal(size=800).cumsum()
    inner = slice(100, -100)
    np.testing.assert_allclose(zero_phase(samples[::-1], 250.0)[::-1][inner], zero_phase(samples, 250.0)[inner], atol=1e-6)


@given(st.floats(-300.0, 300.0), st.sampled_from(RATES_HZ), st.integers(1, 400))
def test_constant_in_constant_out(level, rate_hz, count):
    np.testing.assert_allclose(zero_phase(np.full(count, level), rate_hz), level, atol=1e-9)


@pytest.mark.parametrize("rate_hz", RATES_HZ)
def test_half_of_a_wave_at_the_cut_off_passes_and_all_of_a_slow_one(rate_hz):
    time_s = np.arange(round(4.0 * rate_hz)) / rate_hz
    inner = slice(round(rate_hz), round(3.0 * rate_hz))
    for frequency_hz, share in ((CUTOFF_HZ, 0.5), (5.0, 1.0)):  # a second-order Butterworth run twice: 1 / (1 + (f / fc) ** 4)
        wave = np.sin(2.0 * np.pi * frequency_hz * time_s)
        passed = np.sum(zero_phase(wave, rate_hz)[inner] * wave[inner]) / np.sum(wave[inner] ** 2)
        assert passed == pytest.approx(share, abs=2e-4)


@given(st.floats(-3.0, 3.0), st.floats(-50.0, 50.0))
def test_filtering_is_linear(scale, level):
    samples = np.random.default_rng(2).normal(size=300)
    np.testing.assert_allclose(zero_phase(scale * samples + level, 250.0), scale * zero_phase(samples, 250.0) + level, atol=1e-9)


@pytest.mark.parametrize(("rate_hz", "count"), [(100.0, 500), (250.0, 20), (250.0, 0)])
def test_what_cannot_be_filtered_comes_back_as_a_copy(rate_hz, count):
    samples = np.random.default_rng(3).normal(size=count)
    back = zero_phase(samples, rate_hz)
    np.testing.assert_array_equal(back, samples)
    assert back is not samples


@pytest.mark.parametrize("chamber", ["LV", "RV"])
@given(coefficients=st.lists(st.floats(-100.0, 100.0), min_size=1, max_size=6), rate_hz=st.sampled_from(RATES_HZ))
def test_the_slope_of_a_polynomial_is_exact_to_its_ends(chamber, coefficients, rate_hz):
    polynomial = np.polynomial.Polynomial(coefficients[: SLOPE_ORDER[chamber] + 1])
    time_s = np.arange(120) / rate_hz
    np.testing.assert_allclose(slope_per_s(polynomial(time_s), rate_hz, chamber), polynomial.deriv()(time_s), atol=1e-5)


@pytest.mark.parametrize("rate_hz", RATES_HZ)
def test_the_steepest_slope_of_a_logistic_upstroke(rate_hz):
    # a plain central difference at 250 Hz gives 1492 of the true 1500 (computed)
    time_s = np.arange(-0.5, 0.5, 1.0 / rate_hz)
    rise = 120.0 / (1.0 + np.exp(-time_s * 4.0 * 1500.0 / 120.0))
    assert slope_per_s(rise, rate_hz).max() == pytest.approx(1500.0, rel=0.01)


@pytest.mark.parametrize("count", [0, 1, 10])
def test_too_few_samples_have_no_slope(count):
    assert slope_per_s(np.linspace(0.0, 1.0, count), 250.0).tolist() == [0.0] * count


def test_slopes_are_known_for_two_chambers_only():
    with pytest.raises(KeyError, match="LA"):
        slope_per_s(np.arange(100.0), 250.0, "LA")
