"""Truncated Betas of the kernel against SciPy's distribution function, in every branch."""

from __future__ import annotations

import numba
import numpy as np
import pytest
from scipy import stats

from bayeslca.sampling.truncated import truncated_beta

SEED = 20261205
CASES = [
    # a, b, lower, upper: straddling, narrow, tails, poles, far out
    (3, 4, 0.1, 0.9),
    (30, 10, 0.7, 0.71),
    (30, 10, 0.2, 0.3),
    (200, 3, 0, 0.5),
    (5, 300, 0.3, 1),
    (1, 1, 0.2, 0.5),
    (1, 5, 0, 0.01),
    (1, 40, 0.5, 0.51),
    (2, 1, 0, 0.1),
    (1000, 1000, 0.48, 0.6),
    (0.5, 0.5, 0.1, 0.9),
    (0.5, 0.5, 0.01, 0.2),
    (0.5, 0.5, 0.6, 0.99),
    (0.3, 50, 0.2, 0.6),
    (0.3, 50, 1e-6, 0.5),
    (40, 0.4, 0.1, 0.8),
    (400, 0.5, 0, 0.2),
    (1, 0.5, 0.2, 0.9),
    (0.2, 0.7, 0.3, 1),
    (60, 40, 0.58, 1),
]


@numba.njit
def many(a, b, lower, upper, n, rng):
    out = np.empty(n)
    for i in range(n):
        out[i] = truncated_beta(a, b, lower, upper, rng)
    return out


def share(a, b, lower, upper, x):
    """Distribution function between the bounds, from the tail that keeps its digits."""
    full = stats.beta(a, b)
    if full.cdf(lower) > 0.5:
        return (full.sf(lower) - full.sf(x)) / (full.sf(lower) - full.sf(upper))
    return (full.cdf(x) - full.cdf(lower)) / (full.cdf(upper) - full.cdf(lower))


@pytest.mark.parametrize(("a", "b", "lower", "upper"), CASES)
def test_draws_have_the_distribution_between_the_bounds(a, b, lower, upper):
    numbers = (float(a), float(b), float(lower), float(upper))
    x = many(*numbers, 20_000, np.random.default_rng(SEED))
    assert lower <= x.min() < x.max() <= upper
    assert stats.kstest(share(*numbers, x), "uniform").pvalue > 1e-4 / len(CASES)


def test_mass_of_1e_minus_100_is_drawn():
    x = many(2.0, 400.0, 0.45, 0.9, 5_000, np.random.default_rng(SEED))
    assert stats.beta(2, 400).sf(0.45) < 1e-98
    # The tail is all but an exponential from the bound on.
    rate = 399 / 0.55 - 1 / 0.45
    assert abs((x - 0.45).mean() * rate - 1) < 4 / np.sqrt(5_000) + 0.02


def test_no_room_gives_the_middle():
    x = many(2.0, 3.0, 0.4, 0.4, 3, np.random.default_rng(SEED))
    assert x.tolist() == [0.4] * 3
