"""What is said of an outcome: class means, spreads, categories, effects; and drawing outcomes.

All functions take parameters with any leading axes of draws: ``by_class`` (..., K, M) and
``shared`` (..., S). Means adjusted for covariates are standardised: averaged over the covariates
of all cases seen, as if all were in the class.
"""

from __future__ import annotations

import numpy as np
from scipy.special import expit

from bayeslca._typing import Floats, Ints
from bayeslca.relate.outcomes.model import OutcomeModel
from bayeslca.sampling.outcome_forms import (
    BERNOULLI,
    CATEGORICAL,
    CUMULATIVE,
    LOG_NEGATIVE_BINOMIAL,
    LOG_POISSON,
    LOGISTIC,
    NEGATIVE_BINOMIAL,
    NORMAL,
    POISSON,
)

PIECE = 4_000_000
"""Numbers held at once."""

EFFECTS = {
    "numeric": "standardised difference",
    "binary": "odds ratio",
    "count": "ratio of means",
    "ordered": "chance of being higher",
}
"""What the effect is, by kind of outcome."""


def class_means(model: OutcomeModel, by_class: Floats, shared: Floats) -> Floats:
    """Return the mean of the outcome in each class, shape (..., K).

    Of binary outcomes the probability of yes; of ordered ones the mean place, counted from 1.
    """
    first = by_class[..., 0]
    if model.form in (NORMAL, BERNOULLI, POISSON, NEGATIVE_BINOMIAL):
        return np.asarray(first)
    if model.form in (CATEGORICAL, CUMULATIVE):
        places = np.arange(1.0, model.n_levels + 1.0)
        return np.asarray(category_probabilities(model, by_class, shared) @ places)
    slopes = shared[..., : model.n_slopes]
    if model.form == LOGISTIC:
        return _averaged(model, first, slopes, expit)
    line = slopes @ model.seen_covariate.T
    return np.asarray(np.exp(first) * np.exp(line).mean(axis=-1)[..., None])


def _averaged(model: OutcomeModel, first: Floats, slopes: Floats, link: object) -> Floats:
    """Average a function of the linear part over the cases, some draws at a time."""
    leading = first.shape[:-1]
    flat, flat_slopes = first.reshape(-1, model.n_classes), slopes.reshape(-1, model.n_slopes)
    x = model.seen_covariate
    size = max(1, PIECE // (x.shape[0] * model.n_classes))
    out = np.empty_like(flat)
    for begin in range(0, len(flat), size):
        part = slice(begin, begin + size)
        line = flat_slopes[part] @ x.T
        out[part] = link(flat[part, :, None] + line[:, None]).mean(axis=-1)  # type: ignore[operator]
    return out.reshape(*leading, model.n_classes)


def category_probabilities(model: OutcomeModel, by_class: Floats, shared: Floats) -> Floats:
    """Return the probabilities (..., K, R) of an ordered outcome's categories."""
    if model.form == CATEGORICAL:
        return by_class
    p = model.n_slopes
    slopes, thresholds = shared[..., :p], shared[..., p:]
    below = [
        _averaged(model, thresholds[..., j, None] - by_class[..., 0], -slopes, expit)
        for j in range(model.n_levels - 1)
    ]
    zero = np.zeros_like(by_class[..., 0])
    return np.diff(np.stack([zero, *below, zero + 1.0], axis=-1), axis=-1)


def effects(model: OutcomeModel, by_class: Floats, shared: Floats, a: int, b: int) -> Floats:
    """Return the effect (...) of class a against class b; see `EFFECTS`.

    The difference of means in standard deviations within classes (root of the two variances'
    mean); the odds ratio, or the ratio of means; the chance that a case of a has the higher
    value, ties counted half.
    """
    one, two = by_class[..., a, :], by_class[..., b, :]
    if model.form == NORMAL:
        pooled = 0.5 * (one[..., 1] + two[..., 1])
        return np.asarray((one[..., 0] - two[..., 0]) / np.sqrt(pooled))
    if model.form == BERNOULLI:
        with np.errstate(divide="ignore"):
            odds = one[..., 0] / (1.0 - one[..., 0]) * (1.0 - two[..., 0]) / two[..., 0]
        return np.asarray(odds)
    if model.form in (POISSON, NEGATIVE_BINOMIAL):
        return np.asarray(one[..., 0] / two[..., 0])
    if model.form in (LOGISTIC, LOG_POISSON, LOG_NEGATIVE_BINOMIAL):
        return np.asarray(np.exp(one[..., 0] - two[..., 0]))
    p = category_probabilities(model, by_class, shared)
    below = np.cumsum(p[..., b, :], axis=-1) - p[..., b, :]
    return np.asarray((p[..., a, :] * (below + 0.5 * p[..., b, :])).sum(axis=-1))


def is_ratio(model: OutcomeModel) -> bool:
    """Tell whether the effect is a ratio, whose errors are alike on the log scale."""
    return model.form not in (NORMAL, CATEGORICAL, CUMULATIVE)


def simulate_outcome(
    model: OutcomeModel,
    by_class: Floats,
    shared: Floats,
    classes: Ints,
    rng: np.random.Generator,
) -> Floats:
    """Draw an outcome (N,) for every case given its class (N,) and its covariates.

    Cases that were not seen have one too, at the covariates' mean.
    """
    x = np.where(model.seen[:, None], model.covariate, 0.0)
    line = x @ shared[: model.n_slopes]
    first = by_class[classes, 0]
    if model.form == NORMAL:
        return np.asarray(rng.normal(first + line, np.sqrt(by_class[classes, 1])))
    if model.form in (BERNOULLI, LOGISTIC):
        p = first if model.form == BERNOULLI else expit(first + line)
        return np.asarray((rng.random(classes.size) < p).astype(np.float64))
    if model.form in (CATEGORICAL, CUMULATIVE):
        if model.form == CATEGORICAL:
            below = np.cumsum(by_class[classes], axis=1)[:, :-1]
        else:
            below = expit(shared[model.n_slopes :] - (first + line)[:, None])
        return np.asarray((rng.random(classes.size)[:, None] >= below).sum(axis=1), dtype=float)
    rate = first if model.form in (POISSON, NEGATIVE_BINOMIAL) else np.exp(first + line)
    if model.has_spread:
        size = by_class[classes, 1]
        rate = rng.gamma(size, rate / size)
    return np.asarray(rng.poisson(np.minimum(rate, 1e15)), dtype=np.float64)
