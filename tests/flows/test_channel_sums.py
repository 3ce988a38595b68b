import numpy as np

from checks.subject import RunSubject
from flows.channel_sums import channel_rows, channel_sum
from metrics.signals.facts import RunFacts
from metrics.signals.recording import Channel, Recording

WAVE = np.sin(np.arange(100) / 7.0)


def run(name, **channels):
    recording = Recording(name, {key.replace("_", "-"): Channel(samples, "mL", 250.0) for key, samples in channels.items()})
    return RunSubject(RunFacts(name, "steady"), recording)


def test_one_content_has_one_sum_and_another_content_another():
    assert channel_sum(WAVE) == channel_sum(WAVE.copy())
    assert channel_sum(WAVE) != channel_sum(WAVE[:-1])
    assert channel_sum(WAVE) != channel_sum(-WAVE)
    assert len(channel_sum(WAVE)) == 64


def test_a_sum_hangs_neither_on_the_last_digits_nor_on_how_zero_and_missing_are_written():
    gappy, other = WAVE.copy(), WAVE.copy()
    gappy[3], other[3] = np.nan, np.frombuffer(b"\x01\x00\x00\x00\x00\x00\xf8\xff")[0]
    gappy[5], other[5] = 0.0, -0.0
    assert channel_sum(gappy) == channel_sum(other)
    assert channel_sum(WAVE) == channel_sum(WAVE * (1.0 + 1e-12))


def test_a_channel_that_shows_nothing_has_no_sum():
    assert [channel_sum(values) for values in (np.zeros(50), np.full(50, np.nan), np.empty(0), np.full(5, 7.0))] == [None] * 4


def test_every_run_s_pressure_volume_and_segments_have_a_row_and_the_ecg_has_none():
    runs = (run("rest", pressure=WAVE, volume=WAVE + 1.0, ecg=WAVE), run("ramp", segment_2=WAVE, pressure=np.zeros(9)))
    rows = channel_rows((*runs, RunSubject(RunFacts("lost", "steady"), None)), "harbour", "H-1")
    assert [(row["run"], row["channel"]) for row in rows] == [("rest", "pressure"), ("rest", "volume"), ("ramp", "segment-2")]
    assert rows[0] == {"site": "harbour", "acquisition": "H-1", "run": "rest", "channel": "pressure", "sha256": channel_sum(WAVE)}
    assert rows[2]["sha256"] == rows[0]["sha256"]
