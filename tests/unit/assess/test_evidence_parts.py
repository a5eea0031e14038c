"""The parts of the evidence: permanents, bridges, joining, probabilities, prior constants."""

from __future__ import annotations

from itertools import permutations, product

import numpy as np
import pytest
from scipy.special import betaln, gammaln

from bayeslca.assess.evidence.bridge_sampling import BridgeRatio, bridge_ratio, effective_draws
from bayeslca.assess.evidence.empty_class_ladder import empty_class_constant
from bayeslca.assess.evidence.join import join
from bayeslca.assess.evidence.log_evidence import probabilities
from bayeslca.assess.evidence.model_evidence import Estimate
from bayeslca.assess.evidence.permanent import log_permanents, log_sum_of_permanents

SEED = 20261210


def by_permutations(entries: np.ndarray) -> float:
    """Add up the products over all permutations, in logs."""
    size = len(entries)
    terms = [
        sum(entries[row, column] for row, column in enumerate(order))
        for order in permutations(range(size))
    ]
    return float(np.logaddexp.reduce(terms))


def as_one_matrix(entries: np.ndarray) -> np.ndarray:
    return np.ascontiguousarray(entries[:, None, None, :])


@pytest.mark.parametrize("size", [1, 2, 3, 4, 5, 6])
@pytest.mark.parametrize("spread", [1.0, 30.0, 900.0])
def test_permanent_is_the_sum_over_all_permutations(size: int, spread: float) -> None:
    rng = np.random.default_rng([SEED, size])
    entries = spread * rng.standard_normal((size, size)) - 1000.0
    found = log_permanents(as_one_matrix(entries))[0, 0]
    assert found == pytest.approx(by_permutations(entries), rel=1e-12)


def test_permanent_whose_largest_entries_share_a_column_does_not_vanish() -> None:
    # Scaled by row maxima alone the permanent would be exp(-2000), which is 0 in doubles.
    entries = np.array([[0.0, -2000.0, -5000.0], [0.0, -4000.0, -2100.0], [0.0, -2000.0, -2050.0]])
    found = log_permanents(as_one_matrix(entries))[0, 0]
    assert found == pytest.approx(by_permutations(entries), rel=1e-12)


def test_impossible_matches_have_no_permanent() -> None:
    entries = np.array([[-np.inf, 0.0], [-np.inf, 1.0]])
    assert log_permanents(as_one_matrix(entries))[0, 0] == -np.inf


def test_sum_of_permanents_misses_nothing_that_counts() -> None:
    rng = np.random.default_rng(SEED)
    entries = 20.0 * rng.standard_normal((4, 30, 50, 4))
    base = 20.0 * rng.standard_normal((30, 50))
    expected = np.logaddexp.reduce(base + log_permanents(entries), axis=1)
    assert log_sum_of_permanents(base, entries) == pytest.approx(expected, rel=1e-12)


def test_bridge_finds_the_ratio_of_two_normal_densities_and_its_error() -> None:
    # p1 = N(0, 1) without its constant, p2 = N(1, 1.5) with it: the ratio is sqrt(2 pi).
    exact = 0.5 * np.log(2 * np.pi)
    scores = []
    for seed in range(60):
        rng = np.random.default_rng([SEED, seed])
        first, second = rng.standard_normal((4, 250)), 1.0 + 1.5 * rng.standard_normal((1, 700))

        def log_ratio(x: np.ndarray) -> np.ndarray:
            density = -0.5 * ((x - 1.0) / 1.5) ** 2 - 0.5 * np.log(2 * np.pi) - np.log(1.5)
            return -0.5 * x**2 - density

        found = bridge_ratio(log_ratio(first), log_ratio(second))
        assert found.is_usable
        scores.append((found.value - exact) / found.mcse)
    # Sum of 60 squared standard scores: chi-square; .0005 and .9995 quantiles.
    assert 31.7 < float(np.sum(np.square(scores))) < 99.6


def test_dependent_draws_have_a_larger_error() -> None:
    rng = np.random.default_rng(SEED)
    steps = rng.standard_normal((4, 1000))
    chain = np.zeros((4, 1000))
    for i in range(1, 1000):
        chain[:, i] = 0.95 * chain[:, i - 1] + np.sqrt(1 - 0.95**2) * steps[:, i]
    other = rng.standard_normal((1, 4000)) * 1.3
    dependent = bridge_ratio(0.3 * chain**2, 0.3 * other**2)
    independent = bridge_ratio(0.3 * steps**2, 0.3 * other**2)
    assert dependent.mcse > 2.5 * independent.mcse
    assert dependent.effective < 0.2 * independent.effective


def test_densities_that_do_not_meet_are_not_usable() -> None:
    rng = np.random.default_rng(SEED)
    found = bridge_ratio(30.0 + rng.standard_normal((2, 200)), rng.standard_normal((1, 200)) - 30.0)
    assert not found.is_usable
    assert not BridgeRatio(1.0, np.inf).is_usable
    assert not BridgeRatio(np.nan, 0.1).is_usable


