"""Variance of weighted totals under a stratified cluster sample, and replicates of it.

The first stage is taken as drawn with replacement: without a finite population correction the
variance is, if anything, too large.

References
----------
Lohr, S. L. (2010). Sampling: Design and Analysis, 2nd ed., Brooks/Cole, section 9.3 (between
clusters within strata, with replacement). Rao, J. N. K. & Wu, C. F. J. (1988). Resampling
inference with complex survey data. Journal of the American Statistical Association 83, 231-241;
Rao, Wu & Yue (1992), Survey Methodology 18, 209-217. Formulas from memory.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints

if TYPE_CHECKING:
    from bayeslca.responses.sample_design import SampleDesign


def cluster_totals(values: Floats, design: SampleDesign) -> Floats:
    """Add up weighted values (row, ...) of the rows of each cluster, shape (cluster, ...)."""
    out = np.zeros((design.n_clusters, *values.shape[1:]))
    np.add.at(out, design.cluster, values)
    return out


def total_covariance(totals: Floats, design: SampleDesign) -> Floats:
    """Return the covariance (p, p) of the sum of cluster totals (cluster, p).

    Sum over strata of n/(n - 1) times the sum of squared deviations of cluster totals from their
    stratum's mean, n the clusters of the stratum.
    """
    stratum, held = design.stratum_of_cluster, design.clusters_in_stratum
    means = np.zeros((design.n_strata, totals.shape[1]))
    np.add.at(means, stratum, totals)
    apart = totals - (means / held[:, None])[stratum]
    factor = held / np.maximum(held - 1, 1)
    return np.asarray((factor[stratum, None] * apart).T @ apart)


def replicate_factors(design: SampleDesign, rng: np.random.Generator) -> Floats:
    """Draw one replicate's factor of each cluster's weight, shape (cluster,).

    Of the n clusters of a stratum, n - 1 are drawn with replacement; the weight of a cluster that
    was drawn t times is multiplied by t n/(n - 1) (Rao & Wu 1988). Over replicates a total has
    its value as its mean, and the covariance that `total_covariance` gives.
    """
    factors = np.empty(design.n_clusters)
    for clusters in _by_stratum(design):
        n = clusters.size
        times = np.bincount(rng.integers(n, size=n - 1), minlength=n)
        factors[clusters] = times * n / (n - 1)
    return factors


def _by_stratum(design: SampleDesign) -> list[Ints]:
    order = np.argsort(design.stratum_of_cluster, kind="stable")
    return np.split(order, np.cumsum(design.clusters_in_stratum)[:-1])
