"""Drawing an outcome's parameters given the classes: exact where conjugate, else one MCMC step.

Means and variances are drawn from their normal and inverse chi-square conditionals,
probabilities, rates and categories from Beta, gamma and Dirichlet. Intercepts and slopes of a
link are proposed from one step of weighted least squares and accepted or not;
now and then each intercept takes a slice step instead, so that a chain far from its place finds
back. Sizes of the negative binomial, its rates and thresholds take slice steps. Numba code:
import inside functions.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled, compiled_part
from bayeslca.sampling.outcome_density import (
    fill_log_density,
    linear_part,
    log_density,
)
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    CUMULATIVE,
    LOG_NEGATIVE_BINOMIAL,
    NEGATIVE_BINOMIAL,
    NORMAL,
    POISSON,
    SMALLEST,
    OutcomeData,
)
from bayeslca.sampling.outcome_regression import draw_linear, propose_linear
from bayeslca.sampling.slice_step import slice_step
from bayeslca.sampling.split import pick

SLICE_INSTEAD = 0.1
"""How often intercepts take slice steps besides."""


@compiled_part
def _rate_target(log_rate: float, args: Any) -> float:
    shape, rate_prior, total, cases, size = args
    if log_rate > 600.0 or log_rate < -600.0:
        return -math.inf
    rate = math.exp(log_rate)
    return float(
        shape * log_rate - rate_prior * rate - (total + cases * size) * math.log(size + rate)
    )


_slice_rate = slice_step(_rate_target)


@compiled_part
def _size_target(log_size: float, args: Any) -> float:
    data, classes, by_class, shared, of_class = args
    if log_size > 25.0 or log_size < -25.0:
        return -math.inf
    size = math.exp(log_size)
    own = math.lgamma(size) - size * log_size
    away = (log_size - data.spread[0]) / data.spread[1]
    total = -0.5 * away * away
    n_slopes = data.slope_sd.size
    adjusted = data.form == LOG_NEGATIVE_BINOMIAL
    for i in range(data.rows.size):
        u = data.rows[i]
        k = classes[u]
        if k != of_class and not data.equal_spread:
            continue
        rate = by_class[k, 0]
        if adjusted:
            rate = math.exp(rate + linear_part(data.covariate, shared, u, n_slopes))
        y = data.value[u]
        total += math.lgamma(y + size) - own - (y + size) * math.log(size + rate)
    return float(total)


_slice_size = slice_step(_size_target)


@compiled_part
def _intercept_target(intercept: float, args: Any) -> float:
    data, classes, by_class, shared, of_class = args
    away = (intercept - data.location[0]) / data.location[1]
    total = -0.5 * away * away
    n_slopes = data.slope_sd.size
    moved = by_class[of_class].copy()
    moved[0] = intercept
    for i in range(data.rows.size):
        u = data.rows[i]
        if classes[u] == of_class:
            line = linear_part(data.covariate, shared, u, n_slopes)
            total += log_density(data.form, data.value[u], moved, shared, n_slopes, line)
    return float(total)


_slice_intercept = slice_step(_intercept_target)


@compiled_part
def _threshold_target(threshold: float, args: Any) -> float:
    data, classes, by_class, shared, j = args
    n_slopes = data.slope_sd.size
    at = n_slopes + j
    if j > 0 and threshold <= shared[at - 1]:
        return -math.inf
    if j < data.threshold.size - 1 and threshold >= shared[at + 1]:
        return -math.inf
    shared[at] = threshold
    away = (threshold - data.threshold[j]) / data.location[1]
    total = -0.5 * away * away
    for i in range(data.rows.size):
        u = data.rows[i]
        y = data.value[u]
        if y == j or y == j + 1:
            line = linear_part(data.covariate, shared, u, n_slopes)
            total += log_density(data.form, y, by_class[classes[u]], shared, n_slopes, line)
    return float(total)


_slice_threshold = slice_step(_threshold_target)


@compiled
def draw_outcome(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats, rng: np.random.Generator
) -> None:
    """Draw all parameters of an outcome given each unit's class, in place.

    Parameters
    ----------
    data : OutcomeData
    classes : ndarray of int64, shape (U,)
        Those of units whose outcome was not seen are not looked at.
    by_class : ndarray of float64, shape (K, M)
    shared : ndarray of float64, shape (S,)
    rng : numpy.random.Generator
    """
    form = data.form
    if form == NORMAL:
        if data.slope_sd.size:
            draw_linear(data, classes, by_class, shared, rng)
        else:
            _draw_means(data, classes, by_class, rng)
        _draw_variances(data, classes, by_class, shared, rng)
    elif form == BERNOULLI or form == CATEGORICAL:
        _draw_probabilities(data, classes, by_class, rng)
    elif form == POISSON or form == NEGATIVE_BINOMIAL:
        _draw_rates(data, classes, by_class, rng)
    else:
        propose_linear(data, classes, by_class, shared, rng)
        if rng.random() < SLICE_INSTEAD:
            for k in range(by_class.shape[0]):
                by_class[k, 0] = _slice_intercept(
                    by_class[k, 0],
                    1.0,
                    rng,
                    (data, classes, by_class, shared, k),
                )
    if form == NEGATIVE_BINOMIAL or form == LOG_NEGATIVE_BINOMIAL:
        _draw_sizes(data, classes, by_class, shared, rng)
    if form == CUMULATIVE:
        _draw_thresholds(data, classes, by_class, shared, rng)


@compiled
def inner_chain(
    data: OutcomeData,
    log_weight: Floats,
    sweeps: int,
    by_class: Floats,
    shared: Floats,
    share: Floats,
    trace: Floats,
    rng: np.random.Generator,
) -> None:
    """Run classes and outcome parameters to and fro, what the answers say being held.

    Parameters
    ----------
    data : OutcomeData
    log_weight : ndarray of float64, shape (U, K)
        log P(class, answers) of each unit at the draw that is held.
    sweeps : int
    by_class, shared : ndarray
        Where to start; replaced by the last state.
    share : ndarray of float64, shape (U, K)
        P(class | answers, outcome) at the state before the last sweep's draw of parameters.
    trace : ndarray of float64, shape (sweeps,) or (0,)
        Log likelihood of the outcome at every sweep, when asked for.
    rng : numpy.random.Generator
    """
    n_units, n_classes = log_weight.shape
    classes = np.zeros(n_units, dtype=np.int64)
    cumulative = np.empty(n_classes)
    for sweep in range(sweeps):
        fill_log_density(data, by_class, shared, share)
        total = 0.0
        for u in range(n_units):
            highest = -math.inf
            for k in range(n_classes):
                share[u, k] += log_weight[u, k]
                highest = max(highest, share[u, k])
            running = 0.0
            for k in range(n_classes):
                share[u, k] = math.exp(share[u, k] - highest)
                running += share[u, k]
                cumulative[k] = running
            total += math.log(running) + highest
            for k in range(n_classes):
                share[u, k] /= running
            classes[u] = pick(cumulative, rng)
        if trace.size:
            trace[sweep] = total
        draw_outcome(data, classes, by_class, shared, rng)


@compiled_part
def _draw_means(
    data: OutcomeData, classes: Ints, by_class: Floats, rng: np.random.Generator
) -> None:
    n_classes = by_class.shape[0]
    cases, sums = np.zeros(n_classes), np.zeros(n_classes)
    for i in range(data.rows.size):
        u = data.rows[i]
        cases[classes[u]] += 1.0
        sums[classes[u]] += data.value[u] - data.location[0]
    for k in range(n_classes):
        precision = cases[k] / by_class[k, 1] + 1.0 / data.location[1] ** 2
        centre = sums[k] / by_class[k, 1] / precision
        by_class[k, 0] = data.location[0] + centre + rng.standard_normal() / math.sqrt(precision)


@compiled_part
def _draw_variances(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats, rng: np.random.Generator
) -> None:
    n_classes, n_slopes = by_class.shape[0], data.slope_sd.size
    cases, squares = np.zeros(n_classes), np.zeros(n_classes)
    for i in range(data.rows.size):
        u = data.rows[i]
        k = classes[u]
        away = data.value[u] - by_class[k, 0] - linear_part(data.covariate, shared, u, n_slopes)
        cases[k] += 1.0
        squares[k] += away * away
    if data.equal_spread:
        cases[:] = cases.sum()
        squares[:] = squares.sum()
    df, scale = data.spread[0], data.spread[1]
    for k in range(n_classes):
        if k and data.equal_spread:
            by_class[k, 1] = by_class[0, 1]
        else:
            total = 0.5 * (df * scale + squares[k])
            by_class[k, 1] = total / rng.standard_gamma(0.5 * (df + cases[k]))


@compiled_part
def _draw_probabilities(
    data: OutcomeData, classes: Ints, by_class: Floats, rng: np.random.Generator
) -> None:
    n_classes = by_class.shape[0]
    n_columns = by_class.shape[1]
    binary = data.form == BERNOULLI
    counts = np.zeros((n_classes, 2 if binary else n_columns))
    for i in range(data.rows.size):
        u = data.rows[i]
        counts[classes[u], int(data.value[u])] += 1.0
    for k in range(n_classes):
        if binary:
            by_class[k, 0] = rng.beta(data.pseudo[0] + counts[k, 1], data.pseudo[1] + counts[k, 0])
            continue
        total = 0.0
        for j in range(n_columns):
            by_class[k, j] = max(rng.standard_gamma(data.pseudo[0] + counts[k, j]), SMALLEST)
            total += by_class[k, j]
        for j in range(n_columns):
            by_class[k, j] = max(by_class[k, j] / total, SMALLEST)


@compiled_part
def _draw_rates(
    data: OutcomeData, classes: Ints, by_class: Floats, rng: np.random.Generator
) -> None:
    n_classes = by_class.shape[0]
    cases, sums = np.zeros(n_classes), np.zeros(n_classes)
    for i in range(data.rows.size):
        u = data.rows[i]
        cases[classes[u]] += 1.0
        sums[classes[u]] += data.value[u]
    for k in range(n_classes):
        shape = data.pseudo[0] + sums[k]
        if data.form == POISSON:
            drawn = rng.standard_gamma(shape) / (data.pseudo[1] + cases[k])
            by_class[k, 0] = max(drawn, SMALLEST)
        else:
            log_rate = _slice_rate(
                math.log(by_class[k, 0]),
                1.0,
                rng,
                (shape, data.pseudo[1], sums[k], cases[k], by_class[k, 1]),
            )
            by_class[k, 0] = max(math.exp(log_rate), SMALLEST)


@compiled_part
def _draw_sizes(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats, rng: np.random.Generator
) -> None:
    for k in range(by_class.shape[0]):
        if k and data.equal_spread:
            by_class[k, 1] = by_class[0, 1]
            continue
        log_size = _slice_size(
            math.log(by_class[k, 1]), 1.0, rng, (data, classes, by_class, shared, k)
        )
        by_class[k, 1] = math.exp(log_size)


@compiled_part
def _draw_thresholds(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats, rng: np.random.Generator
) -> None:
    n_slopes, n_thresholds = data.slope_sd.size, data.threshold.size
    for j in range(n_thresholds):
        shared[n_slopes + j] = _slice_threshold(
            shared[n_slopes + j],
            0.5,
            rng,
            (data, classes, by_class, shared.copy(), j),
        )
    # Moving shifts and thresholds together changes no probability: drawn from the prior alone.
    precision = (by_class.shape[0] + n_thresholds) / data.location[1] ** 2
    pull = 0.0
    for k in range(by_class.shape[0]):
        pull += data.location[0] - by_class[k, 0]
    for j in range(n_thresholds):
        pull += data.threshold[j] - shared[n_slopes + j]
    move = pull / data.location[1] ** 2 / precision + rng.standard_normal() / math.sqrt(precision)
    for k in range(by_class.shape[0]):
        by_class[k, 0] += move
    for j in range(n_thresholds):
        shared[n_slopes + j] += move
