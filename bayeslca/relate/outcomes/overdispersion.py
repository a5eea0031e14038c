"""Do counts vary more within classes than a Poisson gives: a check that trusts no density.

Given the answers, the expected count of a case is the mean of the classes' rates weighted by its
memberships; rates are found by least squares on the memberships, so that a wrong density cannot
move cases from class to class and hide what it misses. The spread around that is compared with
simulated counts: classes drawn from the memberships, Poisson counts, rates found anew.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats

REPLICATES = 1000


@dataclass(frozen=True)
class Overdispersion:
    """How the spread of counts compares with a Poisson's.

    Attributes
    ----------
    ratio : float
        Squared distances from the expected counts over those that a Poisson gives; 1 when it fits.
    lower, upper : float
        Where 95 % of simulated ratios lie.
    p : float
        Share of simulated ratios that are as large.
    """

    ratio: float
    lower: float
    upper: float
    p: float


def overdispersion(value: Floats, membership: Floats, rng: np.random.Generator) -> Overdispersion:
    """Compare counts with those of a Poisson in each class.

    Parameters
    ----------
    value : ndarray, shape (n,)
    membership : ndarray, shape (n, K)
        P(class | answers).
    rng : numpy.random.Generator
    """
    solve = np.asarray(np.linalg.pinv(membership), dtype=np.float64)
    rates = _rates(solve, value, value.mean())
    below = np.cumsum(membership, axis=1)[:, :-1]
    classes = (rng.random((REPLICATES, value.size, 1)) >= below).sum(axis=2)
    simulated = rng.poisson(rates[classes]).astype(np.float64)
    found = _ratio(solve, simulated, membership, value.mean())
    observed = float(_ratio(solve, value[None], membership, value.mean())[0])
    lower, upper = np.quantile(found, [0.025, 0.975])
    return Overdispersion(observed, float(lower), float(upper), float((found >= observed).mean()))


def _rates(solve: Floats, value: Floats, mean: float) -> Floats:
    """Return rates (..., K) of counts (..., n), kept positive."""
    return np.asarray(np.maximum(value @ solve.T, 0.01 * mean))


def _ratio(solve: Floats, value: Floats, membership: Floats, mean: float) -> Floats:
    rates = _rates(solve, value, mean)
    expected = rates @ membership.T
    between = (rates**2) @ membership.T - expected**2
    squares = ((value - expected) ** 2).sum(axis=-1)
    return np.asarray(squares / (expected + np.maximum(between, 0.0)).sum(axis=-1))
