"""Variance under a design against statsmodels, a textbook formula by hand, and its replicates."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
import statsmodels.api as sm

from bayeslca.relate.weighted.design_variance import (
    cluster_totals,
    replicate_factors,
    total_covariance,
)
from bayeslca.responses.sample_design import SampleDesign

SEED = 41


def design_of(weight: np.ndarray, cluster: list[int], stratum: list[int]) -> SampleDesign:
    levels = tuple(map(str, range(max(stratum) + 1)))
    return SampleDesign(weight, np.array(cluster), np.array(stratum), stratum_levels=levels)


def mean_variance(y: np.ndarray, design: SampleDesign) -> float:
    """Return the linearised variance of a weighted mean."""
    w = design.weight / design.weight.sum()
    totals = cluster_totals((w * (y - w @ y))[:, None], design)
    return float(total_covariance(totals, design)[0, 0])


def test_a_stratified_cluster_sample_by_hand() -> None:
    # Linearised variance of a ratio, clusters with replacement: Lohr (2010), section 9.3, from
    # memory. Two strata of 2 and 3 clusters, weights 2 and 1:
    #   mean = (2 x 2 + 3) / (2 x 4 + 6) = 1/2; residuals y - 1/2 are +-1/2
    #   stratum 0: cluster totals 2 (1/2 + 1/2), 2 (-1/2 - 1/2) = 2, -2: 2/1 (4 + 4) = 16
    #   stratum 1: totals 1, 0, -1, mean 0: 3/2 (1 + 0 + 1) = 3
    #   variance = (16 + 3) / 14^2
    y = np.array([1, 1, 0, 0, 1, 1, 1, 0, 0, 0], dtype=float)
    weight = np.array([2, 2, 2, 2, 1, 1, 1, 1, 1, 1], dtype=float)
    design = design_of(weight, [0, 0, 1, 1, 2, 2, 3, 3, 4, 4], [0] * 4 + [1] * 6)
    assert mean_variance(y, design) == pytest.approx(19 / 196, rel=1e-12)


def test_weights_alone_are_statsmodels_robust_errors() -> None:
    rng = np.random.default_rng(SEED)
    y, weight = rng.random(30), rng.uniform(1, 5, 30)
    design = design_of(weight, list(range(30)), [0] * 30)
    # HC1 has the factor n/(n - 1) of one stratum.
    outside = sm.WLS(y, np.ones(30), weights=weight).fit(cov_type="HC1")
    assert mean_variance(y, design) == pytest.approx(outside.bse[0] ** 2, rel=1e-10)


def test_clusters_are_statsmodels_cluster_errors() -> None:
    rng = np.random.default_rng(SEED + 1)
    cluster = np.repeat(np.arange(10), 4)
    y = rng.random(40) + rng.random(10)[cluster]
    weight = rng.uniform(1, 5, 40)
    design = design_of(weight, cluster.tolist(), [0] * 40)
    told = {"groups": cluster}
    outside = sm.WLS(y, np.ones(40), weights=weight).fit(cov_type="cluster", cov_kwds=told)
    assert mean_variance(y, design) == pytest.approx(outside.bse[0] ** 2, rel=1e-10)


def test_replicates_have_the_design_s_covariance() -> None:
    design = design_of(np.ones(7), [0, 1, 2, 3, 4, 5, 6], [0, 0, 0, 0, 1, 1, 1])
    rng = np.random.default_rng(SEED + 2)
    totals = rng.normal(size=(7, 2))
    n = 20_000
    moved = np.stack([(replicate_factors(design, rng) - 1) @ totals for _ in range(n)])
    exact = total_covariance(totals, design)
    np.testing.assert_allclose(moved.mean(axis=0), 0.0, atol=4 * np.sqrt(exact.max() / n))
    for i, j in product(range(2), range(2)):
        spread = (moved[:, i] * moved[:, j]).std() / np.sqrt(n)
        assert abs((moved[:, i] * moved[:, j]).mean() - exact[i, j]) < 4 * spread
