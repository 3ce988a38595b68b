import numpy as np
import pytest

from checks import ALL as CHECKS
from flows.sources.simulated.beat_reach import beats_reached
from flows.sources.simulated.corpus import clean_acquisition, reached
from flows.sources.simulated.ladders import ACQUISITION_LADDERS, BEAT_LADDERS, LADDERS, RUN_LADDERS

EVERY = {(ladder.name, ladder.severities): ladder for ladder in (*LADDERS, *ACQUISITION_LADDERS, *RUN_LADDERS, *BEAT_LADDERS)}
NAMED = {ladder.name: ladder for ladder in (*RUN_LADDERS, *BEAT_LADDERS)}
HEARTS = ("normal", "closed-right")

HARMLESS = {"volume-late-as-declared", "ecg-hum-60", "ecg-noisy"}
"""Declared, or in a channel no index is read from: nothing to find."""
UNCHECKED = {"noise-bursts", "volume-jump", "clipped-beat", "late-spike", "entrapment", "whip", "aberrant-beat", "damping"}
"""What no check is named after yet."""

BEATS_MOVED = {
    "whip": {"Pmax", "dPdt_max", "dPdt_min"},
    "entrapment": {"ESP", "Pmax", "Ea", "SW", "dPdt_min"},
    "late-spike": {"ESP", "Pmax", "Ea", "dPdt_max", "dPdt_min"},
    "volume-jump": {"ESV", "SV", "EF", "Ea", "SW"},
    "beat-clipped": {"ESP", "Pmax", "Ea", "SW"},
    "aberrant-beats": {"ESV", "SV", "EF", "ESP", "Pmax", "Ea", "SW", "dPdt_max", "dPdt_min"},
    "beat-dropped-out": {"ESV", "SV", "EF", "ESP", "Pmax", "Ea", "SW", "dPdt_max", "dPdt_min"},
}
"""What the grossest severity moves by more than 5 % in every beat it touches, whichever heart: by their meaning, not by measurement."""
UNTOUCHED = {"HR", "EDV", "EDP"}
"""What is read before any of these begins."""


@pytest.fixture(scope="module", params=HEARTS)
def sound(request):
    return clean_acquisition(request.param, 250.0, 1)[0]


def least(found):
    """The least share by which each index is moved in the beats touched."""
    shares = {}
    for one in found:
        shares[one.index] = min(one.share, shares.get(one.index, np.inf))
    return shares


@pytest.mark.parametrize("ladder", EVERY.values(), ids=lambda ladder: ladder.name)
def test_every_fault_says_what_should_be_found(ladder):
    injected = ladder.inject(clean_acquisition("normal", 250.0, 1)[0], ladder.severities[-1])
    assert injected.expected or ladder.name in HARMLESS
    assert {one.check for one in injected.expected} <= {check.name for check in CHECKS} | UNCHECKED


@pytest.mark.parametrize("name", BEATS_MOVED)
def test_a_fault_of_beats_moves_what_it_should_in_each_of_them_and_grows(sound, name):
    ladder = NAMED[name]
    gentle, middle, gross = (beats_reached(sound, ladder, ladder.severities[place]) for place in (0, 3, 5))
    assert {one.share for one in gentle if one.index in BEATS_MOVED[name]} <= {0.0} or name == "aberrant-beats"
    moved = {index for index, share in least(gross).items() if share > 0.05}
    assert moved >= BEATS_MOVED[name]
    assert moved.isdisjoint(UNTOUCHED)
    grown = least(middle)
    assert all(least(gross)[index] >= grown[index] for index in {"Pmax", "SV"} & BEATS_MOVED[name])


def test_a_dropout_leaves_nothing_to_read_of_a_beat(sound):
    found = beats_reached(sound, NAMED["beat-dropped-out"], 0.6)
    assert {one.index for one in found if np.isnan(one.faulty)} >= BEATS_MOVED["beat-dropped-out"]
    assert {one.share for one in found if np.isnan(one.faulty)} == {np.inf}


def test_a_premature_beat_is_held_against_the_runs_own_sound_beats(sound):
    found = beats_reached(sound, NAMED["premature-beats"], 0.6)
    early, late = sorted({one.instant_s for one in found})[:2]
    values = {(one.instant_s, one.index): one for one in found}
    assert values[early, "SV"].faulty < 0.8 * values[early, "SV"].sound
    assert values[late, "SV"].faulty > values[late, "SV"].sound
    assert values[early, "SV"].sound == values[late, "SV"].sound


def test_a_fault_that_names_no_beats_reaches_none(sound):
    assert beats_reached(sound, NAMED["segment-astray"], 1.0) == ()


def test_an_electrode_in_the_wrong_chamber_takes_volume_from_all_that_is_read_from_it(sound):
    ladder = NAMED["segment-astray"]
    assert {one.check for one in ladder.inject(sound, 1.0).expected} == {"segment-phase"}
    rungs = [{one.index: one for one in reached(sound, ladder, severity)} for severity in ladder.severities]
    assert all(one.share < 1e-9 for one in rungs[0].values())
    for index in ("SV", "EF", "SW", "Ea", "Ees"):
        shares = [rung[index].share for rung in rungs]
        assert shares == sorted(shares)
        assert shares[-1] > 0.2
    assert rungs[-1]["SV"].change < 0.0 < rungs[-1]["Ees"].change
    for index in ("HR", "EDP", "Pmax", "dPdt_max", "dPdt_min"):
        assert rungs[-1][index].share < 1e-9


def test_pressure_that_drops_out_leaves_the_volumes(sound):
    moved = {one.index for one in reached(sound, NAMED["pressure-dropped-out"], 0.8) if one.share == np.inf}
    assert moved >= {"ESP", "Pmax", "SW", "dPdt_max", "Ees", "PRSW"}
    assert moved.isdisjoint({"HR", "EDV", "ESV", "SV", "EF"})


def test_what_strikes_three_beats_moves_the_slope_and_hardly_a_median(sound):
    found = {one.index: one for one in reached(sound, NAMED["entrapment"], 100.0)}
    assert found["Ees"].share > 0.1
    assert found["EDP"].share == found["EDV"].share == 0.0
    assert found["Pmax"].share < 0.02
