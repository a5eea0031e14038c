"""How well a model predicts: WAIC and leave-one-out, of cases, with the class summed out.

Both rest on log p(a case's answers | parameters) at the posterior's draws (Merkle, Furr &
Rabe-Hesketh 2019, Psychometrika 84, 802-829: never given the class). Cases with the same answers
share it, so everything is computed once per unit and weighted by its number of cases.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal, Protocol

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.exceptions import SamplingError

HIGH_K = 0.7
"""Pareto k above which a leave-one-out figure is not reliable (Vehtari et al. 2024)."""
FEW_DRAWS = 100.0
"""Weights that leave fewer effective draws than this are poor (common practice, no source)."""


@dataclass(frozen=True, eq=False)
class PointwiseElpd:
    """Expected log predictive density of new cases' answers, and its parts.

    Attributes
    ----------
    kind : {"waic", "loo"}
    elpd : float
        Sum over all cases; higher is better. The deviance scale is -2 times this.
    se : float
        Standard error over cases: sqrt(N x count-weighted variance of ``pointwise``, ddof 1).
    p : float
        Effective number of parameters.
    mcse : float
        Monte Carlo standard error of ``elpd``: how far another run of chains would move it.
    pointwise : ndarray of float64, shape (U,)
        Of one case of each unit.
    p_pointwise : ndarray of float64, shape (U,)
    counts : ndarray of int64, shape (U,)
        Cases of each unit.
    pareto_k : ndarray of float64, shape (U,), or None
        Tail shape of each unit's importance ratios; None for WAIC.
    high_k : float
        Above it a ``pareto_k`` is too high: 0.7, less with few draws.
    weight_ess : ndarray of float64, shape (U,), or None
        Effective number of draws behind each unit's weighted mean; None for WAIC.
    influence : ndarray of float64, shape (chain, draw), or None
        What each draw adds to ``elpd`` to first order: what ``mcse`` is the error of.
    refitted, settled : ndarray of bool, shape (U,), or None
        Units whose figure comes from a refit without one of their cases, and those of them whose
        refit was precise enough; None where nothing was refitted.
    n_refitted : int
        Number of refits: of distinct answers, as the model sees them.
    """

    kind: Literal["waic", "loo"]
    elpd: float
    se: float
    p: float
    mcse: float
    pointwise: Floats
    p_pointwise: Floats
    counts: Ints
    pareto_k: Floats | None = None
    high_k: float = HIGH_K
    weight_ess: Floats | None = None
    influence: Floats | None = None
    refitted: Bools | None = None
    settled: Bools | None = None
    n_refitted: int = 0

    @property
    def n_cases(self) -> int:
        """Number of cases."""
        return int(self.counts.sum())

    @property
    def unreliable(self) -> Bools:
        """Which units' figures are not reliable (U,): poor weights, and no good refit."""
        if self.refitted is None or self.settled is None:
            return self.poorly_weighted
        return np.asarray(np.where(self.refitted, ~self.settled, self.poorly_weighted))

    @property
    def poorly_weighted(self) -> Bools:
        """Which units' importance weights are poor (U,): Pareto k too high, or few draws count."""
        if self.pareto_k is None:
            return np.zeros(self.counts.size, dtype=np.bool_)
        poor = np.asarray(self.pareto_k > self.high_k)
        return poor if self.weight_ess is None else poor | (self.weight_ess < FEW_DRAWS)

    @property
    def n_unreliable(self) -> int:
        """Number of cases whose figure is not reliable."""
        return int(self.counts[self.unreliable].sum())


def waic(log_likelihood: Floats, counts: Ints) -> PointwiseElpd:
    """Compute the widely applicable information criterion.

    Parameters
    ----------
    log_likelihood : ndarray, shape (chain, draw, U) or (S, U)
        log p(answers of one case of the unit | parameters), class summed out.
    counts : ndarray of int, shape (U,)

    Notes
    -----
    elpd = log mean p - variance of log p (ddof 1), the second form of the penalty in Gelman,
    Hwang & Vehtari (2014), Statistics and Computing 24, 997-1016. The Monte Carlo error is that
    of the mean of the estimate's linearisation over draws (delta method), all units together,
    because they share the draws.
    """
    draws = _checked(log_likelihood, counts)
    n_chains, n_draws, _ = draws.shape
    size = n_chains * n_draws
    mean = draws.mean(axis=(0, 1))
    lppd = logsumexp(draws, axis=(0, 1)) - math.log(size)
    p = np.var(draws, axis=(0, 1), ddof=1)
    influence = (np.exp(draws - lppd) - (draws - mean) ** 2) @ counts.astype(np.float64)
    return _summed("waic", lppd - p, p, counts, influence, None, HIGH_K)


