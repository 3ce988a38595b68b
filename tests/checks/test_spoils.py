"""The table of what each constant error reaches, by arithmetic on one heart: which indices move when a channel is shifted or scaled."""

import re

import pytest

from checks import ALL, spoils
from checks.check import Level

CONTRACT = (
    "HR, CO, EDV, ESV, SV, EF, EDP, ESP, Pmax, Ea, SW, dPdt_max, dPdt_min, tau, Pinf, Ees, V0, V100, V120, Ees_Ea, PRSW, Vw, dPdt_max_EDV, "
    "EDPVR_beta, EDPVR_stiffness, V20, V30, PVA, PE, efficiency, PWRmax, PWRmax_EDV2, EDVI, ESVI, SVI, CI, EaI"
)
EVERY_INDEX = frozenset(CONTRACT.split(", "))
INDEXED = {"EDVI": "EDV", "ESVI": "ESV", "SVI": "SV", "CI": "CO", "EaI": "Ea"}
SETS = {name: value for name, value in vars(spoils).items() if isinstance(value, frozenset)}

# One beat of a heart whose every number can be worked out by hand: pressures p, volumes v, its end-systolic line through two loads.
P_ED, P_ES, P_MAX, P_ASYMPTOTE = 8.0, 100.0, 110.0, -5.0
V_ED, V_ES = 120.0, 50.0
P_ES_LOW, V_ES_LOW = 80.0, 41.0
FLOW_ML_PER_S = 400.0


def indices(gain_p=1.0, shift_p=0.0, gain_v=1.0, shift_v=0.0):
    """The indices of that beat when the recorder shows gain x value + shift."""

    def shown_p(mmhg):
        return gain_p * mmhg + shift_p

    def shown_v(ml):
        return gain_v * ml + shift_v

    edv, esv = shown_v(V_ED), shown_v(V_ES)
    sv, esp = edv - esv, shown_p(P_ES)
    ees = (esp - shown_p(P_ES_LOW)) / (esv - shown_v(V_ES_LOW))
    v0 = esv - esp / ees
    work = 0.9 * (shown_p(P_ES) - shown_p(P_ED)) * sv
    work_low = 0.9 * (shown_p(P_ES_LOW) - shown_p(P_ED)) * (shown_v(100.0) - shown_v(V_ES_LOW))
    prsw = (work - work_low) / (edv - shown_v(100.0))
    potential = 0.5 * esp * (esv - v0)
    rise = gain_p * 1500.0
    power = shown_p(P_MAX) * gain_v * FLOW_ML_PER_S
    ea = esp / sv
    # the passive curve between two of its points: pressures 5 and 15 mmHg at 90 and 150 mL, a straight line so that it can be inverted
    passive = (shown_p(15.0) - shown_p(5.0)) / (shown_v(150.0) - shown_v(90.0))
    at_zero = shown_p(5.0) - passive * shown_v(90.0)
    return {
        "HR": 68.0,
        "CO": 68.0 * sv,
        "EDV": edv,
        "ESV": esv,
        "SV": sv,
        "EF": sv / edv,
        "EDP": shown_p(P_ED),
        "ESP": esp,
        "Pmax": shown_p(P_MAX),
        "Ea": ea,
        "SW": work,
        "dPdt_max": rise,
        "dPdt_min": -rise,
        "tau": 45.0,
        "Pinf": shown_p(P_ASYMPTOTE),
        "Ees": ees,
        "V0": v0,
        "V100": v0 + 100.0 / ees,
        "V120": v0 + 120.0 / ees,
        "Ees_Ea": ees / ea,
        "PRSW": prsw,
        "Vw": edv - work / prsw,
        "dPdt_max_EDV": rise / (edv - shown_v(100.0)),
        "EDPVR_stiffness": passive,
        "V20": (20.0 - at_zero) / passive,
        "V30": (30.0 - at_zero) / passive,
        "PVA": work + potential,
        "PE": potential,
        "efficiency": work / (work + potential),
        "PWRmax": power,
        "PWRmax_EDV2": power / edv**2,
    }


# A straight line has no stiffness that grows with pressure: read at a given pressure, that of an exponential does, and its exponent is
# per millilitre. Both follow from dP/dV = beta (P - P0), which no line through two points can show.
BY_DEFINITION = {
    "PRESSURE_OFFSET": {"EDPVR_stiffness"},
    "PRESSURE_GAIN": set(),
    "VOLUME_OFFSET": set(),
    "VOLUME_GAIN": {"EDPVR_beta"},
}
ERRORS = {
    "PRESSURE_OFFSET": {"shift_p": 6.0},
    "PRESSURE_GAIN": {"gain_p": 1.2},
    "VOLUME_OFFSET": {"shift_v": 35.0},
    "VOLUME_GAIN": {"gain_v": 1.3},
}


