from dataclasses import replace

import numpy as np
import pytest

from metrics.indices.card import RunBeats, StageBeats, Withheld
from metrics.indices.relaxation import ASYMPTOTE, HALF_TIME, LOGISTIC, RAFF_GLANTZ, WEISS
from metrics.signals.falls import tau_ms
from tests.bench.accuracy_of_clean import facts_of, judged, published, recording_of
from tests.metrics.made_beats import made_beats, made_signals
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats

RATE_HZ = 250.0
BEAT_S = 0.4
CARDS = {"raff-glantz": RAFF_GLANTZ, "weiss": WEISS, "logistic": LOGISTIC, "half-time": HALF_TIME}


def relaxing_run(taus_s, *, p0=80.0, pinf=0.0, edp=5.0, run="rest"):
    """A run whose beats are exact exponentials from their first sample on; None for a straight fall, 0 for one that is over at once."""
    time_s = np.arange(round(BEAT_S * RATE_HZ)) / RATE_HZ
    beats = []
    for tau_s in taus_s:
        shape = 1.0 - time_s / 0.06 if tau_s is None else np.exp(-time_s / tau_s) if tau_s else np.where(time_s > 0.0, 0.0, 1.0)
        beats.append(np.maximum((p0 - pinf) * shape + pinf, edp))
    pressure = np.append(np.concatenate(beats), edp)
    count = len(taus_s)
    places = round(BEAT_S * RATE_HZ) * np.arange(count)
    made = made_beats(count, rr_s=BEAT_S, dpdt_min_at=places)
    # each beat's end is the first sample of the next fall: end-diastole stands one sample before it
    made = replace(made, end=np.append(places[1:] - 1, pressure.size - 1))
    return RunBeats(run, made_signals(pressure, pressure, rate_hz=RATE_HZ), made, np.ones(count, dtype=bool))


def stage(*taus_s, **heart):
    return StageBeats(steady=(relaxing_run(taus_s, **heart),))


@pytest.mark.parametrize("name", ["raff-glantz", "weiss"])
def test_the_median_of_the_beats_is_published(name):
    estimate = CARDS[name].compute(stage(*np.arange(0.040, 0.0495, 0.001)))
    assert estimate.value == pytest.approx(44.5)
    assert (estimate.fit_low, estimate.fit_high) == pytest.approx((41.0, 48.0))
    assert estimate.beats == 10


def test_all_four_agree_on_an_exponential_towards_0_but_the_logistic():
    found = {name: card.compute(stage(*[0.05] * 7)).value for name, card in CARDS.items()}
    assert found["raff-glantz"] == pytest.approx(50.0)
    assert found["weiss"] == pytest.approx(50.0)
    assert found["half-time"] == pytest.approx(50.0, rel=2e-3)
    assert 0.4 * 50.0 < found["logistic"] < 0.6 * 50.0


def test_the_asymptote_is_published_beside_the_primary():
    estimate = ASYMPTOTE.compute(stage(*[0.05] * 7, pinf=-5.0))
    assert estimate.value == pytest.approx(-5.0)
    assert RAFF_GLANTZ.compute(stage(*[0.05] * 7, pinf=-5.0)).value == pytest.approx(50.0)
    assert RAFF_GLANTZ.primary
    assert [card.primary for card in (WEISS, LOGISTIC, HALF_TIME)] == [False] * 3


def test_straight_falls_count_as_the_slowest():
    estimate = RAFF_GLANTZ.compute(stage(0.040, 0.042, 0.044, 0.046, 0.048, None, None, None))
    assert estimate.value == pytest.approx(47.0)
    assert estimate.fit_low == pytest.approx(40.0)
    assert estimate.fit_high is None
    floor = ASYMPTOTE.compute(stage(0.040, 0.042, 0.044, 0.046, 0.048, None, None, None))
    assert floor.fit_low is None
    assert floor.fit_high is not None


def refused(*taus_s, card=RAFF_GLANTZ, **heart):
    with pytest.raises(Withheld) as caught:
        card.compute(stage(*taus_s, **heart))
    return str(caught.value)


