"""Drawing intercepts and slopes of an outcome given the classes.

For the normal form exactly, from their normal conditional. For links, proposed from one step of
weighted least squares and accepted or not (Gamerman 1997). Numba code: import inside functions.

References
----------
Gamerman, D. (1997). Sampling from the posterior distribution in generalized linear mixed models.
Statistics and Computing 7, 57-68.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled_part
from bayeslca.sampling.outcome_density import linear_part, log_density, score_and_weight
from bayeslca.sampling.outcome_forms import SMALLEST, OutcomeData


@compiled_part
def draw_linear(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats, rng: np.random.Generator
) -> None:
    """Draw means and slopes of the normal form at once, from their normal conditional."""
    centre, factor, _ = _least_squares(data, classes, by_class, shared)
    _write(centre + _unfactored(factor, rng), by_class, shared)


@compiled_part
def propose_linear(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats, rng: np.random.Generator
) -> None:
    """Propose all intercepts and slopes from one step of weighted least squares."""
    old = _read(by_class, shared, data.slope_sd.size)
    centre, factor, here = _least_squares(data, classes, by_class, shared)
    new = centre + _unfactored(factor, rng)
    log_ratio = -here - _log_proposal(new, centre, factor)
    _write(new, by_class, shared)
    centre, factor, there = _least_squares(data, classes, by_class, shared)
    log_ratio += there + _log_proposal(old, centre, factor)
    if not math.log(1.0 - rng.random()) < log_ratio:
        _write(old, by_class, shared)


@compiled_part
def _least_squares(
    data: OutcomeData, classes: Ints, by_class: Floats, shared: Floats
) -> tuple[Floats, Floats, float]:
    """Return where one Newton step leads, the factor of its precision, and log p here."""
    n_classes, n_slopes = by_class.shape[0], data.slope_sd.size
    size = n_classes + n_slopes
    precision, slope = np.zeros((size, size)), np.zeros(size)
    log_p = 0.0
    for i in range(data.rows.size):
        u = data.rows[i]
        k = classes[u]
        line = linear_part(data.covariate, shared, u, n_slopes)
        score, weight = score_and_weight(
            data.form, data.value[u], by_class[k], shared, n_slopes, line
        )
        log_p += log_density(data.form, data.value[u], by_class[k], shared, n_slopes, line)
        slope[k] += score
        precision[k, k] += weight
        for j in range(n_slopes):
            x = data.covariate[u, j]
            slope[n_classes + j] += score * x
            precision[n_classes + j, k] += weight * x
            for m in range(j + 1):
                precision[n_classes + j, n_classes + m] += weight * x * data.covariate[u, m]
    for k in range(size):
        at = by_class[k, 0] if k < n_classes else shared[k - n_classes]
        centre = data.location[0] if k < n_classes else 0.0
        sd = data.location[1] if k < n_classes else data.slope_sd[k - n_classes]
        precision[k, k] += 1.0 / sd**2
        slope[k] += (centre - at) / sd**2
        log_p -= 0.5 * ((at - centre) / sd) ** 2
    _factor(precision)
    # Solve precision x = slope by the two triangles.
    for k in range(size):
        for j in range(k):
            slope[k] -= precision[k, j] * slope[j]
        slope[k] /= precision[k, k]
    for k in range(size - 1, -1, -1):
        for j in range(k + 1, size):
            slope[k] -= precision[j, k] * slope[j]
        slope[k] /= precision[k, k]
    return _read(by_class, shared, n_slopes) + slope, precision, log_p


@compiled_part
def _factor(matrix: Floats) -> None:
    """Replace the lower triangle by its Cholesky factor."""
    for i in range(matrix.shape[0]):
        for j in range(i + 1):
            total = matrix[i, j]
            for m in range(j):
                total -= matrix[i, m] * matrix[j, m]
            matrix[i, j] = math.sqrt(max(total, SMALLEST)) if i == j else total / matrix[j, j]


@compiled_part
def _unfactored(factor: Floats, rng: np.random.Generator) -> Floats:
    """Draw normals whose precision has this factor."""
    out = np.empty(factor.shape[0])
    for k in range(out.size - 1, -1, -1):
        out[k] = rng.standard_normal()
        for j in range(k + 1, out.size):
            out[k] -= factor[j, k] * out[j]
        out[k] /= factor[k, k]
    return out


@compiled_part
def _log_proposal(at: Floats, centre: Floats, factor: Floats) -> float:
    """Return the log density of a normal by its precision's factor, without 2 pi."""
    out = 0.0
    for k in range(at.size):
        total = 0.0
        for j in range(k, at.size):
            total += factor[j, k] * (at[j] - centre[j])
        out += math.log(factor[k, k]) - 0.5 * total * total
    return out


@compiled_part
def _read(by_class: Floats, shared: Floats, n_slopes: int) -> Floats:
    n_classes = by_class.shape[0]
    out = np.empty(n_classes + n_slopes)
    for k in range(n_classes):
        out[k] = by_class[k, 0]
    for j in range(n_slopes):
        out[n_classes + j] = shared[j]
    return out


@compiled_part
def _write(values: Floats, by_class: Floats, shared: Floats) -> None:
    n_classes = by_class.shape[0]
    for k in range(values.size):
        if k < n_classes:
            by_class[k, 0] = values[k]
        else:
            shared[k - n_classes] = values[k]
