"""Random splits and shares: cases over classes, probability vectors from gammas.

Everything here is exact; parameters far below 1 and probabilities far below 1e-300 are handled
in logs. Numba code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled_part

SMALLEST = 1e-300
"""No drawn probability is smaller: its logarithm stays finite."""

CASE_BY_CASE = 16
"""Up to so many cases a uniform each is cheaper than conditional binomials."""

SMALL_PARAMETER = 0.1
"""Below it a gamma variate may underflow and is drawn in logs."""


@compiled_part
def split_count(
    count: int, weights: Floats, cumulative: Floats, numbers: Ints, rng: np.random.Generator
) -> None:
    """Split ``count`` cases over the classes: one multinomial draw.

    Parameters
    ----------
    count : int
    weights : ndarray, shape (n,)
        Shares of the classes, not normalised; a class of weight 0 gets no case.
    cumulative : ndarray, shape (n,)
        Cumulative sums of ``weights``.
    numbers : ndarray of int64, shape (n,)
        Written to.
    rng : numpy.random.Generator
    """
    n = weights.shape[0]
    for k in range(n):
        numbers[k] = 0
    if count <= CASE_BY_CASE:
        for _ in range(count):
            numbers[pick(cumulative, rng)] += 1
        return
    left = count
    for k in range(n - 1, 0, -1):
        if left == 0:
            return
        if cumulative[k - 1] <= 0.0:
            numbers[k] = left
            return
        share = min(weights[k] / cumulative[k], 1.0)
        numbers[k] = rng.binomial(left, share)
        left -= numbers[k]
    numbers[0] = left


@compiled_part
def pick(cumulative: Floats, rng: np.random.Generator) -> int:
    """Pick one class: inverse of the cumulative shares at a uniform random number."""
    last = cumulative.shape[0] - 1
    u = rng.random() * cumulative[last]
    chosen = 0
    for k in range(last):
        chosen += u >= cumulative[k]  # no branch: which class it is cannot be foreseen
    return chosen


@compiled_part
def draw_shares(start: Ints, parameter: Floats, out: Floats, rng: np.random.Generator) -> None:
    """Draw probability vectors laid end to end, each from its Dirichlet, by way of gammas.

    Two gammas make a Beta. Where a parameter is so small that its gamma variate could
    underflow, that vector is drawn again in logs.

    Parameters
    ----------
    start : ndarray of int64, shape (n + 1,)
        Vector i is out[start[i]:start[i + 1]].
    parameter : ndarray, shape (m,)
    out : ndarray, shape (m,)
        Written to.
    rng : numpy.random.Generator
    """
    for e in range(start[0], start[-1]):  # one plain loop: half the time of one per vector
        out[e] = rng.standard_gamma(parameter[e])
    for i in range(start.shape[0] - 1):
        total = 0.0
        smallest = math.inf
        for e in range(start[i], start[i + 1]):
            total += out[e]
            smallest = min(smallest, parameter[e])
        if smallest < SMALL_PARAMETER:
            total = _gammas_by_logs(parameter, start[i], start[i + 1], out, rng)
        for e in range(start[i], start[i + 1]):
            out[e] = max(out[e] / total, SMALLEST)  # divided: one share alone is exactly 1


@compiled_part
def draw_shares_of(
    which: Ints, start: Ints, parameter: Floats, out: Floats, rng: np.random.Generator
) -> None:
    """Draw some of the vectors; see `draw_shares`."""
    for i in which:
        draw_shares(start[i : i + 2], parameter, out, rng)


@compiled_part
def _gammas_by_logs(
    parameter: Floats, first: int, last: int, out: Floats, rng: np.random.Generator
) -> float:
    """Draw gammas up to a common factor, by G(a) = G(a + 1) U^(1/a); return their sum."""
    highest = -math.inf
    for e in range(first, last):
        log_gamma = math.log(rng.standard_gamma(parameter[e] + 1.0))
        out[e] = log_gamma + math.log1p(-rng.random()) / parameter[e]
        highest = max(highest, out[e])
    total = 0.0
    for e in range(first, last):
        out[e] = math.exp(out[e] - highest)
        total += out[e]
    return total