def test_a_proposal_that_never_meets_the_bounds_is_not_usable() -> None:
    at_first = np.zeros((2, 100))
    assert not bridge_ratio(at_first, np.full((1, 100), -np.inf)).is_usable


def test_constants_are_effective_in_full() -> None:
    assert effective_draws(np.full((3, 40), 2.5)) == 120.0


@pytest.mark.parametrize(("n_classes", "a"), [(1, 1.0), (2, 1.0), (3, 0.4)])
def test_prior_probability_of_an_empty_class(n_classes: int, a: float) -> None:
    # By adding up the Dirichlet-multinomial over all ways to split 4 cases over K classes.
    cases, more = 4, n_classes + 1
    total = 0.0
    for split in product(range(cases + 1), repeat=n_classes):
        if sum(split) == cases:
            counts = np.array([*split, 0])
            ways = gammaln(cases + 1) - gammaln(counts + 1).sum()
            log_p = gammaln(more * a) - gammaln(more * a + cases)
            log_p += gammaln(counts + a).sum() - more * gammaln(a)
            total += np.exp(ways + log_p)
    found = empty_class_constant(n_classes, a, np.array([float(cases)]))
    assert found == pytest.approx(np.log(total))
    by_beta = betaln(a, n_classes * a + cases) - betaln(a, n_classes * a)
    assert found == pytest.approx(by_beta)


def test_joining_weighs_by_precision() -> None:
    nodes = {2: [Estimate("bridge", -10.0, 0.1)], 3: [Estimate("bridge", -9.0, 0.3)]}
    found = join(nodes, {2: Estimate("ladder", 0.8, 0.1)})
    # By hand: minimise (x + 10)^2 / .01 + (y + 9)^2 / .09 + (y - x - .8)^2 / .01.
    design = np.array([[1.0, 0.0], [0.0, 1.0], [-1.0, 1.0]])
    weight = np.diag([100.0, 1 / 0.09, 100.0])
    expected = np.linalg.solve(design.T @ weight @ design, design.T @ weight @ [-10.0, -9.0, 0.8])
    assert found.value == pytest.approx(expected)
    assert found.degrees == 1
    # One relation among three independent figures: chi-square is the gap squared over variances.
    assert found.chi_square == pytest.approx(0.2**2 / (0.1**2 + 0.3**2 + 0.1**2))
    assert found.agrees


def test_a_bridge_that_missed_something_is_left_out() -> None:
    # What happened with 20,000 cases and a class too many: 2.8 too low, stated error .39.
    nodes = {3: [Estimate("bridge", -100.0, 0.03)], 4: [Estimate("bridge", -105.4, 0.39)]}
    found = join(nodes, {3: Estimate("ladder", -2.6, 0.1)})
    assert found.value[1] == pytest.approx(-102.6)
    assert found.agrees
    assert any("bridge of 4 classes" in text for text in found.left_out)


def test_disagreement_that_nothing_resolves_is_said() -> None:
    nodes = {2: [Estimate("bridge", -10.0, 0.05)], 3: [Estimate("exact", -12.0, 0.0)]}
    found = join(nodes, {2: Estimate("ladder", 3.0, 0.05)})
    assert found.chi_square == pytest.approx(5.0**2 / (2 * 0.05**2), rel=1e-3)
    assert not found.agrees


def test_unusable_estimates_reach_nothing() -> None:
    nodes = {2: [Estimate("bridge", -10.0, 0.1)], 4: [Estimate("bridge", -12.0, 9.0, "wide")]}
    found = join(nodes, {2: Estimate("ladder", 0.1, 0.1), 3: Estimate("ladder", 0.1, 0.1, "few")})
    assert found.counts == (2, 3)
    assert len(found.left_out) == 2


def test_probabilities_and_their_errors() -> None:
    values = np.array([-1000.0, -999.0, -1001.5])
    covariance = np.array([[0.01, 0.004, 0.0], [0.004, 0.02, 0.01], [0.0, 0.01, 0.04]])
    prior = np.array([0.5, 0.3, 0.2])
    found, of_errors = probabilities(values, covariance, prior)
    weights = prior * np.exp(values + 1000.0)
    assert found == pytest.approx(weights / weights.sum())
    rng = np.random.default_rng(SEED)
    drawn = rng.multivariate_normal(values, covariance, size=40_000)
    simulated = prior * np.exp(drawn + 1000.0)
    simulated /= simulated.sum(axis=1, keepdims=True)
    assert of_errors == pytest.approx(np.cov(simulated.T), rel=0.1, abs=1e-6)


def test_a_prior_probability_of_zero_stays() -> None:
    found, _ = probabilities(np.array([0.0, 5.0]), np.eye(2), np.array([1.0, 0.0]))
    assert found.tolist() == [1.0, 0.0]
