"""How a ventricle's activation rises and falls within a beat."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

RISE_EXPONENT = 1.9
RELAXATION_EXPONENT = 21.9
RISE_AT = 0.7
RELAXATION_AT = 1.17


def activation(steps: int, step_s: float, time_scale_s: float, relaxation_exponent: float = RELAXATION_EXPONENT) -> FloatArray:
    """Return the activation from the onset of contraction on, shape (steps,), 0 at the onset and exactly 1 at its peak.

    The double Hill shape of Stergiopulos 1996 (Am J Physiol 270:H2050), from memory, over the time since onset divided by
    ``time_scale_s`` (there 0.2 s + 0.15 of the cycle length). The sampled maximum is set to 1, so that the end-systolic relation
    of a heart that uses it is exact. A smaller ``relaxation_exponent`` relaxes more slowly.
    """
    scaled = np.arange(steps) * (step_s / time_scale_s)
    rise = (scaled / RISE_AT) ** RISE_EXPONENT
    fall = (scaled / RELAXATION_AT) ** relaxation_exponent
    shape = rise / (1.0 + rise) / (1.0 + fall)
    return np.asarray(shape / shape.max(), dtype=np.float64)
