"""Label switching, which is harmless, told apart from chains in different modes, which is not."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import xlogy

from bayeslca._typing import Floats
from bayeslca.model.probabilities import membership

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MOST_NUMBERS = 20_000_000
"""Membership probabilities held at once (160 MB); fewer draws are used when units are many."""
MOST_DRAWS = 250
"""Draws per chain whose memberships are averaged."""
SAME_MEMBERSHIP = 0.005
"""Kullback-Leibler divergence per case below which chains place cases alike."""


@dataclass(frozen=True, slots=True)
class ChainAgreement:
    """How far chains agree once their classes mean the same.

    Attributes
    ----------
    raw_r_hat : float
        Largest R-hat of the prevalences as they were sampled, before relabelling.
    r_hat : float
        The same after relabelling.
    divergence : float
        Largest Kullback-Leibler divergence per case of a chain's mean membership from that of
        all chains (after relabelling). Some .0001 to .001 within one mode; above .005 in
        different ones.
    gap : float
        Highest less lowest mean log likelihood of the chains, in nats.
    """

    raw_r_hat: float
    r_hat: float
    divergence: float
    gap: float


def chain_agreement(posterior: Posterior) -> ChainAgreement:
    """Compare the chains before and after relabelling.

    Parameters
    ----------
    posterior : Posterior
    """
    log_likelihood = posterior.draws.log_likelihood.mean(axis=1)
    return ChainAgreement(
        raw_r_hat=largest_r_hat(_before_relabelling(posterior)),
        r_hat=largest_r_hat(posterior.prevalence_draws),
        divergence=_divergence(posterior),
        gap=float(np.ptp(log_likelihood)),
    )


def largest_r_hat(values: Floats) -> float:
    """Return the largest R-hat of draws (chain, draw, ...); 1 for constants and single chains.

    Infinite where chains stand still at different values.
    """
    from arviz_stats.base import array_stats

    flat = values.reshape(*values.shape[:2], -1)
    moving = np.flatnonzero(np.ptp(flat, axis=(0, 1)) > 0.0)
    if not moving.size or values.shape[0] == 1:
        return 1.0
    with np.errstate(invalid="ignore", divide="ignore"):
        found = np.array(
            [float(array_stats.rhat(np.ascontiguousarray(flat[:, :, q]))) for q in moving]
        )
    return float(np.where(np.isnan(found), np.inf, found).max())


def _before_relabelling(posterior: Posterior) -> Floats:
    """Return the prevalences under the labels they were sampled with."""
    permutations = posterior.relabelled.permutations
    return np.take_along_axis(posterior.prevalence_draws, np.argsort(permutations, axis=-1), -1)


def modes_of_chains(posterior: Posterior) -> tuple[tuple[int, ...], ...]:
    """Return the chains of each mode, told by how they place cases, the best mode first.

    Two chains are in one mode when their mean memberships, after relabelling, diverge from their
    common mean by no more than `SAME_MEMBERSHIP` nats a case, or are linked through such pairs.
    """
    draws, n_chains = posterior.draws, posterior.draws.n_chains
    if n_chains == 1 or posterior.model.n_classes == 1:
        return (tuple(range(n_chains)),)
    mean = _mean_membership(posterior)
    mode = np.arange(n_chains)
    for a in range(n_chains):
        for b in range(a):
            pair = mean[[a, b]]
            if _per_case(pair, pair.mean(axis=0), posterior) <= SAME_MEMBERSHIP:
                mode[mode == mode[a]] = mode[b]
    height = (draws.log_likelihood + draws.log_prior).mean(axis=1)
    ranked = sorted(set(mode.tolist()), key=lambda m: -float(height[mode == m].max()))
    return tuple(tuple(np.flatnonzero(mode == m).tolist()) for m in ranked)


def _divergence(posterior: Posterior) -> float:
    if posterior.draws.n_chains == 1 or posterior.model.n_classes == 1:
        return 0.0
    mean = _mean_membership(posterior)
    return _per_case(mean, mean.mean(axis=0), posterior)


def _mean_membership(posterior: Posterior) -> Floats:
    """Return the mean membership (chain, U, K) of each chain."""
    draws, units, n_classes = posterior.draws, posterior.unit_table, posterior.model.n_classes
    fitting = MOST_NUMBERS // max(1, units.n_units * n_classes)
    step = max(1, draws.n_draws // max(1, min(MOST_DRAWS, fitting)))
    return np.stack(
        [
            membership(
                posterior.table, units, draws.elements[c, ::step], draws.prevalence[c, ::step]
            ).mean(axis=0)
            for c in range(draws.n_chains)
        ]
    )


def _per_case(mean: Floats, pooled: Floats, posterior: Posterior) -> float:
    """Return the largest divergence per case of memberships (n, U, K) from common ones (U, K)."""
    units = posterior.unit_table
    with np.errstate(invalid="ignore", divide="ignore"):
        by_unit = xlogy(mean, mean / pooled).sum(axis=2)
    return float(np.max(np.nan_to_num(by_unit) @ units.count) / units.n_cases)
