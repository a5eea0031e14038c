"""The compiled half of the logistic prevalence step. Numba code: import inside functions."""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounded_gibbs import draw_bounded_blocks
from bayeslca.sampling.bounds_layout import Bounded
from bayeslca.sampling.compiled import compiled, compiled_part
from bayeslca.sampling.gibbs import allocate, draw_blocks
from bayeslca.sampling.layout import Layout, Workspace
from bayeslca.sampling.polya_gamma import polya_gamma


@compiled
def logistic_sweeps(
    layout: Layout,
    work: Workspace,
    bounds: Bounded,
    is_held: bool,
    design: Floats,
    prior_sd: Floats,
    coefficients: Floats,
    predictor: Floats,
    precision: Floats,
    linear: Floats,
    elements: Floats,
    prevalence: Floats,
    n: int,
    rng: np.random.Generator,
) -> float:
    """Do n sweeps of classes, blocks (unless held) and coefficients, all in place.

    Returns
    -------
    float
        Log likelihood before the last sweep; nan when a unit is impossible.
    """
    log_likelihood = 0.0
    for _ in range(n):
        log_likelihood = allocate(layout, work, elements, prevalence, rng)
        if math.isnan(log_likelihood):
            return log_likelihood
        if not is_held:
            if bounds.block.shape[0]:
                draw_bounded_blocks(layout, work, bounds, elements, rng)
            else:
                draw_blocks(layout, work, elements, rng)
        draw_coefficients(
            design,
            work.class_count,
            prior_sd,
            coefficients,
            predictor,
            prevalence,
            precision,
            linear,
            rng,
        )
    return log_likelihood


@compiled
def prevalences(design: Floats, coefficients: Floats, predictor: Floats, out: Floats) -> None:
    """Set linear predictors and class probabilities (row, K) of all rows.

    Parameters
    ----------
    design : ndarray, shape (row, P)
    coefficients : ndarray, shape (K, P)
    predictor, out : ndarray, shape (row, K)
        Written to.
    """
    for i in range(design.shape[0]):
        highest = -math.inf
        for k in range(coefficients.shape[0]):
            total = 0.0
            for p in range(design.shape[1]):
                total += design[i, p] * coefficients[k, p]
            predictor[i, k] = total
            highest = max(highest, total)
        total = 0.0
        for k in range(coefficients.shape[0]):
            out[i, k] = math.exp(predictor[i, k] - highest)
            total += out[i, k]
        for k in range(coefficients.shape[0]):
            out[i, k] /= total


@compiled
def draw_coefficients(
    design: Floats,
    class_count: Ints,
    prior_sd: Floats,
    coefficients: Floats,
    predictor: Floats,
    prevalence: Floats,
    precision: Floats,
    linear: Floats,
    rng: np.random.Generator,
) -> None:
    """Redraw the coefficients of each class in turn, then their common level; all in place.

    Given those of the other classes, a class against all others is a binomial logit with an
    offset (Holmes & Held 2006, section 3), made Gaussian by Polya-Gamma variables. The common
    level of all classes leaves the likelihood as it is, so it is redrawn from its prior.

    Parameters
    ----------
    design : ndarray, shape (row, P)
    class_count : ndarray of int, shape (row, K)
    prior_sd : ndarray, shape (P,)
        The same for all classes.
    coefficients : ndarray, shape (K, P)
    predictor, prevalence : ndarray, shape (row, K)
        Of the coefficients as they come in; of the new ones afterwards.
    precision : ndarray, shape (P, P)
    linear : ndarray, shape (P,)
        Scratch.
    rng : numpy.random.Generator
    """
    n_rows, n_columns = design.shape
    n_classes = coefficients.shape[0]
    for k in range(n_classes):
        for p in range(n_columns):
            linear[p] = 0.0
            for q in range(p + 1):
                precision[p, q] = 0.0
            precision[p, p] = 1.0 / (prior_sd[p] * prior_sd[p])
        for i in range(n_rows):
            cases = 0
            for j in range(n_classes):
                cases += class_count[i, j]
            if cases == 0:
                continue
            others = _log_sum_of_others(predictor, i, k)
            omega = polya_gamma(cases, predictor[i, k] - others, rng)
            pull = class_count[i, k] - 0.5 * cases + omega * others
            for p in range(n_columns):
                weighted = omega * design[i, p]
                linear[p] += design[i, p] * pull
                for q in range(p + 1):
                    precision[p, q] += weighted * design[i, q]
        draw_gaussian(precision, linear, rng)
        for p in range(n_columns):
            coefficients[k, p] = linear[p]
        for i in range(n_rows):
            total = 0.0
            for p in range(n_columns):
                total += design[i, p] * coefficients[k, p]
            predictor[i, k] = total
    for p in range(n_columns):
        mean = 0.0
        for k in range(n_classes):
            mean += coefficients[k, p] / n_classes
        move = prior_sd[p] / math.sqrt(n_classes) * rng.standard_normal() - mean
        for k in range(n_classes):
            coefficients[k, p] += move
    prevalences(design, coefficients, predictor, prevalence)


@compiled_part
def _log_sum_of_others(predictor: Floats, row: int, k: int) -> float:
    """Return the log of the sum of exp(predictor) over the classes other than k."""
    highest = -math.inf
    for j in range(predictor.shape[1]):
        if j != k:
            highest = max(highest, predictor[row, j])
    total = 0.0
    for j in range(predictor.shape[1]):
        if j != k:
            total += math.exp(predictor[row, j] - highest)
    return highest + math.log(total)


@compiled_part
def draw_gaussian(precision: Floats, linear: Floats, rng: np.random.Generator) -> None:
    """Draw from the normal with this precision and precision times mean ``linear``, in place.

    Parameters
    ----------
    precision : ndarray, shape (P, P)
        Lower triangle; overwritten with its Cholesky factor.
    linear : ndarray, shape (P,)
        Overwritten with the draw.
    """
    n = linear.shape[0]
    for p in range(n):
        for q in range(p + 1):
            total = precision[p, q]
            for r in range(q):
                total -= precision[p, r] * precision[q, r]
            if p == q:
                precision[p, p] = math.sqrt(total)
            else:
                precision[p, q] = total / precision[q, q]
    for p in range(n):  # forwards, then add the noise, then backwards
        for q in range(p):
            linear[p] -= precision[p, q] * linear[q]
        linear[p] /= precision[p, p]
    for p in range(n):
        linear[p] += rng.standard_normal()
    for p in range(n - 1, -1, -1):
        for q in range(p + 1, n):
            linear[p] -= precision[q, p] * linear[q]
        linear[p] /= precision[p, p]
