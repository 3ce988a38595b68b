import numpy as np
import pytest

from metrics.indices import energetics
from metrics.indices.arterial_elastance import ARTERIAL_ELASTANCE
from metrics.indices.body_size import ARTERIAL_ELASTANCE_INDEX, CARDIAC_INDEX, END_DIASTOLIC_VOLUME_INDEX
from metrics.indices.card import Estimate, Sensitivity, StageBeats, Withheld
from metrics.indices.coupling_prediction import PREDICTED_END_SYSTOLIC_PRESSURE, PREDICTED_STROKE_VOLUME
from metrics.indices.end_systolic_elastance import END_SYSTOLIC_ELASTANCE, VOLUME_INTERCEPT
from metrics.indices.end_systolic_position import VOLUME_AT_100, VOLUME_AT_120
from metrics.indices.energetics import EFFICIENCY, POTENTIAL_ENERGY, PRESSURE_VOLUME_AREA
from metrics.indices.recruitable_work import RECRUITABLE_WORK, RECRUITABLE_WORK_NEAR_REST, WORK_INTERCEPT
from metrics.indices.stroke_work import BOX, BOX_LESS_FILLING, STROKE_WORK
from tests.metrics.made_beats import boxes, measured_run

REST = boxes([130.0 + 2.0 * (beat % 4) for beat in range(12)], run="rest")
JITTER = np.tile([3.0, -2.0, -1.0], 4)


def ramp(low=90.0, high=130.0, run="ramp", v0_ml=10.0):
    """A ramp whose end-systolic points scatter a little about Ees 2.5."""
    made = boxes(np.linspace(high, low, 12), run=run, v0_ml=v0_ml)
    made.signals.pressure_mmhg[2::4] += JITTER
    return made


def stage(*ramps, rest=REST, **facts):
    ramps = ramps or (ramp(),)
    v0_ml = VOLUME_INTERCEPT.compute(StageBeats(preload=ramps)).value
    return StageBeats(steady=(rest,), preload=ramps, v0_ml=v0_ml, **facts)


def test_work_and_potential_energy_add_up():
    here = stage()
    pe, pva, part = (card.compute(here).value for card in (POTENTIAL_ENERGY, PRESSURE_VOLUME_AREA, EFFICIENCY))
    work = STROKE_WORK.compute(here).value
    assert pva == pytest.approx(work + pe, rel=0.01)
    assert part == pytest.approx(work / pva, rel=0.01)


def test_the_interval_of_potential_energy_holds_what_v0_leaves_open():
    here = stage(rest=boxes([130.0] * 9, run="rest"))
    pe, v0 = POTENTIAL_ENERGY.compute(here), VOLUME_INTERCEPT.compute(here)
    half_esp = 0.5 * here.steady_end_systole[0][0]
    assert pe.fit_low == pytest.approx(pe.value - half_esp * (v0.fit_high - v0.value))
    assert pe.fit_high == pytest.approx(pe.value + half_esp * (v0.value - v0.fit_low))
    part, pva = EFFICIENCY.compute(here), PRESSURE_VOLUME_AREA.compute(here)
    assert part.fit_low < part.value < part.fit_high
    work = STROKE_WORK.compute(here).value
    assert part.fit_high == pytest.approx(work / pva.fit_low, rel=0.01)


def test_where_the_steady_beats_have_no_interval_energy_has_none(monkeypatch):
    whole = POTENTIAL_ENERGY.compute(stage())
    monkeypatch.setattr(energetics, "median_estimate", lambda values: Estimate(float(np.median(values)), None, None, values.size))
    bare = POTENTIAL_ENERGY.compute(stage())
    assert (bare.value, bare.fit_low, bare.fit_high) == (pytest.approx(whole.value), None, None)


@pytest.mark.parametrize("card", [POTENTIAL_ENERGY, PRESSURE_VOLUME_AREA, EFFICIENCY], ids=lambda card: card.name)
def test_v0_beyond_the_end_systolic_volume_leaves_no_energy(card):
    with pytest.raises(Withheld, match="V0 of the end-systolic line, 90 mL, does not lie below the end-systolic volume"):
        card.compute(stage(boxes(np.linspace(210.0, 170.0, 9), v0_ml=90.0)))


def test_a_curved_line_s_note_goes_along_to_what_rests_on_its_v0():
    bent = boxes(np.linspace(130.0, 60.0, 12))
    volume_ml = bent.signals.volume_ml[2::4]
    bent.signals.pressure_mmhg[2::4] -= 0.02 * (volume_ml - 45.0) ** 2
    here = stage(bent)
    for card in (VOLUME_INTERCEPT, POTENTIAL_ENERGY, EFFICIENCY):
        assert any("is curved" in note for note in card.compute(here).notes)
    assert not any("is curved" in note for note in VOLUME_AT_100.compute(here).notes)


def test_the_volume_at_a_pressure_is_firmer_than_v0():
    here = stage()
    v100, v0, ees = (card.compute(here) for card in (VOLUME_AT_100, VOLUME_INTERCEPT, END_SYSTOLIC_ELASTANCE))
    assert v100.value == pytest.approx(v0.value + 100.0 / ees.value)
    assert v100.fit_high - v100.fit_low < 0.5 * (v0.fit_high - v0.fit_low)
    apart = np.hypot((v0.fit_high - v0.fit_low) / 2.0, 100.0 / ees.value**2 * (ees.fit_high - ees.fit_low) / 2.0)
    assert v100.fit_high - v100.fit_low < apart  # errors of slope and V0 that belong together are not joined as if they did not


