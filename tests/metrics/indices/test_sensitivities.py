"""A card's sensitivity is what becomes of its value when the recorded channel is changed a little and goes the whole way again."""

from dataclasses import replace
from functools import cache

import pytest

from metrics.indices import (
    body_size,
    cardiac_output,
    contractile_slope,
    coupling_prediction,
    curved_end_systole,
    end_systolic_position,
    energetics,
    power,
    recruitable_work,
    stroke_work,
)
from metrics.indices.card import Index, RunBeats, StageBeats
from metrics.indices.end_systolic_elastance import VOLUME_INTERCEPT
from metrics.signals.recording import Recording
from tests.bench.accuracy_of_clean import facts_of, judged, recording_of
from tests.metrics.recorded_hearts import heart_runs

MODULES = (
    body_size,
    cardiac_output,
    contractile_slope,
    coupling_prediction,
    curved_end_systole,
    end_systolic_position,
    energetics,
    power,
    recruitable_work,
    stroke_work,
)
CARDS = [value for module in MODULES for value in vars(module).values() if isinstance(value, Index)]
ERRORS = {
    "pressure_gain": ("pressure", 1.01, 0.0, 0.01),
    "pressure_mmhg": ("pressure", 1.0, 0.5, 0.5),
    "volume_gain": ("volume", 1.01, 0.0, 0.01),
    "volume_ml": ("volume", 1.0, 2.0, 2.0),
}


@cache
def seen(heart, channel=None, gain=1.0, offset=0.0):
    """A heart's stage as a catheter with this error sees it."""
    runs = {}
    for name, run in heart_runs(heart).items():
        recording = recording_of(run)
        if channel is not None:
            shown = recording.channels[channel]
            changed = replace(shown, samples=gain * shown.samples + offset)
            recording = Recording(recording.run, {**recording.channels, channel: changed})
        verdict = judged(recording, facts_of(run))
        chosen = verdict.accepted if name == "rest" else verdict.accepted & verdict.subject.in_window
        runs[name] = RunBeats(name, verdict.subject.known_signals(), verdict.subject.known_beats(), chosen)
    chamber = facts_of(heart_runs(heart)["rest"]).chamber
    preload = (runs["ramp"],)
    v0_ml = VOLUME_INTERCEPT.compute(StageBeats(preload=preload)).value
    return StageBeats((runs["rest"],), preload, v0_ml, bsa_m2=1.9, chamber=chamber)


def heart_for(card):
    if card in (curved_end_systole.LOGARITHMIC_ELASTANCE, curved_end_systole.LOGARITHMIC_INTERCEPT):
        return None
    if card is curved_end_systole.QUADRATIC_INTERCEPT:
        return None
    return "right" if card.chamber == "RV" else "bent" if card.estimator.startswith("multi-beat:quadratic-it") else "normal"


@pytest.mark.parametrize("error", ERRORS)
@pytest.mark.parametrize("card", [card for card in CARDS if heart_for(card)], ids=lambda card: f"{card.name}-{card.estimator}")
def test_a_small_error_moves_a_value_by_what_its_card_says(card, error):
    heart = heart_for(card)
    channel, gain, offset, size = ERRORS[error]
    was = seen(heart)
    value = card.compute(was).value
    told = size * getattr(card.sensitivity(was, value), error)
    moved = card.compute(seen(heart, channel, gain, offset)).value - value
    assert moved == pytest.approx(told, rel=0.1, abs=1.5e-3 * abs(value))
