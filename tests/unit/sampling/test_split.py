"""Random splits and shares against SciPy's distributions. Level 1e-4 over all checks."""

from __future__ import annotations

import math

import numba
import numpy as np
import pytest
from scipy import stats

from bayeslca.sampling import split
from bayeslca.sampling.split import CASE_BY_CASE

SEED = 20261204
LEVEL = 1e-4 / 20
N = 20_000


@numba.njit
def split_count(count, weights, cumulative, numbers, rng):
    """Enter from Python: the kernel's parts have no entry of their own."""
    split.split_count(count, weights, cumulative, numbers, rng)


@numba.njit
def draw_shares(start, parameter, out, rng):
    split.draw_shares(start, parameter, out, rng)


def splits(count: int, weights: list[float], n: int = N) -> np.ndarray:
    rng = np.random.default_rng(SEED)
    w = np.array(weights)
    cumulative, numbers = np.cumsum(w), np.zeros(w.size, dtype=np.int64)
    out = np.empty((n, w.size), dtype=np.int64)
    for i in range(n):
        split_count(count, w, cumulative, numbers, rng)
        out[i] = numbers
    return out


def shares(parameter: list[float], n: int = N) -> np.ndarray:
    rng = np.random.default_rng(SEED)
    a = np.array(parameter)
    start, drawn = np.array([0, a.size]), np.empty(a.size)
    out = np.empty((n, a.size))
    for i in range(n):
        draw_shares(start, a, drawn, rng)
        out[i] = drawn
    return out


@pytest.mark.parametrize("count", [1, 5, CASE_BY_CASE, CASE_BY_CASE + 1, 60, 4000])
def test_a_split_count_is_multinomial(count):
    weights = [0.2, 0.05, 0.5, 0.25]
    drawn = splits(count, [3.0 * w for w in weights])
    assert np.all(drawn.sum(axis=1) == count)
    for k, p in enumerate(weights):
        edges = np.unique(stats.binom.ppf(np.linspace(0.02, 0.98, 12), count, p))
        cdf = np.concatenate([[0.0], stats.binom.cdf(edges, count, p), [1.0]])
        expected = N * np.diff(cdf)
        found = np.histogram(drawn[:, k], bins=np.concatenate([[-1], edges, [count]]) + 0.5)[0]
        some = expected > 0
        assert found[~some].sum() == 0
        assert stats.chisquare(found[some], expected[some]).pvalue > LEVEL / 4
    covariance = np.cov(drawn.T)[0, 2]
    expected = -count * 0.2 * 0.5
    assert covariance == pytest.approx(expected, abs=6 * count * 0.5 / math.sqrt(N))


@pytest.mark.parametrize("count", [7, 500])
def test_a_class_of_weight_zero_gets_no_case(count):
    drawn = splits(count, [0.0, 0.3, 0.0, 0.7, 0.0], n=300)
    assert np.all(drawn[:, [0, 2, 4]] == 0)
    assert np.all(drawn.sum(axis=1) == count)
    only = splits(count, [0.0, 2.0, 0.0], n=10)
    assert np.all(only[:, 1] == count)


@pytest.mark.parametrize(
    "parameter", [[3.0, 1.5], [1.0, 1.0], [0.4, 0.7], [40.0, 2.0], [0.05, 0.3]]
)
def test_two_gammas_make_a_beta(parameter):
    drawn = shares(parameter)
    assert np.allclose(drawn.sum(axis=1), 1.0)
    assert stats.kstest(drawn[:, 0], stats.beta(*parameter).cdf).pvalue > LEVEL
    if parameter[0] >= 0.1:  # else much of the mass of the second share rounds to 1
        assert stats.kstest(drawn[:, 1], stats.beta(*parameter[::-1]).cdf).pvalue > LEVEL


@pytest.mark.parametrize("parameter", [[1.0, 2.0, 5.0], [0.02, 0.5, 3.0, 1.0]])
def test_shares_are_dirichlet(parameter):
    drawn = shares(parameter)
    total = sum(parameter)
    for k, a in enumerate(parameter):
        assert stats.kstest(drawn[:, k], stats.beta(a, total - a).cdf).pvalue > LEVEL
    a, b = parameter[1], parameter[2]  # a share among two others is a Beta too
    ratio = drawn[:, 1] / (drawn[:, 1] + drawn[:, 2])
    assert stats.kstest(ratio, stats.beta(a, b).cdf).pvalue > LEVEL


def test_tiny_parameters_do_not_underflow():
    drawn = shares([1e-3, 1e-3, 2e-3], n=5000)
    assert np.all(np.isfinite(np.log(drawn)))
    assert np.allclose(drawn.sum(axis=1), 1.0)
    won = (drawn > 0.5).mean(axis=0)  # nearly all the mass is on one element
    assert won == pytest.approx([0.25, 0.25, 0.5], abs=0.04)
    # log of Beta(a, b) for tiny a is close to log(U) / a
    small = np.log(shares([1e-2, 5.0], n=5000)[:, 0]) * 1e-2
    seen = small > math.log(1e-300) * 1e-2
    assert seen.mean() > 0.9


def test_vectors_laid_end_to_end_are_drawn_apart():
    rng = np.random.default_rng(SEED)
    start, a, out = np.array([0, 2, 5]), np.array([1.0, 1.0, 0.01, 1.0, 1.0]), np.empty(5)
    for _ in range(100):
        draw_shares(start, a, out, rng)
        assert out[:2].sum() == pytest.approx(1.0)
        assert out[2:].sum() == pytest.approx(1.0)