@pytest.mark.parametrize("name", ERRORS)
def test_a_constant_error_spoils_exactly_the_indices_it_moves(name):
    sound, wrong = indices(), indices(**ERRORS[name])
    moved = {index for index in sound if wrong[index] != pytest.approx(sound[index], rel=1e-9)} | BY_DEFINITION[name]
    moved |= {indexed for indexed, index in INDEXED.items() if index in moved}
    assert SETS[name] == moved


@pytest.mark.parametrize("name", SETS)
def test_every_spoiled_index_is_one_the_contract_knows(name):
    assert SETS[name] <= EVERY_INDEX


@pytest.mark.parametrize("name", SETS)
def test_an_index_per_body_surface_is_spoiled_with_its_own(name):
    for indexed, index in INDEXED.items():
        assert (indexed in SETS[name]) is (index in SETS[name]), (indexed, index)


def test_everything_is_everything():
    assert spoils.EVERYTHING == EVERY_INDEX


def test_a_shape_that_is_lost_takes_more_than_any_constant_error_of_that_channel():
    assert spoils.PRESSURE_SHAPE > spoils.PRESSURE_GAIN | spoils.PRESSURE_OFFSET
    assert spoils.VOLUME_SHAPE > spoils.VOLUME_GAIN | spoils.VOLUME_OFFSET
    assert not spoils.PRESSURE_SHAPE & {"EDV", "ESV", "SV", "EF", "HR", "CO"}
    assert not spoils.VOLUME_SHAPE & {"EDP", "Pmax", "dPdt_max", "dPdt_min", "tau", "HR"}


def test_what_needs_no_slope_survives_a_poor_occlusion():
    assert not spoils.PRELOAD_SLOPES & {"EDV", "SV", "ESP", "EDP", "Ea", "SW", "HR", "dPdt_max", "tau"}


def test_a_wrong_clock_leaves_pressures_volumes_and_their_loops():
    assert not spoils.TIME_SCALE & {"EDV", "ESV", "SV", "EF", "EDP", "ESP", "Pmax", "Ea", "SW", "Ees", "V0", "PRSW", "PVA", "PE"}


