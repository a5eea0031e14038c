"""One slice-sampling step of a number, for what has no closed form.

References
----------
Neal, R. M. (2003). Slice sampling. Annals of Statistics 31, 705-767 (stepping out and shrinkage,
figures 3 and 5).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np

from bayeslca.sampling.compiled import compiled_part

MOST_STEPS = 50
"""Steps out on each side, and shrinkages, at most."""


def slice_step(target: Callable[..., float]) -> Callable[..., float]:
    """Return a compiled step for one target.

    A function for each target, as numba cannot keep on disk what is handed functions.

    Parameters
    ----------
    target : compiled function
        Log density up to a constant, of the number and a tuple of what else it reads; -inf where
        the number is impossible.

    Returns
    -------
    compiled function
        ``step(x, width, rng, args)`` returns a new value of the number x, drawn from near the old
        one. ``width``: of a step out, about the spread of the density.
    """

    @compiled_part
    def step(x: float, width: float, rng: np.random.Generator, args: Any) -> float:
        level = target(x, args) + math.log(1.0 - rng.random())
        left = x - width * rng.random()
        right = left + width
        share = int(MOST_STEPS * rng.random())
        for _ in range(share):
            if target(left, args) <= level:
                break
            left -= width
        for _ in range(MOST_STEPS - 1 - share):
            if target(right, args) <= level:
                break
            right += width
        for _ in range(4 * MOST_STEPS):
            proposed = left + (right - left) * rng.random()
            if target(proposed, args) > level:
                return proposed
            if proposed < x:
                left = proposed
            else:
                right = proposed
        return x

    return step
