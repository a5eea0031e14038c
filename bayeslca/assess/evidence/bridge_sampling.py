"""Bridge sampling: the ratio of two normalising constants from draws of both densities.

The evidence of one model is such a ratio: that of the unnormalised posterior to a normalised
proposal. Errors are of the integrands themselves: how far the draws of chains depend on one
another, and chains differ, is seen where it matters.

References
----------
Meng, X.-L. & Wong, W. H. (1996). Simulating ratios of normalizing constants via a simple
identity: a theoretical exploration. Statistica Sinica 6, 831-860.
Frühwirth-Schnatter, S. (2004). Estimating marginal likelihoods for mixture and Markov switching
models using bridge sampling techniques. The Econometrics Journal 7, 143-167 (error of the
estimate; proposals from full conditionals).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.special import expit

from bayeslca._typing import Floats

LEAST_EFFECTIVE = 50.0
"""An integrand with fewer effective draws has no error that could be trusted."""
LEAST_OVERLAP = 1e-3
"""Mean of the second integrand below which the two densities hardly meet."""


@dataclass(frozen=True, slots=True)
class BridgeRatio:
    """The log of a ratio of normalising constants.

    Attributes
    ----------
    value : float
    mcse : float
        Monte Carlo standard error; infinite where draws of one density miss the other.
    effective : float
        The smaller of the two integrands' effective numbers of draws.
    overlap : float
        The integrand's mean, 0 to 1: how much the two densities share. 1 when they are the same.
    """

    value: float
    mcse: float
    effective: float = np.inf
    overlap: float = 1.0

    @property
    def is_usable(self) -> bool:
        """False when there are too few effective draws, or too little overlap."""
        finite = bool(np.isfinite(self.value) and np.isfinite(self.mcse))
        return finite and self.effective >= LEAST_EFFECTIVE and self.overlap >= LEAST_OVERLAP


def bridge_ratio(at_first: Floats, at_second: Floats) -> BridgeRatio:
    """Return ln Z1 - ln Z2 from log ratios of two unnormalised densities p1 and p2.

    Parameters
    ----------
    at_first : ndarray, shape (chain, draw)
        ln p1 - ln p2 at draws of the first density. Chains tell how dependent draws are.
    at_second : ndarray, shape (chain, draw)
        The same at draws of the second; minus infinity where p1 is 0.
    """
    sizes = np.array([at_first.size, at_second.size], dtype=np.float64)
    value, f1, f2 = _solved(at_first, at_second, sizes)
    if np.isfinite(value):
        # Once more with shares by effective draws, which makes the bridge the best one.
        effective = np.array([effective_draws(f1), effective_draws(f2)])
        value, f1, f2 = _solved(at_first, at_second, effective)
    effective = np.array([effective_draws(f1), effective_draws(f2)])
    with np.errstate(divide="ignore", invalid="ignore"):
        variance = f1.var() / f1.mean() ** 2 / effective[0]
        variance += f2.var() / f2.mean() ** 2 / effective[1]
    mcse = float(np.sqrt(variance)) if np.isfinite(variance) else np.inf
    return BridgeRatio(float(value), mcse, float(effective.min()), float(f2.mean()))


def effective_draws(values: Floats) -> float:
    """Return the effective number of draws (chain, draw) for their mean; constants count whole.

    Chains that differ, and dependence along chains, both lower it.
    """
    if np.ptp(values) <= 1e-12 * max(1e-300, float(np.abs(values).max())):
        return float(values.size)
    from arviz_stats.base import array_stats

    found = float(array_stats.ess(np.ascontiguousarray(values), method="mean"))
    return min(found, float(values.size)) if np.isfinite(found) else 1.0


def _solved(at_first: Floats, at_second: Floats, sizes: Floats) -> tuple[float, Floats, Floats]:
    """Find the log ratio at which both integrands have the same mean; return these too."""
    share = sizes / sizes.sum()
    odds = float(np.log(share[0]) - np.log(share[1]))

    def integrands(rho: float) -> tuple[Floats, Floats]:
        # p2 r / (s1 p1 + s2 p2 r) at draws of p1, p1 / (s1 p1 + s2 p2 r) at draws of p2
        return (
            expit(-(at_first - rho + odds)) / share[1],
            expit(at_second - rho + odds) / share[0],
        )

    def gap(rho: float) -> float:
        f1, f2 = integrands(rho)
        return float(f1.mean() - f2.mean())

    finite = np.concatenate([at_first.ravel(), at_second[np.isfinite(at_second)]])
    low, high = float(finite.min()) - 50.0, float(finite.max()) + 50.0
    if gap(low) >= 0.0 or gap(high) <= 0.0:
        f1, f2 = integrands(float(np.median(at_first)))
        return -np.inf, f1, f2
    value = float(brentq(gap, low, high, xtol=1e-10))
    f1, f2 = integrands(value)
    return value, f1, f2
