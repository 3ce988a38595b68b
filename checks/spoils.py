"""What each kind of fault reaches: the one table of spoiled indices.

Complete for constant errors (derived and confirmed on simulated hearts, see the metamorphic tests): an unrecoverable pressure offset
moves EDP, ESP, Ea and V0 but not the slope Ees nor the loop's area; a volume offset moves V0 but no slope; and so on. Indices not yet
computed stand in the sets already, so that an index added later is withheld from its first day.
"""

from __future__ import annotations

PRESSURE_OFFSET = frozenset(
    [
        "EDP",
        "ESP",
        "Pmax",
        "Ea",
        "EaI",
        "Ees_Ea",
        "V0",
        "V100",
        "V120",
        "PVA",
        "PE",
        "efficiency",
        "PWRmax",
        "PWRmax_EDV2",
        "EDPVR_stiffness",
        "V20",
        "V30",
        "Pinf",
    ]
)
PRESSURE_GAIN = frozenset(
    [
        "EDP",
        "ESP",
        "Pmax",
        "Ea",
        "EaI",
        "Ees",
        "SW",
        "PRSW",
        "dPdt_max",
        "dPdt_min",
        "V100",
        "V120",
        "PVA",
        "PE",
        "PWRmax",
        "PWRmax_EDV2",
        "dPdt_max_EDV",
        "EDPVR_stiffness",
        "V20",
        "V30",
        "Pinf",
    ]
)
VOLUME_OFFSET = frozenset(["EDV", "EDVI", "ESV", "ESVI", "EF", "V0", "V100", "V120", "Vw", "V20", "V30", "PWRmax_EDV2"])
VOLUME_GAIN = frozenset(
    [
        "EDV",
        "EDVI",
        "ESV",
        "ESVI",
        "SV",
        "SVI",
        "CO",
        "CI",
        "SW",
        "Ea",
        "EaI",
        "Ees",
        "V0",
        "V100",
        "V120",
        "Vw",
        "PVA",
        "PE",
        "PWRmax",
        "PWRmax_EDV2",
        "dPdt_max_EDV",
        "EDPVR_beta",
        "EDPVR_stiffness",
        "V20",
        "V30",
    ]
)
TIME_SCALE = frozenset(["HR", "CO", "CI", "dPdt_max", "dPdt_min", "tau", "PWRmax", "PWRmax_EDV2", "dPdt_max_EDV"])
SLOW_PRESSURE = frozenset(["dPdt_max", "dPdt_min", "tau", "Pinf", "dPdt_max_EDV"])
"""What a fluid-filled line cannot carry: it must not feed dP/dt, tau or single-beat pressures; common practice, no source."""

STEEPEST = SLOW_PRESSURE | frozenset({"PWRmax", "PWRmax_EDV2"})
"""What is read where pressure is steepest: moved by whatever is fast and not the heart's."""

PEAK = frozenset({"Pmax", "PWRmax", "PWRmax_EDV2"})
"""What is read where pressure is highest."""

END_DIASTOLE = frozenset(["EDP", "EDPVR_beta", "EDPVR_stiffness", "V20", "V30"])
"""What is read from the pressure at end-diastole, a small pressure at an instant that dP/dt decides."""

PRESSURE_EXTREMES = PRESSURE_OFFSET | END_DIASTOLE | frozenset({"Ees"})
"""What is read from a pressure at one instant which an extreme or a threshold chooses: noise and hum choose with it."""

ECG_LEAK = frozenset(["V0", "V100", "V120", "Vw", "PE", "PVA", "efficiency", "V20", "V30"])
"""What stands on a volume's absolute place by a line's intercept: it moves by several times what leaks in at end-systole."""

PRELOAD_SLOPES = frozenset(
    [
        "Ees",
        "V0",
        "V100",
        "V120",
        "Ees_Ea",
        "PRSW",
        "Vw",
        "dPdt_max_EDV",
        "EDPVR_beta",
        "EDPVR_stiffness",
        "V20",
        "V30",
        "PVA",
        "PE",
        "efficiency",
    ]
)
WORK_SLOPES = frozenset({"PRSW", "Vw"})
"""What is a slope of stroke work, which bends with load."""

STROKE_WORK = frozenset({"SW", "PVA", "efficiency"})
"""What stroke work goes into at rest."""