def test_where_half_the_falls_are_straight_nothing_is_said():
    told = refused(0.04, 0.04, 0.04, None, None, None)
    assert told == "3 of 6 accepted steady beats have a time constant; in most of the others the fall cannot be told from a straight line"


def test_where_too_few_beats_have_a_fall_they_are_no_fair_choice():
    told = refused(*[0.04] * 5, 0.0, 0.0)
    assert told == "5 of 7 accepted steady beats have a time constant; in most of the others the fall lasts less than 20 ms or 5 samples"
    assert RAFF_GLANTZ.compute(stage(*[0.04] * 6, 0.0, 0.0)).beats == 6


def test_rejected_beats_do_not_count():
    run = relaxing_run([0.04, 0.09, 0.04, 0.04])
    run.chosen[1] = False
    assert RAFF_GLANTZ.compute(StageBeats(steady=(run,))).value == pytest.approx(40.0)
    two = StageBeats(steady=(run, relaxing_run([0.044] * 4, run="other")))
    assert RAFF_GLANTZ.compute(two).beats == 7


def test_a_fall_that_stays_too_high_has_no_half_time():
    told = refused(*[0.04] * 5, card=HALF_TIME, edp=36.0)
    assert told.endswith("pressure does not fall to half before the ventricle fills")


@pytest.mark.parametrize("card", [*CARDS.values(), ASYMPTOTE], ids=lambda card: f"{card.name}-{card.estimator}")
@pytest.mark.parametrize("heart", ["normal", "failing"])
def test_the_calibration_moves_each_as_told(card, heart):
    signals, beats = signals_and_beats(heart_runs(heart)["rest"])
    chosen = np.ones(len(beats), dtype=bool)

    def value(add_mmhg):
        return card.compute(
            StageBeats(steady=(RunBeats("rest", replace(signals, pressure_mmhg=signals.pressure_mmhg + add_mmhg), beats, chosen),))
        )

    here = value(0.0).value
    told = card.sensitivity(StageBeats(steady=(RunBeats("rest", signals, beats, chosen),)), here)
    assert told.pressure_mmhg == pytest.approx((value(0.05).value - value(-0.05).value) / 0.1, rel=0.05, abs=1e-3)
    assert (told.volume_gain, told.volume_ml) == (0.0, 0.0)


def test_what_reaches_an_offset_reaches_only_what_assumes_the_zero():
    assert [card.rests_on for card in (RAFF_GLANTZ, LOGISTIC, ASYMPTOTE)] == [frozenset()] * 3
    assert [card.rests_on for card in (WEISS, HALF_TIME)] == [{"Pinf"}] * 2


def test_the_whole_way_gives_all_four_and_the_beats_their_own():
    verdicts = [judged(recording_of(run), facts_of(run)) for run in heart_runs("normal", catheter="noisy").values()]
    row = published(verdicts)["tau"]
    assert (row["estimator"], row["unit"], row["status"]) == ("raff-glantz", "ms", "published")
    assert row["fit_ci_low"] < row["value"] < row["fit_ci_high"]
    rest = verdicts[0]
    per_beat = tau_ms(rest.subject.known_signals(), rest.subject.known_beats())
    assert np.median(per_beat[rest.accepted]) == pytest.approx(row["value"])


def test_a_right_ventricle_whose_fall_is_too_short_says_so():
    signals, beats = signals_and_beats(heart_runs("right")["rest"])
    with pytest.raises(Withheld, match="lasts less than 20 ms"):
        RAFF_GLANTZ.compute(StageBeats(steady=(RunBeats("rest", signals, beats, np.ones(len(beats), dtype=bool)),), chamber="RV"))
    signals, beats = signals_and_beats(heart_runs("right-loaded", catheter="noisy")["rest"])
    estimate = RAFF_GLANTZ.compute(StageBeats(steady=(RunBeats("rest", signals, beats, np.ones(len(beats), dtype=bool)),), chamber="RV"))
    assert 35.0 < estimate.value < 50.0
