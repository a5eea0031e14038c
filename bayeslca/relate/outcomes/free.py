"""An outcome's parameters as free numbers, for estimators that climb."""

from __future__ import annotations

import numpy as np
from scipy.special import expit, logit, softmax

from bayeslca._typing import Floats
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

FURTHEST = 12.0
"""Logits and logs are kept this near 0: what wants to go further is at its edge."""


class FreeNumbers:
    """Turns an outcome's parameters into free numbers and back.

    Means of a normal outcome are in standard deviations from the mean of all cases. The shift of
    the first class is 0 in the cumulative form.

    Parameters
    ----------
    model : OutcomeModel
    """

    def __init__(self, model: OutcomeModel) -> None:
        self.model = model
        value = model.value[model.seen]
        self.centre, self.scale = (0.0, 1.0)
        if model.form == NORMAL:
            self.centre, self.scale = float(value.mean()), float(value.std())
        self.slope_scale = self.scale / np.maximum(model.seen_covariate.std(axis=0), 1e-12)

    @property
    def size(self) -> int:
        """How many free numbers there are, P."""
        model = self.model
        if model.form == CATEGORICAL:
            return model.n_classes * (model.n_levels - 1)
        n = model.n_classes + model.n_slopes
        if model.form == CUMULATIVE:
            return n - 1 + model.n_levels - 1
        return n + model.has_spread * (1 if model.equal_spread else model.n_classes)

    def free(self, by_class: Floats, shared: Floats) -> Floats:
        """Return the free numbers (P,) of parameters (K, M) and (S,)."""
        model, first = self.model, by_class[:, 0]
        p = model.n_slopes
        slopes = shared[:p] / self.slope_scale
        if model.form == CATEGORICAL:
            logs = np.log(np.maximum(by_class, 1e-12))
            return np.asarray((logs[:, 1:] - logs[:, :1]).ravel())
        if model.form == CUMULATIVE:
            thresholds = shared[p:] - first[0]
            gaps = np.log(np.maximum(np.diff(thresholds), 1e-6))
            return np.concatenate([first[1:] - first[0], slopes, thresholds[:1], gaps])
        if model.form == BERNOULLI:
            first = logit(np.clip(first, 1e-6, 1 - 1e-6))
        elif model.form in (POISSON, NEGATIVE_BINOMIAL):
            first = np.log(np.maximum(first, 1e-6))
        else:
            first = (first - self.centre) / self.scale
        if not model.has_spread:
            return np.concatenate([first, slopes])
        second = by_class[: 1 if model.equal_spread else None, 1]
        return np.concatenate([first, np.log(second / self.scale**2), slopes])

    def parameters(self, free: Floats) -> tuple[Floats, Floats]:
        """Return the parameters (K, M) and (S,) of free numbers (P,)."""
        model, n = self.model, self.model.n_classes
        p = model.n_slopes
        by_class = np.empty((n, model.columns))
        if model.form == CATEGORICAL:
            logs = np.clip(free, -FURTHEST, FURTHEST).reshape(n, -1)
            return softmax(np.column_stack([np.zeros(n), logs]), axis=1), np.zeros(0)
        if model.form == CUMULATIVE:
            by_class[:, 0] = np.concatenate([[0.0], free[: n - 1]])
            slopes = free[n - 1 : n - 1 + p] * self.slope_scale
            first = free[n - 1 + p]
            gaps = np.exp(np.clip(free[n + p :], -FURTHEST, FURTHEST))
            thresholds = first + np.concatenate([[0.0], np.cumsum(gaps)])
            return by_class, np.concatenate([slopes, thresholds])
        first = free[:n]
        if model.form == BERNOULLI:
            by_class[:, 0] = expit(np.clip(first, -FURTHEST, FURTHEST))
        elif model.form in (POISSON, NEGATIVE_BINOMIAL):
            by_class[:, 0] = np.exp(np.clip(first, -FURTHEST, 700.0))
        elif model.form in (LOGISTIC, LOG_POISSON, LOG_NEGATIVE_BINOMIAL):
            by_class[:, 0] = np.clip(first, -2.0 * FURTHEST, 2.0 * FURTHEST)
        else:
            by_class[:, 0] = self.centre + self.scale * first
        at = n
        if model.has_spread:
            m = 1 if model.equal_spread else n
            logs = np.clip(free[n : n + m], -FURTHEST, FURTHEST)
            by_class[:, 1] = self.scale**2 * np.exp(logs)
            at += m
        return by_class, free[at : at + p] * self.slope_scale