EXPECTED = {
    "required-runs": frozenset(),
    "pressure-zero": spoils.PRESSURE_OFFSET,
    "zero-drift": spoils.PRESSURE_OFFSET,
    "pressure-points": spoils.PRESSURE_GAIN,
    "pressure-gain": spoils.PRESSURE_GAIN,
    "pressure-sensor": spoils.SLOW_PRESSURE,
    "volume-gain-known": spoils.VOLUME_GAIN,
    "volume-offset-known": spoils.VOLUME_OFFSET,
    "reference-stroke-volume": spoils.VOLUME_GAIN,
    "reference-volumes": spoils.VOLUME_OFFSET,
    "pressure-linearity": spoils.PRESSURE_GAIN | spoils.PRESSURE_OFFSET,
    "alpha-plausible": spoils.VOLUME_GAIN,
    "alpha-vc-plausible": spoils.VOLUME_OFFSET,
    "calibration-age": spoils.VOLUME_GAIN,
    "parallel-volume-age": spoils.VOLUME_OFFSET,
    "saline-agreement": spoils.VOLUME_OFFSET,
    "replicates-agree": spoils.PRELOAD_SLOPES - {"V0"},
    "replicate-intercepts-agree": frozenset({"V0", "V100", "V120", "PE", "PVA", "efficiency"}),
    "runs-agree-pressure": spoils.PRESSURE_GAIN | {"Ees_Ea", "efficiency"},
    "runs-agree-stroke-volume": spoils.VOLUME_GAIN | {"ESP", "Ees_Ea", "efficiency"},
    "runs-agree-volume": spoils.VOLUME_OFFSET | {"efficiency"},
    "aortic-agreement": spoils.PRESSURE_GAIN | spoils.PRESSURE_OFFSET,
    "copied-signal": spoils.EVERYTHING,
    **dict.fromkeys(("visits-agree-volume", "visits-agree-pressure", "visits-agree-heart-rate"), frozenset()),
    "readable": spoils.EVERYTHING,
    "time-base": spoils.EVERYTHING,
    "time-gaps": spoils.EVERYTHING,
    "beats-found": spoils.EVERYTHING,
    "sampling-rate": spoils.TIME_SCALE,
    "duration": spoils.TIME_SCALE,
    "heart-rate-agreement": spoils.TIME_SCALE,
    "clock-agreement": spoils.TIME_SCALE,
    "pressure-clipping": spoils.PEAK,
    "pressure-clipping-work": spoils.WORK,
    "pressure-clipping-end-systole": spoils.END_SYSTOLE | {"V0"},
    "pressure-clipping-slope": spoils.STEEPEST,
    "pressure-clipping-low": spoils.END_DIASTOLE | {"tau", "Pinf"},
    "volume-clipping": spoils.VOLUME_TOP,
    "volume-clipping-low": spoils.VOLUME_BOTTOM,
    "pressure-units": spoils.PRESSURE_GAIN | spoils.PRESSURE_OFFSET,
    "volume-units": spoils.VOLUME_SHAPE,
    "swapped-channels": spoils.EVERYTHING,
    "pressure-inverted": spoils.EVERYTHING,
    "volume-inverted": spoils.VOLUME_SHAPE,
    "loop-direction": spoils.EVERYTHING,
    "pressure-flat": spoils.EVERYTHING,
    "volume-flat": spoils.VOLUME_SHAPE,
    "pressure-dropout": spoils.EVERYTHING,
    "volume-dropout": spoils.VOLUME_SHAPE,
    "edp-hum": spoils.END_DIASTOLE,
    "pressure-hum": spoils.PEAK,
    "end-systole-hum": spoils.END_SYSTOLE | {"V0"},
    "dpdt-hum": spoils.STEEPEST,
    "volume-hum": spoils.VOLUME_SHAPE,
    "pressure-noise": spoils.PRESSURE_EXTREMES | spoils.WORK_SLOPES,
    "dpdt-noise": spoils.STEEPEST | spoils.END_DIASTOLE,
    "volume-noise": spoils.VOLUME_END_SYSTOLE,
    "volume-noise-intercept": spoils.INTERCEPTS,
    "edp-quantisation": spoils.END_DIASTOLE,
    "pressure-quantisation": spoils.PEAK | spoils.END_SYSTOLE | {"V0"},
    "dpdt-quantisation": spoils.STEEPEST,
    "volume-quantisation": spoils.VOLUME_SHAPE,
    "ringing": spoils.PRESSURE_EXTREMES | spoils.STEEPEST,
    "ecg-leak": spoils.ECG_LEAK,
    "ecg-leak-large": spoils.VOLUME_SHAPE,
    "beats-accepted": spoils.EVERYTHING,
    "preload-adequacy": spoils.PRELOAD_SLOPES,
    "preload-adequacy-work": frozenset({"PRSW", "Vw"}),
    "preload-beats": spoils.PRELOAD_SLOPES,
    "pressure-step": spoils.PRESSURE_MOVED,
    "edp-step": spoils.END_DIASTOLE,
    "volume-step": spoils.VOLUME_MOVED,
    "esv-step": spoils.END_SYSTOLIC_VOLUME,
    "pressure-drift": spoils.PRESSURE_MOVED,
    "edp-drift": spoils.END_DIASTOLE,
    "volume-drift": spoils.VOLUME_MOVED,
    "esv-drift": spoils.END_SYSTOLIC_VOLUME,
    "pressure-shift-elsewhere": frozenset({"Ees", "V0", "V100", "V120", "Ees_Ea", "PVA", "PE", "efficiency"}),
    "volume-shift-elsewhere": spoils.VOLUME_MOVED & spoils.PRELOAD_SLOPES,
    "channel-delay": spoils.DELAY,
    "channel-delay-gross": spoils.VOLUME_LATE,
    "damping": spoils.PRESSURE_LATE,
    "pressure-late": spoils.END_SYSTOLE,
    "damping-peak": frozenset({"Pmax"}),
    "damping-gross": spoils.PRESSURE_EXTREMES,
    "steadiness": spoils.STEADY_STATE,
    "edp-steadiness": spoils.END_DIASTOLE,
    "work-steadiness": frozenset({"SW", "PVA", "efficiency"}),
    "respiration-as-declared": frozenset(),
    "rhythm-as-declared": frozenset(),
    "segment-phase": spoils.VOLUME_SHAPE,
    "segment-swing": spoils.VOLUME_SHAPE,
}


def test_what_each_check_spoils_is_written_down_twice():
    assert {check.name: check.spoils for check in ALL if check.level is not Level.BEAT} == EXPECTED


def test_a_check_on_beats_rejects_beats_and_spoils_nothing():
    assert {check.name for check in ALL if check.level is Level.BEAT and check.spoils} == set()


def test_names_of_indices_are_plain():
    assert all(re.fullmatch(r"[A-Za-z][A-Za-z0-9_]*", index) for index in EVERY_INDEX)
