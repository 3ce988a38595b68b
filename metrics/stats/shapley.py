"""A change split among what caused it, whatever order one thinks of the causes in.

Shapley 1953, Contributions to the Theory of Games 2:307 (from memory): each cause gets the mean, over all orders in which the causes may
be switched from before to after, of what switching it adds. The parts sum to the whole change; switched one at a time from before they do
not.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import product
from math import factorial

import numpy as np

from metrics.arrays import FloatArray


def shapley_parts(worth: Callable[[FloatArray], FloatArray], before: FloatArray, after: FloatArray) -> FloatArray:
    """Return each cause's part of ``worth(after) - worth(before)``; ``before``, ``after`` and the answer have shape (..., n_causes).

    ``worth`` takes causes along the last axis and returns one number for each set of them; it is asked for every mixture of both ends.

    >>> shapley_parts(lambda causes: causes[..., 0] * causes[..., 1], np.array([2.0, 3.0]), np.array([4.0, 5.0])).tolist()
    [8.0, 6.0]
    """
    count = before.shape[-1]
    switched = np.array(list(product((False, True), repeat=count)))
    worths = worth(np.where(switched, after[..., None, :], before[..., None, :]))
    others = switched.sum(axis=1)[:, None] - switched
    share = np.array([factorial(size) * factorial(count - size - 1) / factorial(count) for size in range(count)])
    parts: FloatArray = worths @ np.where(switched, share[others], -share[others])
    return parts
