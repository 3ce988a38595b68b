"""The electrocardiogram of a run: a sum of Gaussians locked to each R wave.

The idea of describing P, Q, R, S and T as Gaussians is McSharry 2003 (IEEE Trans Biomed Eng 50:289, from memory); the heights, widths
and places are house choices of an ordinary lead II.
"""

from __future__ import annotations

import numpy as np

from flows.sources.simulated.activation import FloatArray

ORDINARY = (("P", 0.12, -0.165, 0.022), ("Q", -0.12, -0.026, 0.009), ("R", 1.1, 0.0, 0.0095), ("S", -0.22, 0.028, 0.010))
PREMATURE = (("Q", -0.25, -0.055, 0.022), ("R", 1.5, 0.0, 0.028), ("S", -0.55, 0.065, 0.026))
ABERRANT = (("P", 0.12, -0.19, 0.022), ("R", 0.9, 0.0, 0.024), ("S", -0.75, 0.07, 0.028))
"""Name, height in mV, place after R in s, SD in s; the T wave's place follows the cycle length."""


def ecg_mv(
    time_s: FloatArray,
    r_s: FloatArray,
    rr_before_s: FloatArray,
    premature: tuple[bool, ...],
    *,
    atrial: bool = True,
    aberrant: tuple[bool, ...] | None = None,
) -> FloatArray:
    """Return the ECG at ``time_s`` in mV, same shape, for beats whose R waves stand at ``r_s``.

    A premature beat has a wide complex, no P wave and a T wave of opposite sign; an aberrant one keeps its P wave. Without ``atrial``
    no beat has a P wave.
    """
    lead = np.zeros(time_s.size)
    astray = aberrant or (False,) * len(premature)
    for at_s, cycle_s, early, other in zip(r_s, rr_before_s, premature, astray, strict=True):
        t_wave = ("T", -0.35 if early or other else 0.3, 0.10 + 0.2 * np.sqrt(cycle_s), 0.045)
        waves = PREMATURE if early else ABERRANT if other else ORDINARY
        for name, height, place_s, sd_s in (*waves, t_wave):
            if name == "P" and not atrial:
                continue
            low, high = np.searchsorted(time_s, (at_s + place_s - 5.0 * sd_s, at_s + place_s + 5.0 * sd_s))
            lead[low:high] += height * np.exp(-0.5 * ((time_s[low:high] - at_s - place_s) / sd_s) ** 2)
    return lead
