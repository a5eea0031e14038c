"""Pseudo-samples: tilting, rounding, and the variance that is left to add."""

from __future__ import annotations

import numpy as np

from bayeslca.relate.weighted.pseudo_samples import rounded, shrinkage, tilted

SEED = 42


def test_what_is_covered_is_taken_off_the_design_s_variance() -> None:
    rng = np.random.default_rng(SEED)
    root = rng.normal(size=(4, 4))
    covered = root @ root.T
    more = rng.normal(size=(4, 4))
    varies = covered + more @ more.T
    matrix = shrinkage(varies, covered)
    np.testing.assert_allclose(matrix @ varies @ matrix.T + covered, varies, rtol=1e-8)


def test_a_design_that_adds_nothing_leaves_nothing() -> None:
    covered = np.diag([2.0, 3.0])
    np.testing.assert_allclose(shrinkage(covered, covered), 0.0, atol=1e-7)
    # One direction above, one below: only the first is kept, by the square root of what is left.
    np.testing.assert_allclose(shrinkage(np.diag([8.0, 1.0]), covered), np.diag([0.75**0.5, 0.0]))


def test_few_clusters_vary_in_few_directions() -> None:
    direction = np.array([[1.0], [2.0], [0.0]])
    matrix = shrinkage(9.0 * direction @ direction.T, np.eye(3) * 1e-3)
    moved = matrix @ direction
    np.testing.assert_allclose(moved, direction, rtol=0.01)
    np.testing.assert_allclose(matrix @ np.array([2.0, -1.0, 5.0]), 0.0, atol=1e-9)


def test_tilted_counts_pull_as_asked() -> None:
    rng = np.random.default_rng(SEED)
    counts, pull = rng.uniform(0.2, 5.0, 40), rng.normal(size=(40, 3))
    pull -= counts @ pull / counts.sum()
    target = np.array([6.0, -4.0, 1.0])
    found = tilted(counts, pull, target)
    np.testing.assert_allclose(found @ pull, target, atol=2e-3)
    assert found.min() > 0
    np.testing.assert_allclose(found.sum(), counts.sum())
    np.testing.assert_allclose(tilted(counts, pull, np.zeros(3)), counts)


def test_a_target_out_of_reach_is_not_chased_to_infinity() -> None:
    counts, pull = np.ones(4), np.array([[1.0], [1.0], [-1.0], [-1.0]])
    found = tilted(counts, pull, np.array([400.0]))
    assert np.all(np.isfinite(found))
    np.testing.assert_allclose(found.sum(), 4.0)


def test_rounding_keeps_the_sum_and_the_mean() -> None:
    rng = np.random.default_rng(SEED)
    counts = np.array([0.3, 1.7, 2.25, 0.05, 3.0, 0.7])
    order = np.array([3, 1, 0, 5, 4, 2])
    draws = np.stack([rounded(counts, order, rng) for _ in range(20_000)])
    assert set(draws.sum(axis=1)) == {8}
    assert np.all(np.abs(draws - counts) < 1)
    np.testing.assert_allclose(draws.mean(axis=0), counts, atol=4 * 0.5 / np.sqrt(20_000))


def test_whole_counts_stay() -> None:
    rng = np.random.default_rng(SEED)
    counts = np.array([3.0, 1.0, 7.0])
    for _ in range(50):
        np.testing.assert_array_equal(rounded(counts, np.arange(3), rng), [3, 1, 7])
