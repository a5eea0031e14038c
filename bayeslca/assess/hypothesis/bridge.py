"""How much more probable the data are under one model than under another.

Both models are of the same answers, and the ratio w of p(answers, classes) under the one to that
under the other is known at every draw of the classes. The mean of w over draws of the one model
is the ratio of evidences; where w varies too much for that, draws of both models are bridged.

References
----------
Meng, X.-L. & Wong, W. H. (1996). Simulating ratios of normalizing constants via a simple identity.
Statistica Sinica 6, 831-860, equation 4.1.
Frühwirth-Schnatter, S. (2004). Estimating marginal likelihoods for mixture and Markov switching
models using bridge sampling techniques. Econometrics Journal 7, 143-167, section 3.3.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats

ROUNDS = 1000


@dataclass(frozen=True, slots=True)
class LogRatio:
    """The log of a ratio, with its Monte Carlo standard error."""

    value: float
    mcse: float


def mean_ratio(log_weight: Floats) -> LogRatio:
    """Return the log mean of weights (chain, draw, label), given as logs."""
    highest = log_weight.max()
    if np.isneginf(highest):
        return LogRatio(-np.inf, np.inf)
    weight = np.exp(log_weight - highest).mean(axis=-1)
    return LogRatio(float(highest + np.log(weight.mean())), relative_error(weight))


def bridge_ratio(log_weight: Floats, log_weight_other: Floats) -> LogRatio:
    """Bridge draws of two models.

    Parameters
    ----------
    log_weight : ndarray, shape (chain, draw, label)
        log w at draws of the model below the line, under every labelling that is as probable.
    log_weight_other : ndarray, shape (chain, draw)
        log w at draws of the model above the line.

    Returns
    -------
    LogRatio
        With an infinite error where the models have no draw in common: then an upper bound.
    """
    if np.isneginf(log_weight.max()):  # no draw in common: only a bound (3 of n, rule of three)
        most = float(log_weight_other.max() + np.log(3.0 / log_weight.size))
        return LogRatio(most, np.inf)
    n, m = ess(np.exp(log_weight - log_weight.max()).mean(axis=-1)), ess(_bounded(log_weight_other))
    s, t = np.log(n / (n + m)), np.log(m / (n + m))
    ratio = float(np.median(log_weight_other))
    for _ in range(ROUNDS):
        above = log_weight - np.logaddexp(t + log_weight, s + ratio)
        below = -np.logaddexp(t + log_weight_other, s + ratio)
        new = _log_mean(above) - _log_mean(below)
        if abs(new - ratio) < 1e-10:
            break
        ratio = new
    error = np.hypot(
        relative_error(np.exp(above - above.max()).mean(axis=-1)),
        relative_error(np.exp(below - below.max())),
    )
    return LogRatio(float(ratio), float(error))


def _bounded(log_weight: Floats) -> Floats:
    return np.asarray(np.exp(np.minimum(log_weight - np.median(log_weight), 0.0)))


def _log_mean(values: Floats) -> float:
    return float(logsumexp(values) - np.log(values.size))


def ess(values: Floats) -> float:
    """Return the effective sample size of the mean of draws (chain, draw); all for constants."""
    from arviz_stats.base import array_stats

    if np.ptp(values) == 0.0 or values.shape[1] < 4:
        return float(values.size)
    with np.errstate(invalid="ignore", divide="ignore"):
        found = float(array_stats.ess(np.ascontiguousarray(values), method="mean"))
    return found if np.isfinite(found) and found > 0 else 1.0


def relative_error(values: Floats) -> float:
    """Return the Monte Carlo standard error of the mean of draws (chain, draw), by the mean."""
    if np.ptp(values) <= 1e-12 * abs(values.max()):
        return 0.0
    return float(values.std(ddof=1) / np.sqrt(ess(values)) / values.mean())
