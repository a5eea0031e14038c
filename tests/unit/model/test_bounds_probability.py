"""The probability of bounds, draws under bounds, and the density that is divided by it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from bayeslca.model import bounds_probability as module
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.bounds_probability import log_bounds_probability
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.truncated_prior import by_gibbs, components, draw_inside, truncated_beta

SEED = 20261204


def blocks(*priors, lower=None, upper=None, orders=()):
    sizes = [len(prior) for prior in priors]
    n = sum(sizes)
    pairs = np.asarray(orders, dtype=np.int64).reshape(-1, 2)
    low, high = np.zeros(n), np.ones(n)
    for e, value in (lower or {}).items():
        low[e] = value
    for e, value in (upper or {}).items():
        high[e] = value
    return BlockArrays(
        np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64),
        np.concatenate([np.asarray(prior, dtype=float) for prior in priors]),
        low,
        high,
        pairs[:, 0].copy(),
        pairs[:, 1].copy(),
    )


def chain(n, a=1.0, b=1.0):
    return blocks(*[(b, a)] * n, orders=[(2 * i + 1, 2 * i + 3) for i in range(n - 1)])


@pytest.mark.parametrize("n", [2, 3, 5, 10])
def test_a_chain_of_exchangeable_probabilities_has_one_in_n_factorial(n):
    found = log_bounds_probability(chain(n, 0.7, 2.0))
    assert found.value == pytest.approx(-np.sum(np.log(np.arange(1, n + 1))))
    assert found.mcse == 0.0


def test_partial_orders_are_counted():
    # One above two others: a third; two pairs: a quarter; a diamond: 2 of 24.
    uniform = [(1, 1)] * 4
    fork = blocks(*uniform, orders=[(1, 3), (1, 5)])
    pairs = blocks(*uniform, orders=[(1, 3), (5, 7)])
    diamond = blocks(*uniform, orders=[(1, 3), (1, 5), (3, 7), (5, 7)])
    for some, expected in ((fork, 1 / 3), (pairs, 1 / 4), (diamond, 2 / 24)):
        assert np.exp(log_bounds_probability(some).value) == pytest.approx(expected)


def test_one_beta_between_constants_is_exact_also_far_out():
    some = blocks((3, 9), lower={0: 0.95}, upper={0: 0.99})
    expected = stats.beta(3, 9).sf(0.95) - stats.beta(3, 9).sf(0.99)
    assert log_bounds_probability(some).value == pytest.approx(np.log(expected), rel=1e-9)
    turned = blocks((3, 9), lower={1: 0.01}, upper={1: 0.05})
    assert log_bounds_probability(turned).value == pytest.approx(np.log(expected), rel=1e-9)
    third = blocks((1, 1, 1), lower={1: 0.5})
    assert np.exp(log_bounds_probability(third).value) == pytest.approx(0.25)


def test_chains_and_trees_of_betas_are_integrated():
    # Two uniforms, one above the other and above 1/2: 1/2 - 1/8; and its mirror image.
    some = blocks((1, 1), (1, 1), lower={1: 0.5}, orders=[(1, 3)])
    assert log_bounds_probability(some).mcse == 0.0
    assert np.exp(log_bounds_probability(some).value) == pytest.approx(3 / 8, rel=1e-6)
    two_above = blocks((1, 1), (1, 1), (1, 1), upper={5: 0.5}, orders=[(1, 5), (3, 5)])
    # The integral of (1 - x)^2 up to 1/2.
    assert np.exp(log_bounds_probability(two_above).value) == pytest.approx(7 / 24, rel=1e-6)
    # Beta(2, 1) above Beta(1, 3) in a block of three: E(1 - (1 - x)^3) with density 2 x.
    unlike = blocks((1, 2), (1, 1, 2), orders=[(1, 2)])
    assert np.exp(log_bounds_probability(unlike).value) == pytest.approx(0.9, rel=1e-6)


def test_other_bounds_are_estimated_with_their_error():
    # Dirichlet(1, 1, 1) in falling order: one in six, and both first above the same uniform.
    some = blocks((1, 1, 1), orders=[(0, 1), (1, 2)])
    found = log_bounds_probability(some)
    assert 0 < found.mcse < 0.01
    assert found.value == pytest.approx(np.log(1 / 6), abs=4 * found.mcse)


def test_improbable_bounds_are_found_step_by_step(monkeypatch):
    """An order of seven Betas against quadrature, and of five categories against 1/5!."""
    a = np.linspace(1, 3, 7)
    chain_of_betas = blocks(
        *[(1.5, value) for value in a], orders=[(2 * i + 1, 2 * i + 3) for i in range(6)]
    )
    exact = log_bounds_probability(chain_of_betas).value
    assert exact < -9
    monkeypatch.setattr(module, "_tree", lambda *_: None)
    monkeypatch.setattr(module, "LEAST_KEPT", 10**9)
    for some, expected in (
        (replace(chain_of_betas), exact),
        (blocks([1] * 5, orders=[(i, i + 1) for i in range(4)]), -np.log(120)),
    ):
        found = log_bounds_probability(some)
        assert 0 < found.mcse < 0.2
        assert found.value == pytest.approx(expected, abs=4 * found.mcse)


@pytest.mark.parametrize(("low", "high"), [(0.0, 0.2), (0.9, 1.0), (0.3, 0.31), (0.0, 1.0)])
@pytest.mark.parametrize(("a", "b"), [(1, 1), (3, 8), (0.5, 0.5), (20, 2)])
def test_truncated_betas_have_their_distribution(a, b, low, high):
    rng = np.random.default_rng(SEED)
    ends = np.full(4_000, low), np.full(4_000, high)
    draws = truncated_beta(a, b, *ends, rng)
    full = stats.beta(a, b)
    if full.cdf(low) > 0.5:
        share = (full.sf(low) - full.sf(draws)) / (full.sf(low) - full.sf(high))
    else:
        share = (full.cdf(draws) - full.cdf(low)) / (full.cdf(high) - full.cdf(low))
    assert stats.kstest(share, "uniform").pvalue > 1e-4


def test_rejection_and_gibbs_agree():
    some = blocks(
        (1, 1, 2), (2, 1), (1, 3, 1), lower={0: 0.1}, upper={6: 0.5}, orders=[(0, 4), (4, 5)]
    )
    rng = np.random.default_rng(SEED)
    exact = draw_inside(some, 20_000, rng)
    (component,) = components(some)
    walked = by_gibbs(some, component, 20_000, rng)
    for e, ours in zip(component.elements, walked.T, strict=True):
        chains = ours[: ours.size // 64 * 64].reshape(-1, 64).mean(axis=0)
        error = np.hypot(chains.std(ddof=1) / 8, exact[:, e].std() / np.sqrt(20_000))
        assert abs(ours.mean() - exact[:, e].mean()) < 4.5 * error


def test_an_improbable_chain_is_drawn_inside():
    some = chain(12)
    draws = draw_inside(some, 200, np.random.default_rng(SEED))[:, 1::2]
    assert (np.diff(draws, axis=1) < 0).all()
    # Order statistics of 12 uniforms: means i / 13, 4.5 standard errors of 64 chains.
    means = draws.mean(axis=0)
    sd = np.sqrt(stats.beta(np.arange(12, 0, -1), np.arange(1, 13)).var())
    assert np.abs((means - np.arange(12, 0, -1) / 13) / (sd / 8)).max() < 4.5


def prevalence():
    """Three classes: the first known, the second above the third."""
    return ConstrainedPrevalence(
        np.ones((1, 3)),
        np.array([[-1, 0, 1]]),
        np.array([[0.4, 0.6, 0.6]]),
        blocks((1, 1), orders=[(0, 1)]),
    )


def test_constrained_prevalences_know_their_density_and_symmetry():
    source = prevalence()
    inside, outside = np.array([[0.4, 0.5, 0.1]]), np.array([[0.4, 0.1, 0.5]])
    assert source.log_density(inside) == pytest.approx(np.log(2.0))
    assert source.log_density(outside) == -np.inf
    assert source.log_density(np.array([[0.3, 0.5, 0.2]])) == -np.inf  # the known one is not so
    assert source.n_free == 1
    swap = np.array([[0, 2, 1]])
    assert source.keeps_ties(swap)
    assert not source.is_invariant(swap)
    assert not source.keeps_ties(np.array([[1, 0, 2]]))
    rng = np.random.default_rng(SEED)
    draws = np.stack([source.simulate(rng) for _ in range(300)])
    assert source.is_inside(draws).all()
    np.testing.assert_allclose(source.prevalence(source.elements(draws)), draws)
    given_cases = np.stack([source.draw(rng, np.array([[5, 40, 10]])) for _ in range(300)])
    assert abs((given_cases[:, 0, 1] / 0.6).mean() - 41 / 52) < 4 * 0.057 / np.sqrt(300)


def test_without_an_order_the_prevalences_are_exchangeable():
    source = prevalence()
    free = ConstrainedPrevalence(source.concentration, source.element, source.share, blocks((1, 1)))
    assert free.is_invariant(np.array([[0, 2, 1]]))
    assert free.log_density(np.array([[0.4, 0.1, 0.5]])) == pytest.approx(0.0)
