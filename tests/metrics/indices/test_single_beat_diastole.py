import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metrics.indices.card import StageBeats, Withheld
from metrics.indices.single_beat_diastole import KLOTZ_STIFFNESS, KLOTZ_VOLUME_AT_20, KLOTZ_VOLUME_AT_30, klotz_curve
from tests.metrics.made_beats import measured_run

CARDS = (KLOTZ_STIFFNESS, KLOTZ_VOLUME_AT_20, KLOTZ_VOLUME_AT_30)
by_card = pytest.mark.parametrize("card", CARDS, ids=lambda card: card.name)


def stage(edv_ml, edp_mmhg):
    return StageBeats(steady=(measured_run("rest", edv_ml=np.asarray(edv_ml), edp_mmhg=np.asarray(edp_mmhg)),))


def test_the_beat_in_the_middle_is_published():
    # by hand of the formulas, apart from the program: V30 of (120 mL, 12 mmHg) is 140.13 mL, its exponent 5.9078
    made = stage([118.0, 120.0, 122.0, 120.0, 119.0, 121.0, 120.0], [12.0] * 7)
    v30 = KLOTZ_VOLUME_AT_30.compute(made)
    assert v30.value == pytest.approx(140.132722)
    assert v30.fit_low < v30.value < v30.fit_high
    assert KLOTZ_VOLUME_AT_20.compute(made).value == pytest.approx(140.132722 * (20.0 / 30.0) ** (1.0 / 5.9078085))
    v10 = 140.132722 * (10.0 / 30.0) ** (1.0 / 5.9078085)
    assert KLOTZ_STIFFNESS.compute(made).value == pytest.approx(5.9078085 * 10.0 / v10)


@given(st.floats(60.0, 300.0), st.floats(5.0, 30.0))
def test_every_curve_goes_through_its_beat_and_rises(volume_ml, pressure_mmhg):
    curve = klotz_curve(np.array([volume_ml]), np.array([pressure_mmhg]))
    assert curve.volume_at_ml(pressure_mmhg)[0] == pytest.approx(volume_ml)
    assert curve.stiffness_mmhg_per_ml(10.0)[0] > 0.0
    assert 0.0 < curve.v0_ml[0] < volume_ml


@given(st.floats(0.5, 2.0), st.floats(5.0, 30.0))
def test_a_volume_gain_goes_through(gain, pressure_mmhg):
    one, other = (klotz_curve(np.array([100.0 * g]), np.array([pressure_mmhg])) for g in (1.0, gain))
    assert other.v30_ml[0] == pytest.approx(gain * one.v30_ml[0])
    assert other.stiffness_mmhg_per_ml(10.0)[0] == pytest.approx(one.stiffness_mmhg_per_ml(10.0)[0] / gain)


@by_card
@pytest.mark.parametrize("edp_mmhg", [4.0, 31.0])
def test_outside_5_to_30_mmhg_the_method_does_not_hold(card, edp_mmhg):
    with pytest.raises(Withheld, match=f"an end-diastolic pressure of {edp_mmhg:.1f} mmHg is outside 5 to 30 mmHg"):
        card.compute(stage([120.0] * 6, [edp_mmhg] * 6))


@by_card
def test_few_beats_and_a_right_ventricle_have_none(card):
    with pytest.raises(Withheld, match="2 accepted steady beats where 3 are needed"):
        card.compute(stage([120.0] * 2, [12.0] * 2))
    assert card.chamber == "LV"
    assert not card.primary
    assert "V20" in card.rests_on


@by_card
def test_the_calibration_moves_each_as_told(card):
    edv_ml, edp_mmhg = np.linspace(116.0, 124.0, 9), np.linspace(11.0, 13.0, 9)
    value = card.compute(stage(edv_ml, edp_mmhg)).value
    told = card.sensitivity(stage(edv_ml, edp_mmhg), value)
    step = 1e-3
    moved = {
        "pressure_gain": [stage(edv_ml, edp_mmhg * (1.0 + by)) for by in (step, -step)],
        "pressure_mmhg": [stage(edv_ml, edp_mmhg + by) for by in (step, -step)],
        "volume_gain": [stage(edv_ml * (1.0 + by), edp_mmhg) for by in (step, -step)],
        "volume_ml": [stage(edv_ml + by, edp_mmhg) for by in (step, -step)],
    }
    for name, (up, down) in moved.items():
        found = (card.compute(up).value - card.compute(down).value) / (2.0 * step)
        assert getattr(told, name) == pytest.approx(found, rel=0.02, abs=1e-4 * value), name