PRESSURE_MOVED = (PRESSURE_OFFSET - END_DIASTOLE) | frozenset({"Ees"})
"""A pressure that jumps or drifts inside a run: also what is a slope of pressure against volume, and not what is read at end-diastole,
which less reaches. The loops' areas, and PRSW with them, move by less than 2 % at 5 mmHg (computed on simulated hearts)."""

END_SYSTOLIC_VOLUME = frozenset(["ESV", "ESVI"])
"""What a volume that jumps or drifts reaches before it reaches the larger end-diastolic volume."""

VOLUME_MOVED = (VOLUME_OFFSET - END_SYSTOLIC_VOLUME) | frozenset(
    ["Ees", "Ees_Ea", "PRSW", "dPdt_max_EDV", "EDPVR_beta", "EDPVR_stiffness", "PVA", "PE", "efficiency"]
)
"""A volume that jumps or drifts inside a run: also every slope against volume. Stroke volume and stroke work are differences within
beats and move by less than 2 % at 10 mL (computed on simulated hearts)."""

DELAY = frozenset(["Ees", "Ees_Ea", "V100", "V120", "PVA", "PE", "efficiency"])
"""Volume and pressure a few hundredths of a second apart, either way: the slope of end-systolic points, and what is made of it."""

WORK = frozenset(["SW", "PRSW", "Vw", "PVA", "efficiency"])
"""What is summed around the loop, and what is made of it."""

END_SYSTOLE = frozenset(["ESP", "Ea", "EaI", "Ees", "Ees_Ea", "V100", "V120", "PVA", "PE", "efficiency"])
"""What is read from pressure where the volume says that systole ends."""

PRESSURE_LATE = STEEPEST | WORK
"""A pressure that is late or slow: what is steepest in it, and what is summed around the loop."""

VOLUME_LATE = VOLUME_GAIN | VOLUME_OFFSET | frozenset(["Ees_Ea", "PRSW", "efficiency"])
"""A volume so late that it is another one at every landmark of pressure."""

VOLUME_TOP = WORK | frozenset(["EDV", "EDVI", "SV", "SVI", "EF", "CO", "CI", "Ea", "EaI", "Ees_Ea", "PWRmax_EDV2", "dPdt_max_EDV"])
VOLUME_TOP |= frozenset(["EDPVR_beta", "EDPVR_stiffness", "V20", "V30"])
"""What is read from the largest volumes: not where systole ends, nor the line through those points."""

VOLUME_BOTTOM = WORK | END_SYSTOLE - {"ESP"} | frozenset(["ESV", "ESVI", "SV", "SVI", "EF", "CO", "CI", "V0"])
"""What is read from the smallest volumes: not end-diastole, nor the passive curve."""

VOLUME_END_SYSTOLE = VOLUME_BOTTOM - WORK | frozenset(["PVA", "efficiency", "EDPVR_beta", "EDPVR_stiffness", "V20", "V30", "dPdt_max_EDV"])
"""What is read from a volume at one instant which an extreme chooses, and lines against volume: noise chooses with it."""

INTERCEPTS = frozenset(["Ees", "Ees_Ea", "V0", "V100", "V120", "Vw", "PRSW", "PE", "PVA", "efficiency", "V20", "V30"])
"""What lines against a noisy volume say: noise flattens them, and most so far from the points they go through."""

STEADY_STATE = frozenset(
    ["EDV", "EDVI", "ESV", "ESVI", "SV", "SVI", "EF", "CO", "CI", "EDP", "ESP", "Pmax", "Ea", "EaI", "SW", "dPdt_max", "dPdt_min"]
) | frozenset(["Ees_Ea", "PVA", "PE", "efficiency", "PWRmax", "PWRmax_EDV2"])
"""A run that is not steady: all that is a median over it and depends on load."""

PRESSURE_SHAPE = PRESSURE_GAIN | PRESSURE_OFFSET | frozenset({"tau"})
VOLUME_SHAPE = VOLUME_LATE | frozenset({"ESP"})
"""A volume that does not go the way the ventricle's does: also the pressure read where it says that systole ends."""

EVERYTHING = PRESSURE_SHAPE | VOLUME_SHAPE | TIME_SCALE | PRELOAD_SLOPES
