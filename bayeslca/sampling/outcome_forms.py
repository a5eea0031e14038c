"""Forms of an outcome: what it is given its class, and the arrays that kernels read.

A form is what an outcome is given its class: normal, a probability, a rate and so on. Forms
"with covariates" have a class's own intercept and slopes shared by all classes, on the scale of
their link. All forms keep their parameters in the same two arrays, so that one compiled chain
serves them all:

====================  ==================================  ===========================
form                  ``by_class`` (K, M)                 ``shared`` (S,)
====================  ==================================  ===========================
NORMAL                mean, variance                      slopes
BERNOULLI             probability
POISSON               rate
NEGATIVE_BINOMIAL     rate, size
CATEGORICAL           probabilities of all categories
LOGISTIC              intercept                           slopes
LOG_POISSON           intercept                           slopes
LOG_NEGATIVE_BINOMIAL intercept, size                     slopes
CUMULATIVE            shift                               slopes, thresholds
====================  ==================================  ===========================

A negative binomial of rate r and size s has mean r and variance r + r^2 / s. In the cumulative
form P(outcome <= j) = logistic(threshold j - shift - slopes x).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints

NORMAL = 0
BERNOULLI = 1
POISSON = 2
NEGATIVE_BINOMIAL = 3
CATEGORICAL = 4
LOGISTIC = 5
LOG_POISSON = 6
LOG_NEGATIVE_BINOMIAL = 7
CUMULATIVE = 8

SMALLEST = 1e-300


class OutcomeData(NamedTuple):
    """An outcome and its covariates as the kernels read them. U units, p slopes, R categories.

    Attributes
    ----------
    form : int
    value : ndarray of float64, shape (U,)
        Category codes 0..R-1 of ordered outcomes; anything where the outcome was not seen.
    rows : ndarray of int64, shape (n,)
        Units whose outcome (and covariates) were seen: the others say nothing of the outcome.
    covariate : ndarray of float64, shape (U, p)
    constant : ndarray of float64, shape (U,)
        What the log density holds that depends on the value alone.
    equal_spread : bool
        True when variance or size is one for all classes.
    location : ndarray of float64, shape (2,)
        Mean and standard deviation of the normal prior of means, intercepts or shifts.
    spread : ndarray of float64, shape (2,)
        Variances: degrees of freedom and scale of the inverse chi-square prior. Sizes: mean and
        standard deviation of their log.
    pseudo : ndarray of float64, shape (2,)
        Beta, gamma (shape, rate) or Dirichlet (the first, of each category) parameters.
    slope_sd : ndarray of float64, shape (p,)
        Of the slopes' normal prior around 0.
    threshold : ndarray of float64, shape (R - 1,) or (0,)
        Mean of the thresholds' normal prior, whose standard deviation is that of ``location``.
    """

    form: int
    value: Floats
    rows: Ints
    covariate: Floats
    constant: Floats
    equal_spread: bool
    location: Floats
    spread: Floats
    pseudo: Floats
    slope_sd: Floats
    threshold: Floats


def value_constant(form: int, value: Floats) -> Floats:
    """Return what the log density of values holds that no parameter touches, shape (U,)."""
    from scipy.special import gammaln

    if form in (POISSON, NEGATIVE_BINOMIAL, LOG_POISSON, LOG_NEGATIVE_BINOMIAL):
        return np.asarray(-gammaln(np.where(value >= 0.0, value, 0.0) + 1.0))
    return np.zeros_like(value)
