import numpy as np
import pytest

from metrics.signals.delay import onset_of_fall_s

RATE_HZ = 500.0
TIME_S = np.arange(-100, 101) / RATE_HZ


def ejecting(onset_s, flow=9000.0, seep=0.0):
    """Volume that rests at 120 mL and leaves with the square of time; ``seep`` mL/s leak away before."""
    since = np.clip(TIME_S - onset_s, 0.0, 0.09)
    return 120.0 - flow * since**2 - seep * np.clip(TIME_S + 0.06, 0.0, 0.12)


@pytest.mark.parametrize("onset_s", [-0.05, -0.02, 0.0, 0.03, 0.06])
@pytest.mark.parametrize("flow", [4000.0, 9000.0])
def test_the_onset_is_where_the_fall_begins_however_fast_it_is(onset_s, flow):
    assert onset_of_fall_s(ejecting(onset_s, flow), 100, RATE_HZ) == pytest.approx(onset_s, abs=0.002)


def test_a_volume_that_seeps_away_before_has_no_onset():
    assert np.isnan(onset_of_fall_s(ejecting(0.01, seep=150.0), 100, RATE_HZ))


def test_a_volume_that_stands_still_has_no_onset():
    assert np.isnan(onset_of_fall_s(np.full(201, 120.0), 100, RATE_HZ))
