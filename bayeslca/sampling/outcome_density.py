"""Densities of an outcome within a class; see `bayeslca.sampling.outcome_forms`.

Numba code: import inside functions.
"""

from __future__ import annotations

import math

from bayeslca._typing import Floats
from bayeslca.sampling.compiled import compiled, compiled_part
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    LOG_NEGATIVE_BINOMIAL,
    LOG_POISSON,
    LOGISTIC,
    NEGATIVE_BINOMIAL,
    NORMAL,
    POISSON,
    SMALLEST,
    OutcomeData,
)


@compiled
def fill_log_density(data: OutcomeData, by_class: Floats, shared: Floats, out: Floats) -> None:
    """Write the log density of every unit's outcome in every class; 0 where it was not seen.

    Parameters
    ----------
    data : OutcomeData
    by_class : ndarray of float64, shape (K, M)
    shared : ndarray of float64, shape (S,)
    out : ndarray of float64, shape (U, K)
        Written to.
    """
    form, value, covariate, constant = data.form, data.value, data.covariate, data.constant
    n_slopes = data.slope_sd.size
    out[:] = 0.0
    for i in range(data.rows.size):
        u = data.rows[i]
        line = linear_part(covariate, shared, u, n_slopes)
        for k in range(by_class.shape[0]):
            out[u, k] = constant[u] + log_density(
                form, value[u], by_class[k], shared, n_slopes, line
            )


@compiled_part
def linear_part(covariate: Floats, shared: Floats, u: int, n_slopes: int) -> float:
    """Return what the covariates of a unit add to its intercept."""
    line = 0.0
    for j in range(n_slopes):
        line += covariate[u, j] * shared[j]
    return line


@compiled_part
def log_density(
    form: int, y: float, of_class: Floats, shared: Floats, n_slopes: int, line: float
) -> float:
    """Return the log density of a value in a class, without the constant of the value."""
    if form == NORMAL:
        away = y - of_class[0] - line
        deviance = math.log(2.0 * math.pi * of_class[1]) + away * away / of_class[1]
        return float(-0.5 * deviance)
    if form == BERNOULLI:
        p = of_class[0] if y > 0.5 else 1.0 - of_class[0]
        return math.log(max(p, SMALLEST))
    if form == POISSON:
        return float(y * math.log(of_class[0]) - of_class[0])
    if form == NEGATIVE_BINOMIAL:
        return float(log_negative_binomial(y, math.log(of_class[0]), of_class[1]))
    if form == CATEGORICAL:
        return math.log(of_class[int(y)])
    eta = of_class[0] + line
    if form == LOGISTIC:
        return float(-log_one_plus_exp(-eta if y > 0.5 else eta))
    if form == LOG_POISSON:
        return float(y * eta - math.exp(min(eta, 700.0)))
    if form == LOG_NEGATIVE_BINOMIAL:
        return float(log_negative_binomial(y, eta, of_class[1]))
    return float(log_between(int(y), eta, shared, n_slopes))


@compiled_part
def log_negative_binomial(y: float, log_rate: float, size: float) -> float:
    """Return the log density of a count, without its own factorial."""
    rate = math.exp(min(log_rate, 700.0))
    log_sum = math.log(size + rate)
    return (
        math.lgamma(y + size)
        - math.lgamma(size)
        + size * (math.log(size) - log_sum)
        + y * (log_rate - log_sum)
    )


@compiled_part
def log_one_plus_exp(x: float) -> float:
    """Return log(1 + exp(x))."""
    return x + math.log1p(math.exp(-x)) if x > 0.0 else math.log1p(math.exp(x))


@compiled_part
def log_between(y: int, eta: float, shared: Floats, n_slopes: int) -> float:
    """Return log P(category y) of the cumulative form, by F(b)(1 - F(a))(1 - exp(a - b))."""
    n_thresholds = shared.size - n_slopes
    out = 0.0
    if y < n_thresholds:
        out -= log_one_plus_exp(eta - shared[n_slopes + y])
    if y > 0:
        out -= log_one_plus_exp(shared[n_slopes + y - 1] - eta)
    if 0 < y < n_thresholds:
        gap = shared[n_slopes + y] - shared[n_slopes + y - 1]
        out += math.log(max(-math.expm1(-gap), SMALLEST))
    return out


@compiled_part
def score_and_weight(
    form: int, y: float, of_class: Floats, shared: Floats, n_slopes: int, line: float
) -> tuple[float, float]:
    """Return the slope of the log density in the linear part, and minus its curvature.

    Expected curvature for the log links, observed for the cumulative form; both are positive.
    """
    eta = of_class[0] + line
    if form == NORMAL:
        return (y - eta) / of_class[1], 1.0 / of_class[1]
    if form == LOGISTIC:
        p = 1.0 / (1.0 + math.exp(-max(min(eta, 700.0), -700.0)))
        return y - p, p * (1.0 - p)
    if form == LOG_POISSON:
        rate = math.exp(min(eta, 700.0))
        return y - rate, rate
    if form == LOG_NEGATIVE_BINOMIAL:
        rate = math.exp(min(eta, 700.0))
        shrink = of_class[1] / (of_class[1] + rate)
        return (y - rate) * shrink, rate * shrink
    category = int(y)
    above, below = 1.0, 0.0
    if category < shared.size - n_slopes:
        above = math.exp(-log_one_plus_exp(eta - shared[n_slopes + category]))
    if category > 0:
        below = math.exp(-log_one_plus_exp(eta - shared[n_slopes + category - 1]))
    return above + below - 1.0, above * (1.0 - above) + below * (1.0 - below)