def psis_loo(
    log_likelihood: Floats, counts: Ints, *, relative_efficiency: float = 1.0
) -> PointwiseElpd:
    """Leave out one case at a time, by Pareto-smoothed importance sampling.

    Parameters
    ----------
    log_likelihood : ndarray, shape (chain, draw, U) or (S, U)
        log p(answers of one case of the unit | parameters), class summed out.
    counts : ndarray of int, shape (U,)
    relative_efficiency : float
        Effective sample size over number of draws; it sets the length of the tail that is
        smoothed. See `relative_efficiency`.

    Notes
    -----
    Vehtari, Gelman & Gabry (2017), Statistics and Computing 27, 1413-1432; smoothing as in
    Vehtari, Simpson, Gelman, Yao & Gabry (2024), JMLR 25(72). One of a unit's cases is left out
    and the others stay, so that all cases of a unit share one value. The Monte Carlo error is
    that of the mean of the estimate's linearisation over draws (delta method for ratios of
    means), all units together; it is too small where a Pareto k is high.
    """
    draws = _checked(log_likelihood, counts)
    n_chains, n_draws, n_units = draws.shape
    size = n_chains * n_draws
    pointwise, pareto_k, ess = np.empty(n_units), np.empty(n_units), np.empty(n_units)
    influence = np.zeros(size)
    for u in range(n_units):
        log_p = np.ascontiguousarray(draws[:, :, u]).ravel()
        log_weight, pareto_k[u] = smoothed_weights(log_p, relative_efficiency)
        pointwise[u] = logsumexp(log_weight + log_p)
        influence += counts[u] * _influence(log_weight, log_p, pointwise[u])
        ess[u] = relative_efficiency * math.exp(-logsumexp(2.0 * log_weight))
    lppd = logsumexp(draws, axis=(0, 1)) - math.log(size)
    high_k = min(1.0 - 1.0 / math.log10(size), HIGH_K)
    by_chain = influence.reshape(n_chains, n_draws)
    found = _summed("loo", pointwise, lppd - pointwise, counts, by_chain, pareto_k, high_k)
    return replace(found, weight_ess=ess)


class Refitted(Protocol):
    """What is used of a refit without one case: see `bayeslca.assess.left_out.refits.Refit`."""

    @property
    def log_density(self) -> Floats:
        """Log predictive density of the case, (1,)."""
        ...

    @property
    def mcse(self) -> Floats:
        """Its Monte Carlo standard error from the refit's own draws, (1,)."""
        ...

    @property
    def given(self) -> Floats | None:
        """What each draw of the posterior of all cases adds to it, (chain, draw)."""
        ...

    @property
    def settled(self) -> bool:
        """Whether it is precise enough."""
        ...


def with_refits(
    loo: PointwiseElpd,
    log_likelihood: Floats,
    which: Ints,
    refits: Sequence[Refitted],
    *,
    relative_efficiency: float = 1.0,
) -> PointwiseElpd:
    """Put the figures of refits in the place of those of importance sampling.

    Parameters
    ----------
    loo : PointwiseElpd
        By importance sampling, from ``log_likelihood``.
    log_likelihood : ndarray, shape (chain, draw, U) or (S, U)
        log p(answers of one case of the unit | parameters), class summed out.
    which : ndarray of int, shape (n,)
        The refitted units.
    refits : sequence of Refitted
        One for each of them.
    relative_efficiency : float
        As it was given to `psis_loo`.

    Notes
    -----
    All units share the draws of the posterior of all cases, so what these add is summed before
    its error is taken; the draws of each refit are its own, and their errors add up as squares.
    """
    draws = _checked(log_likelihood, loo.counts)
    assert loo.influence is not None
    influence, pointwise = loo.influence.copy(), loo.pointwise.copy()
    is_refitted = np.zeros(loo.counts.size, dtype=np.bool_)
    is_settled = np.zeros(loo.counts.size, dtype=np.bool_)
    for u, one in zip(which.tolist(), refits, strict=True):
        log_p = np.ascontiguousarray(draws[:, :, u]).ravel()
        log_weight, _ = smoothed_weights(log_p, relative_efficiency)
        gone = _influence(log_weight, log_p, loo.pointwise[u]).reshape(influence.shape)
        added = 0.0 if one.given is None else one.given
        influence += loo.counts[u] * (added - gone)
        pointwise[u], is_refitted[u], is_settled[u] = one.log_density[0], True, one.settled
    p = loo.p_pointwise + loo.pointwise - pointwise
    found = _summed("loo", pointwise, p, loo.counts, influence, loo.pareto_k, loo.high_k)
    own = [loo.counts[u] * one.mcse[0] for u, one in zip(which, refits, strict=True)]
    return replace(
        found,
        mcse=math.hypot(found.mcse, *own),
        weight_ess=loo.weight_ess,
        refitted=is_refitted,
        settled=is_settled,
        n_refitted=int(which.size),
    )


