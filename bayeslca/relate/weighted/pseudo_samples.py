"""Pseudo-samples: data sets of the same size that undo the weights and vary as the design does.

A pseudo-sample is a table of whole counts of the distinct answers, as many cases in all as there
are. Each is fitted as if it were a simple random sample, and the draws of all are pooled. What
the pooled draws vary by is then

    within   the posterior of one pseudo-sample: what that many cases drawn at random leave open
    between  the pseudo-samples' differences

and the two must add up to the variance under the design. So the pseudo-samples may differ by no
more than the design's variance less that of a simple random sample. Replicates of the design
(clusters drawn anew within strata, weights as given) differ by the whole of it; fitted as they
are, they count the variance of a simple random sample twice, and a further random draw that
undoes the weights (a Polya urn) counts it a third time: intervals come out wider by a factor of
about 1.4 and 1.7 where weights are equal. Pseudo-populations many times the sample's size would
leave only the variance between, which is right, but would take all weight from the priors and
put probabilities of 0 and 1 where few cases speak.

Each replicate is therefore drawn towards the weighted answers, direction by direction, by as much
as the model's own uncertainty covers; the counts that stand for it are the weighted counts,
tilted so that they pull at the parameters as the shrunken replicate does, and rounded at random.
With equal weights, no clusters and no strata all pseudo-samples are the sample, and the pooled
draws its posterior.

References
----------
Dong, Q., Elliott, M. R. & Raghunathan, T. E. (2014). A nonparametric method to generate synthetic
populations to adjust for complex sampling design features. Survey Methodology 40, 29-46.
Gunawan, D., Panagiotelis, A., Griffiths, W. & Chotikapanich, D. (2020). Bayesian weighted
inference from surveys. Australian & New Zealand Journal of Statistics 62, 71-94 (pseudo-samples
of the sample's size, each fitted, draws pooled). Rao, J. N. K. & Wu, C. F. J. (1988), JASA 83,
231-241 (the replicates). Deville, J.-C. & Särndal, C.-E. (1992), JASA 87, 376-382 (tilting).
All from memory; the shrinkage is this package's own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.relate.weighted.design_variance import (
    cluster_totals,
    replicate_factors,
    total_covariance,
)
from bayeslca.relate.weighted.weighted_score import WeightedUnits, group_scores, unit_scores

ROUNDINGS = 200
NEWTON_STEPS = 50
RIDGE = 1e-6
SMALLEST = 1e-9
"""Directions in which the design varies by less than this share of the most are left alone."""


@dataclass(frozen=True, eq=False)
class PseudoSamples:
    """Counts of the distinct answers of several pseudo-samples.

    Attributes
    ----------
    counts : ndarray of int64, shape (pseudo-sample, unit)
        Each row sums to the number of cases.
    expected : ndarray of float64, shape (pseudo-sample, unit)
        Before rounding.
    """

    counts: Ints
    expected: Floats


def draw_pseudo_samples(
    blocks: AllBlocks,
    units: WeightedUnits,
    elements: Floats,
    n: int,
    rng: np.random.Generator,
) -> PseudoSamples:
    """Draw pseudo-samples.

    Parameters
    ----------
    blocks : AllBlocks
    units : WeightedUnits
    elements : ndarray, shape (E,)
        The weighted maximum likelihood solution, where the pull of answers is computed.
    n : int
    rng : numpy.random.Generator
    """
    if units.design.changes_nothing:
        counts = np.tile(units.cases.count, (n, 1))
        return PseudoSamples(counts, counts.astype(np.float64))
    pull = unit_scores(blocks, units, elements)
    n_own = pull.shape[1]
    if blocks.model.n_groups > 1:
        pull = np.concatenate([pull, group_scores(units, blocks.model.n_groups)], axis=1)
    order = _alike_together(pull, units)
    totals = cluster_totals(units.by_row(pull), units.design)
    varies = total_covariance(totals, units.design)
    covered = _rounding_covariance(units.counts, pull, order, rng)
    # The posterior of a pseudo-sample covers the uncertainty of a simple random sample in the
    # model's parameters, but is given the sizes of the groups.
    covered[:n_own, :n_own] += pull[:, :n_own].T @ (units.counts[:, None] * pull[:, :n_own])
    shrink = shrinkage(varies, covered)
    heavy = _heavy_tails(units, n, rng)
    expected = np.empty((n, units.counts.size))
    for i in range(n):
        moved = (replicate_factors(units.design, rng) - 1.0) @ totals
        expected[i] = tilted(units.counts, pull, shrink @ moved * heavy[i])
    counts = np.stack([rounded(one, order, rng) for one in expected])
    return PseudoSamples(counts, expected)


def shrinkage(varies: Floats, covered: Floats) -> Floats:
    """Return the matrix (p, p) that leaves of a variation what is not covered otherwise.

    Parameters
    ----------
    varies : ndarray, shape (p, p)
        Covariance of the design's replicates.
    covered : ndarray, shape (p, p)
        Covariance that need not be added.

    Notes
    -----
    With varies = L L', the matrix is A = L M^(1/2) L^-1, M = L^-1 (varies - covered) L^-T with
    negative eigenvalues set to 0: then A varies A' = varies - covered wherever that is positive.
    """
    values, vectors = np.linalg.eigh(varies)
    there = values > SMALLEST * max(values[-1], SMALLEST)
    root = vectors[:, there] * np.sqrt(values[there])
    inverse = (vectors[:, there] / np.sqrt(values[there])).T
    left, turned = np.linalg.eigh(inverse @ (varies - covered) @ inverse.T)
    kept = np.sqrt(np.clip(left, 0.0, 1.0))
    return np.asarray(root @ (turned * kept) @ turned.T @ inverse)


def tilted(counts: Floats, pull: Floats, target: Floats) -> Floats:
    """Return counts (unit,), tilted exponentially, whose total pull (p,) is the target.

    Parameters
    ----------
    counts : ndarray, shape (unit,)
        Their own total pull is 0.
    pull : ndarray, shape (unit, p)
    target : ndarray, shape (p,)

    Notes
    -----
    Newton's method on the convex function total x log sum counts exp(pull eta) - eta target, with
    a small ridge that keeps a target out of reach from being chased to infinity.
    """
    total = counts.sum()
    eta = np.zeros(pull.shape[1])
    ridge = RIDGE * total * np.eye(eta.size)

    def state(at: Floats) -> tuple[Floats, float]:
        exponent = pull @ at
        highest = exponent.max()
        weight = counts * np.exp(exponent - highest)
        size = weight.sum()
        value = total * (np.log(size) + highest) - at @ target + at @ ridge @ at / 2.0
        return weight * (total / size), float(value)

    weight, value = state(eta)
    for _ in range(NEWTON_STEPS):
        mean = weight @ pull / total
        gap = target - weight @ pull - ridge @ eta
        curvature = (weight[:, None] * pull).T @ pull - total * np.outer(mean, mean) + ridge
        step = np.linalg.solve(curvature, gap)
        if gap @ step < 1e-10 * total:
            break
        size = 1.0
        while size > 1e-4:
            newer, newer_value = state(eta + size * step)
            if newer_value <= value:
                break
            size /= 2.0
        else:
            break
        eta, weight, value = eta + size * step, newer, newer_value
    return weight


def rounded(counts: Floats, order: Ints, rng: np.random.Generator) -> Ints:
    """Round counts (unit,) at random to whole ones with the same sum, each right on average.

    Systematic: along an order of the units, cumulative counts are rounded after one random shift.
    Neighbours in the order then make good each other's rounding.
    """
    edges = np.concatenate([[0.0], np.cumsum(counts[order])])
    edges[-1] = np.round(edges[-1])
    steps = np.floor(edges + rng.random() + 1e-9).astype(np.int64)
    out = np.empty(counts.size, dtype=np.int64)
    out[order] = np.diff(steps)
    return out


def _alike_together(pull: Floats, units: WeightedUnits) -> Ints:
    """Return an order of the units in which neighbours pull alike."""
    weighted = pull * np.sqrt(units.counts)[:, None]
    _, _, axes = np.linalg.svd(weighted, full_matrices=False)
    return np.argsort(pull @ axes[0], kind="stable")


def _rounding_covariance(
    counts: Floats, pull: Floats, order: Ints, rng: np.random.Generator
) -> Floats:
    errors = np.stack([rounded(counts, order, rng) - counts for _ in range(ROUNDINGS)])
    moved = errors @ pull
    return np.asarray(moved.T @ moved / ROUNDINGS)


def _heavy_tails(units: WeightedUnits, n: int, rng: np.random.Generator) -> Floats:
    """Draw factors (n,) that make normal variation Student's: few clusters know it poorly."""
    df = units.design.degrees_of_freedom
    return np.asarray(np.sqrt(df / rng.chisquare(df, size=n)))
