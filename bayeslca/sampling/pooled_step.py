"""Mean and spread of pooled units, drawn given the cases of each class in each unit.

The units' prevalences are summed out, so that mean and spread are not held back by them. Numba
code: import inside functions.

References
----------
Neal, R. M. (2003). Slice sampling. Annals of Statistics 31, 705-767, section 4.
Teh, Y. W., Jordan, M. I., Beal, M. J. & Blei, D. M. (2006). Hierarchical Dirichlet processes.
Journal of the American Statistical Association 101, 1566-1581: the tables that make the mean
conjugate (section 5.3).
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled, compiled_part
from bayeslca.sampling.pool_layout import Pool
from bayeslca.sampling.split import draw_shares

WIDTH = 1.5
"""First width of the slice on the log of the concentration."""
MOST_STEPS = 40
LOWEST, HIGHEST = -25.0, 60.0
"""Where the log of the concentration ends: the prior has less than 1e-10 outside by default."""


@compiled_part
def draw_pool(
    mean_prior: Floats,
    spread_prior: Floats,
    at_least: Ints,
    parameter: Floats,
    mean: Floats,
    start: Ints,
    class_count: Ints,
    concentration: Floats,
    rng: np.random.Generator,
) -> None:
    """Redraw mean and spread, given the cases in each class of each unit (row, K).

    Parameters
    ----------
    mean_prior, spread_prior, at_least, parameter, mean, start
        See `bayeslca.sampling.pool_layout.Pool`.
    class_count : ndarray of int64, shape (row, K)
    concentration : ndarray of float64, shape (row, K)
        Concentration times mean, the same in every row; replaced by the new draw.
    rng : numpy.random.Generator
    """
    n_classes = mean_prior.shape[0]
    total = 0.0
    for k in range(n_classes):
        total += concentration[0, k]
    for k in range(n_classes):
        mean[k] = concentration[0, k] / total
    _count(class_count, at_least)
    total = math.exp(_slice(math.log(total), spread_prior, at_least, mean, rng))
    # Tables: given their number, the mean is Dirichlet.
    for k in range(n_classes):
        x = total * mean[k]
        parameter[k] = mean_prior[k] + at_least[k, 0]
        for j in range(1, at_least.shape[1]):
            if at_least[k, j] == 0:
                break
            parameter[k] += rng.binomial(at_least[k, j], x / (x + j))
    draw_shares(start, parameter, mean, rng)
    for g in range(concentration.shape[0]):
        for k in range(n_classes):
            concentration[g, k] = max(total * mean[k], 1e-300)


@compiled
def redraw(pool: Pool, class_count: Ints, concentration: Floats, rng: np.random.Generator) -> None:
    """Redraw mean and spread from Python; see `draw_pool`."""
    draw_pool(
        pool.mean_prior,
        pool.spread_prior,
        pool.at_least,
        pool.parameter,
        pool.mean,
        pool.start,
        class_count,
        concentration,
        rng,
    )


@compiled_part
def _count(class_count: Ints, at_least: Ints) -> None:
    """Count the units with more than j cases in a class, and in all classes together."""
    at_least[:, :] = 0
    last = at_least.shape[0] - 1
    for g in range(class_count.shape[0]):
        cases = 0
        for k in range(last):
            cases += class_count[g, k]
            if class_count[g, k] > 0:
                at_least[k, class_count[g, k] - 1] += 1
        if cases > 0:
            at_least[last, cases - 1] += 1
    for k in range(last + 1):
        for j in range(at_least.shape[1] - 2, -1, -1):
            at_least[k, j] += at_least[k, j + 1]


@compiled_part
def _log_density(eta: float, spread_prior: Floats, at_least: Ints, mean: Floats) -> float:
    """Log density of the log concentration, given mean and classes; up to a constant."""
    total = math.exp(eta)
    log_spread = -0.5 * math.log1p(total)
    out: float = spread_prior[0] * log_spread + eta - math.log1p(total)
    if spread_prior[1] != 1.0:
        out += (spread_prior[1] - 1.0) * math.log(-math.expm1(log_spread))
    last = at_least.shape[0] - 1
    for j in range(at_least.shape[1]):
        if at_least[last, j] == 0:
            break
        out -= at_least[last, j] * math.log(total + j)
        for k in range(last):
            if at_least[k, j]:
                out += at_least[k, j] * math.log(total * mean[k] + j)
    return out


@compiled_part
def _slice(
    eta: float, spread_prior: Floats, at_least: Ints, mean: Floats, rng: np.random.Generator
) -> float:
    """Draw the log concentration by stepping out and shrinking."""
    level = _log_density(eta, spread_prior, at_least, mean) + math.log1p(-rng.random())
    low = eta - WIDTH * rng.random()
    high = low + WIDTH
    below = int(MOST_STEPS * rng.random())
    above = MOST_STEPS - 1 - below
    while below > 0 and low > LOWEST and _log_density(low, spread_prior, at_least, mean) > level:
        low -= WIDTH
        below -= 1
    while above > 0 and high < HIGHEST and _log_density(high, spread_prior, at_least, mean) > level:
        high += WIDTH
        above -= 1
    low, high = max(low, LOWEST), min(high, HIGHEST)
    while True:
        found = low + (high - low) * rng.random()
        if _log_density(found, spread_prior, at_least, mean) >= level or high - low < 1e-12:
            return found
        if found < eta:
            low = found
        else:
            high = found