def test_a_pressure_far_from_the_beats_has_no_volume_and_a_run_that_comes_near_does():
    # ESP is 10/9 of EDV - 10: from 133 to 111 mmHg, and from 94 to 78
    high, low = boxes(np.linspace(130.0, 110.0, 8), run="high"), boxes(np.linspace(95.0, 80.0, 8), run="low")
    with pytest.raises(Withheld, match="run low: 120 mmHg lies too far from the beats' end-systolic pressures, 78 to 94 mmHg"):
        VOLUME_AT_120.compute(stage(low))
    found = VOLUME_AT_120.compute(stage(high, low))
    assert (found.value, found.runs) == (pytest.approx(58.0), 1)
    assert found.left_out[0].startswith("run low: 120 mmHg lies too far")
    assert VOLUME_AT_100.compute(stage(boxes(np.linspace(128.0, 109.0, 8)))).value == pytest.approx(50.0)


def test_boxes_of_work():
    rest = boxes([130.0] * 7, run="rest", edp_mmhg=8.0)
    here = stage(rest=rest)
    assert BOX.compute(here).value == pytest.approx(80000.0 / 9.0)
    assert BOX_LESS_FILLING.compute(here).value == pytest.approx(80000.0 / 9.0 - 8.0 * 200.0 / 3.0)
    assert BOX.sensitivity(here, 9000.0) == Sensitivity(9000.0, pytest.approx(200.0 / 3.0), 9000.0, 0.0)
    assert not BOX.primary
    assert {"ESP", "SV", "SW"} <= BOX.exposed


def test_what_coupling_foretells_of_beats_on_the_line_is_what_they_do():
    here = stage(boxes(np.linspace(130.0, 90.0, 12)), rest=boxes([130.0] * 7, run="rest"))
    assert PREDICTED_STROKE_VOLUME.compute(here).value == pytest.approx(200.0 / 3.0)
    assert PREDICTED_END_SYSTOLIC_PRESSURE.compute(here).value == pytest.approx(400.0 / 3.0)


def test_coupling_foretells_less_than_a_heart_grown_stronger_does():
    stronger = boxes([130.0] * 7, run="rest", ees=3.5)
    here = stage(boxes(np.linspace(130.0, 90.0, 12)), rest=stronger)
    assert PREDICTED_STROKE_VOLUME.compute(here).value < 0.9 * np.median(stronger.beats.sv_ml)


def test_the_interval_of_what_coupling_foretells_is_that_of_the_crossing():
    rest = boxes([130.0] * 9, run="rest")
    centre, halves = [], []
    rng = np.random.default_rng(5)
    for _ in range(60):
        made = boxes(np.linspace(130.0, 90.0, 12))
        made.signals.pressure_mmhg[2::4] += rng.normal(0.0, 2.0, 12)
        found = PREDICTED_STROKE_VOLUME.compute(stage(made, rest=rest))
        centre.append(found.value)
        halves.append((found.fit_high - found.fit_low) / 2.0)
    # scattered beats one standard deviation about the crossing, in units of the half widths of 95 % t intervals of 10 degrees of freedom
    assert np.std(centre) == pytest.approx(np.mean(halves) / 2.23, rel=0.3)


def test_a_parabola_of_work_is_read_at_one_load_however_deep_the_fall():
    edv_ml = np.linspace(140.0, 70.0, 15)
    work = 60.0 * (edv_ml - 30.0) + 0.4 * (edv_ml - 30.0) ** 2

    def found(card, beats):
        run = measured_run(edv_ml=edv_ml[:beats], esv_ml=edv_ml[:beats] - 60.0, sw_mmhg_ml=work[:beats])
        return card.compute(StageBeats(preload=(run,))).value

    assert found(RECRUITABLE_WORK_NEAR_REST, 15) == pytest.approx(60.0 + 0.8 * (140.0 - 15.0 - 30.0))
    assert found(RECRUITABLE_WORK_NEAR_REST, 7) == pytest.approx(found(RECRUITABLE_WORK_NEAR_REST, 15))
    assert found(RECRUITABLE_WORK, 7) > 1.1 * found(RECRUITABLE_WORK, 15)
    assert found(WORK_INTERCEPT, 7) > found(WORK_INTERCEPT, 15)


def test_a_parabola_of_work_needs_six_beats():
    run = measured_run(edv_ml=[140.0, 130.0, 120.0, 110.0, 100.0], esv_ml=[70.0] * 5, sw_mmhg_ml=[7000.0, 6100.0, 5300.0, 4600.0, 4000.0])
    with pytest.raises(Withheld, match="5 points where a curve needs 6"):
        RECRUITABLE_WORK_NEAR_REST.compute(StageBeats(preload=(run,)))


def test_volumes_are_divided_by_the_area_and_elastance_multiplied():
    here = stage(bsa_m2=1.6)
    ea, eai = ARTERIAL_ELASTANCE.compute(here), ARTERIAL_ELASTANCE_INDEX.compute(here)
    assert (eai.value, eai.fit_low, eai.fit_high) == pytest.approx((1.6 * ea.value, 1.6 * ea.fit_low, 1.6 * ea.fit_high))
    assert END_DIASTOLIC_VOLUME_INDEX.sensitivity(here, 80.0) == Sensitivity(volume_gain=80.0, volume_ml=1.0 / 1.6)
    assert CARDIAC_INDEX.sensitivity(here, 3.0) == Sensitivity(volume_gain=pytest.approx(3.0))
    with pytest.raises(Withheld, match="no body surface area is declared"):
        CARDIAC_INDEX.compute(stage())