def _influence(log_weight: Floats, log_p: Floats, log_mean: float) -> Floats:
    """Return what each draw adds to a log weighted mean, to first order (S,)."""
    weight = log_p.size * np.exp(log_weight)
    return np.asarray(weight * (np.exp(log_p - log_mean) - 1.0))


def relative_efficiency(*quantities: Floats) -> float:
    """Return the mean effective sample size of all quantities over the number of draws.

    The same mean as ArviZ's ``loo`` takes over the variables of a posterior group; 1 for a
    single chain, as there.

    Parameters
    ----------
    *quantities : ndarray, shape (chain, draw, ...)
    """
    from arviz_stats.base import array_stats

    n_chains, n_draws = quantities[0].shape[:2]
    if n_chains == 1:
        return 1.0
    with np.errstate(invalid="ignore", divide="ignore"):
        sizes = [
            np.ravel(array_stats.ess(values, chain_axis=0, draw_axis=1, method="mean"))
            for values in quantities
        ]
    together = np.concatenate(sizes)
    return float(np.nanmean(together) / (n_chains * n_draws))  # nan: no two draws differ


def difference(one: PointwiseElpd, other: PointwiseElpd) -> tuple[float, float]:
    """Return how much better ``one`` predicts than ``other``, and the standard error of that.

    Parameters
    ----------
    one, other : PointwiseElpd
        Of the same units.
    """
    by_unit = one.pointwise - other.pointwise
    return float(np.dot(one.counts, by_unit)), standard_error(by_unit, one.counts)


def standard_error(pointwise: Floats, counts: Ints) -> float:
    """Return sqrt(N x count-weighted variance, ddof 1) of a sum over cases.

    Parameters
    ----------
    pointwise : ndarray, shape (U,)
    counts : ndarray of int, shape (U,)
    """
    n_cases = int(counts.sum())
    if n_cases < 2:
        return math.nan
    mean = float(np.dot(counts, pointwise)) / n_cases
    squares = float(np.dot(counts, (pointwise - mean) ** 2))
    return math.sqrt(n_cases * squares / (n_cases - 1))


def _summed(
    kind: Literal["waic", "loo"],
    pointwise: Floats,
    p: Floats,
    counts: Ints,
    influence: Floats,
    pareto_k: Floats | None,
    high_k: float,
) -> PointwiseElpd:
    return PointwiseElpd(
        kind=kind,
        elpd=float(np.dot(counts, pointwise)),
        se=standard_error(pointwise, counts),
        p=float(np.dot(counts, p)),
        mcse=mcse_of_mean(influence),
        pointwise=pointwise,
        p_pointwise=p,
        counts=counts,
        pareto_k=pareto_k,
        high_k=high_k,
        influence=influence,
    )


def mcse_of_mean(values: Floats) -> float:
    """Return the Monte Carlo standard error of the mean of draws (chain, draw)."""
    from arviz_stats.base import array_stats

    if not np.ptp(values) > 1e-12 * max(1.0, float(np.abs(values).max())):
        return 0.0
    return float(array_stats.mcse(values, method="mean"))


def smoothed_weights(log_p: Floats, efficiency: float) -> tuple[Floats, float]:
    """Return normalised log weights for leaving out a case, and their Pareto k.

    Ratios that have no tail, because the largest are all equal, need no smoothing; their k is 0.
    """
    from arviz_stats.base import array_stats

    if np.ptp(log_p) > 0.0 and log_p.size >= 25:  # a fifth of fewer draws is no tail
        try:
            log_weight, k = array_stats.psislw(log_p, r_eff=efficiency)
        except ValueError:  # all ratios in the tail are the same
            pass
        else:
            return np.asarray(log_weight), float(k)
    return np.asarray(-log_p - logsumexp(-log_p)), 0.0


def _checked(log_likelihood: Floats, counts: Ints) -> Floats:
    draws = np.asarray(log_likelihood, dtype=np.float64)
    draws = draws[None] if draws.ndim == 2 else draws
    if draws.ndim != 3 or draws.shape[2] != counts.size or draws.shape[0] * draws.shape[1] < 2:
        msg = (
            f"log_likelihood has shape {np.shape(log_likelihood)} and there are {counts.size} "
            "counts: it takes (chain, draw, unit) or (draw, unit), with one count per unit and "
            "at least 2 draws."
        )
        raise SamplingError(msg)
    if not np.isfinite(draws).all():
        n = int((~np.isfinite(draws)).any(axis=(0, 1)).sum())
        msg = (
            f"{n} units have probability 0 (or none) at some draws, so that how well they are "
            "predicted cannot be computed. Check the probabilities that are fixed at 0 or 1."
        )
        raise SamplingError(msg)
    return draws
