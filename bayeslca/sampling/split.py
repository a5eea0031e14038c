"""Random splits and shares: cases over classes, probability vectors from gammas.

Everything here is exact; parameters far below 1 and probabilities far below 1e-300 are handled
in logs. Numba code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled

SMALLEST = 1e-300
"""No drawn probability is smaller: its logarithm stays finite."""

CASE_BY_CASE = 16
"""Up to so many cases a uniform each is cheaper than conditional binomials."""

SMALL_PARAMETER = 0.1
"""Below it a gamma variate may underflow and is drawn in logs."""


@compiled
def split_count(
    count: int, weights: Floats, total: float, numbers: Ints, rng: np.random.Generator
) -> None:
    """Split ``count`` cases over the classes: multinomial with shares weights / total.

    Parameters
    ----------
    count : int
    weights : ndarray, shape (n,)
        Not normalised; a class of weight 0 gets no case.
    total : float
        Sum of ``weights``, taken from left to right.
    numbers : ndarray of int64, shape (n,)
        Written to.
    rng : numpy.random.Generator
    """
    n = weights.shape[0]
    for k in range(n):
        numbers[k] = 0
    if count <= CASE_BY_CASE:
        for _ in range(count):
            numbers[pick(weights, total, rng)] += 1
        return
    left = count
    rest = total
    last = 0
    for k in range(n):
        if weights[k] > 0.0:
            last = k
    for k in range(last):
        if left == 0:
            return
        if weights[k] > 0.0:
            share = weights[k] / rest
            taken = left if share >= 1.0 else rng.binomial(left, share)
            numbers[k] = taken
            left -= taken
            rest -= weights[k]
    numbers[last] += left


@compiled
def pick(weights: Floats, total: float, rng: np.random.Generator) -> int:
    """Pick one class with probability weights / total (inverse of the cumulative shares)."""
    u = rng.random() * total
    chosen = 0
    cumulative = 0.0
    for k in range(weights.shape[0] - 1):
        cumulative += weights[k]
        chosen += u >= cumulative  # no branch: which class it is cannot be foreseen
    return chosen


@compiled
def draw_shares(
    parameter: Floats, first: int, last: int, out: Floats, rng: np.random.Generator
) -> None:
    """Draw out[first:last] from the Dirichlet with parameters parameter[first:last].

    Two gammas make a Beta. Where a parameter is so small that its gamma variate could
    underflow, the whole vector is drawn in logs: G(a) = G(a + 1) U^(1/a).
    """
    total = 0.0
    small = False
    for e in range(first, last):
        small = small or parameter[e] < SMALL_PARAMETER
    if small:
        highest = -math.inf
        for e in range(first, last):
            out[e] = log_gamma_variate(parameter[e], rng)
            highest = max(highest, out[e])
        for e in range(first, last):
            out[e] = math.exp(out[e] - highest)
            total += out[e]
    else:
        for e in range(first, last):
            out[e] = rng.standard_gamma(parameter[e])
            total += out[e]
    scale = 1.0 / total
    for e in range(first, last):
        out[e] = max(out[e] * scale, SMALLEST)


@compiled
def log_gamma_variate(shape: float, rng: np.random.Generator) -> float:
    """Draw the logarithm of a gamma variate; never -inf."""
    if shape >= SMALL_PARAMETER:
        return math.log(rng.standard_gamma(shape))
    return math.log(rng.standard_gamma(shape + 1.0)) + math.log1p(-rng.random()) / shape
