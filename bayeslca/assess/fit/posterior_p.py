"""Posterior predictive p-values, with their Monte Carlo error."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.fit.replicates import Both


@dataclass(frozen=True, eq=False)
class PosteriorP:
    """Shares of replicates that miss by as much as the data, or more.

    Attributes
    ----------
    p, mcse : ndarray, shape (...)
        The error takes account of draws that depend on each other, and is never 0: of a share of
        0 or 1 it is that of a share half a replicate away.
    """

    p: Floats
    mcse: Floats


def posterior_p(both: Both, shape: tuple[int, int]) -> PosteriorP:
    """Return P(discrepancy of a replicate >= that of the data) over the draws.

    Parameters
    ----------
    both : Both, shape (D, ...)
    shape : tuple of int
        The draws as (chain, draw).
    """
    exceeds = np.asarray(both.replicated >= both.observed, dtype=np.float64)
    return PosteriorP(exceeds.mean(axis=0), _error(exceeds, shape))


def two_sided_p(both: Both, shape: tuple[int, int]) -> PosteriorP:
    """Return twice the smaller of the two tails' shares, at most 1."""
    turned = Both(-both.observed, -both.replicated)
    above, below = posterior_p(both, shape), posterior_p(turned, shape)
    smaller = above.p < below.p
    return PosteriorP(
        np.minimum(2.0 * np.minimum(above.p, below.p), 1.0),
        2.0 * np.where(smaller, above.mcse, below.mcse),
    )


def _error(exceeds: Floats, shape: tuple[int, int]) -> Floats:
    n = len(exceeds)
    flat = exceeds.reshape(n, -1)
    size = np.full(flat.shape[1], float(n))
    for column in np.flatnonzero(np.ptp(flat, axis=0) > 0) if n > 8 else ():
        size[column] = _effective(flat[:, column].reshape(shape), n)
    inside = (flat.mean(axis=0) * n + 0.5) / (n + 1.0)
    return np.asarray(np.sqrt(inside * (1.0 - inside) / size).reshape(exceeds.shape[1:]))


def _effective(values: Floats, n: int) -> float:
    """Return the effective sample size of draws (chain, draw), at most their number."""
    from arviz_stats.base import array_stats

    with np.errstate(invalid="ignore", divide="ignore"):  # a chain that never moves
        size = float(array_stats.ess(np.ascontiguousarray(values), method="mean"))
    return min(size, float(n)) if np.isfinite(size) else float(n)
