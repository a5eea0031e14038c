"""Are ranks uniform? Simultaneous bands of their empirical distribution function.

Säilynoja, Bürkner & Vehtari (2022, Statistics and Computing 32, 32): at each value the count of
ranks up to it is binomial; bands of one pointwise level hold at all values at once with a
probability that follows exactly from the Markov chain of these counts. Here the band is turned
round: the narrowest one that the observed counts touch gives a p-value.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from scipy.stats import binom


def p_value(ranks: np.ndarray, n_values: int) -> float:
    """Probability that uniform ranks 0..n_values - 1 touch the band that these touch."""
    counts = np.cumsum(np.bincount(ranks, minlength=n_values))[:-1]
    pointwise = _pointwise(ranks.size, n_values)
    touched = pointwise[np.arange(n_values - 1), counts].min() * (1 + 1e-9)
    inside = pointwise > touched
    state = np.zeros(ranks.size + 1)
    state[0] = 1.0
    for value, step in enumerate(_steps(ranks.size, n_values)):
        state = np.where(inside[value], state @ step, 0.0)
    return max(0.0, float(1.0 - state.sum()))


@cache
def _pointwise(n: int, n_values: int) -> np.ndarray:
    """Two-sided p of every count (0..n) of ranks up to each value but the last."""
    share = np.arange(1, n_values)[:, None] / n_values
    counts = np.arange(n + 1)
    below, above = binom.cdf(counts, n, share), binom.sf(counts - 1, n, share)
    return np.minimum(1.0, 2.0 * np.minimum(below, above))


@cache
def _steps(n: int, n_values: int) -> np.ndarray:
    """P(count up to this value | count up to the one before), for each value but the last."""
    before, after = np.arange(n + 1)[:, None], np.arange(n + 1)
    out = [binom.pmf(after - before, n - before, 1 / left) for left in range(n_values, 1, -1)]
    return np.array(out)
