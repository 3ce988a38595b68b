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
PRESSURE_MOVED = PRESSURE_OFFSET | frozenset({"Ees", "EDPVR_beta"})
"""A pressure that jumps or drifts inside a run: also what is a slope of pressure against volume. The loops' areas, and PRSW with them,
move by less than 2 % at 5 mmHg (computed on simulated hearts)."""

VOLUME_MOVED = VOLUME_OFFSET | frozenset(
    ["Ees", "Ees_Ea", "PRSW", "dPdt_max_EDV", "EDPVR_beta", "EDPVR_stiffness", "PVA", "PE", "efficiency"]
)
"""A volume that jumps or drifts inside a run: also every slope against volume. Stroke volume and stroke work are differences within
beats and move by less than 2 % at 10 mL (computed on simulated hearts)."""

DELAY = frozenset(["Ees", "Ees_Ea", "V100", "V120", "PVA", "PE", "efficiency"])
"""Volume and pressure a few hundredths of a second apart, either way: the slope of end-systolic points, and what is made of it."""

END_SYSTOLE = frozenset(["ESP", "Ea", "EaI", "Ees", "Ees_Ea", "V100", "V120", "PVA", "PE", "efficiency"])
"""What is read from pressure where the volume says that systole ends."""

PRESSURE_LATE = STEEPEST | frozenset(["SW", "PRSW", "Vw", "PVA", "efficiency"])
"""A pressure that is late or slow: what is steepest in it, and what is summed around the loop."""

VOLUME_LATE = VOLUME_GAIN | VOLUME_OFFSET | frozenset(["Ees_Ea", "PRSW", "efficiency"])
"""A volume so late that it is another one at every landmark of pressure."""

STEADY_STATE = frozenset(
    ["EDV", "EDVI", "ESV", "ESVI", "SV", "SVI", "EF", "CO", "CI", "EDP", "ESP", "Pmax", "Ea", "EaI", "SW", "dPdt_max", "dPdt_min"]
) | frozenset(["Ees_Ea", "PVA", "PE", "efficiency", "PWRmax", "PWRmax_EDV2"])
"""A run that is not steady: all that is a median over it and depends on load."""

PRESSURE_SHAPE = PRESSURE_GAIN | PRESSURE_OFFSET | frozenset({"tau"})
VOLUME_SHAPE = VOLUME_GAIN | VOLUME_OFFSET | frozenset({"Ees_Ea", "PRSW", "efficiency"})
EVERYTHING = PRESSURE_SHAPE | VOLUME_SHAPE | TIME_SCALE | PRELOAD_SLOPES
