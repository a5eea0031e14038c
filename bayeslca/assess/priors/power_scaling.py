"""Power scaling: how much a posterior changes when prior or likelihood is raised to a power.

The figures are ArviZ's own (``arviz_stats.psense``): the cumulative Jensen-Shannon distance
between the posterior and the one under prior^0.99 and prior^1.01 (likelihood likewise), per
doubling of the power. The likelihood is that of the cases, class summed out, each pattern counted
as often as it was seen. Raising a flat prior to a power changes nothing, so that its part in a
result is not seen here: such quantities are marked, and other priors are tried instead. Of pooled
units the prior is that of their mean and spread, the top level only.

References
----------
Kallioinen, N., Paananen, T., Bürkner, P.-C. & Vehtari, A. (2024). Detecting and diagnosing prior
and likelihood sensitivity with power-scaling. Statistics and Computing 34, 57.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.priors.followed import Followed
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prior_density import log_block_priors

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

SENSITIVE = 0.05
"""A larger figure is a sign of sensitivity (Kallioinen et al. 2024, section 3.3; from memory)."""
ALPHAS = (0.99, 1.01)
RELIABLE_K = 0.7
"""Weights with a larger Pareto k are not reliable (Vehtari, Simpson, Gelman, Yao & Gabry 2024)."""
FLAT_CHANGE = 1e-10


@dataclass(frozen=True, eq=False)
class PowerScaling:
    """The sensitivity of each quantity.

    Attributes
    ----------
    prior, likelihood : ndarray, shape (quantity,)
        nan for constants; ``prior`` is nan where every prior is flat.
    prior_k, likelihood_k : float
        Largest Pareto k of the two sets of weights; nan where every prior is flat.
    """

    prior: Floats
    likelihood: Floats
    prior_k: float
    likelihood_k: float


def power_scaling(posterior: Posterior, quantities: Sequence[Followed]) -> PowerScaling:
    """Return the prior and likelihood sensitivity of quantities.

    Parameters
    ----------
    posterior : Posterior
    quantities : sequence of Followed
        At the posterior's draws.
    """
    prior, likelihood = log_prior(posterior), posterior.draws.log_likelihood
    is_flat = np.ptp(prior) < FLAT_CHANGE * max(1.0, float(np.abs(prior).max()))
    none = np.full(len(quantities), np.nan)
    return PowerScaling(
        none if is_flat else _sensitivity(posterior, quantities, "prior", prior),
        _sensitivity(posterior, quantities, "likelihood", likelihood),
        math.nan if is_flat else _pareto_k(prior),
        _pareto_k(likelihood),
    )


def log_prior(posterior: Posterior) -> Floats:
    """Return the log prior (chain, draw) that is scaled, up to a constant."""
    draws, source = posterior.draws, posterior.model.prevalence_source
    blocks = log_block_priors(posterior.table, draws.elements).sum(axis=-1)
    if isinstance(source, PooledPrevalence):
        assert draws.concentration is not None  # draws of pooled units have it
        of_mean, of_spread = source.log_top(draws.concentration)
        return np.asarray(blocks + of_mean + of_spread)
    return np.asarray(blocks + source.log_density(draws.prevalence))


def _sensitivity(
    posterior: Posterior, quantities: Sequence[Followed], group: str, log_density: Floats
) -> Floats:
    """Return ArviZ's figure for each quantity; nan for one that does not vary."""
    import arviz_stats as azs
    from xarray import Dataset, DataTree

    out = np.full(len(quantities), np.nan)
    moving = [
        at
        for at, one in enumerate(quantities)
        if np.all(np.isfinite(one.values)) and np.ptp(one.values) > 0.0
    ]
    if not moving:
        return out
    shape = (posterior.draws.n_chains, posterior.draws.n_draws)
    coords: dict[str, Any] = {"chain": np.arange(shape[0]), "draw": np.arange(shape[1])}
    values = np.stack([quantities[at].values.reshape(shape) for at in moving], axis=-1)
    dims = ("chain", "draw")
    tree = DataTree.from_dict(
        {
            "/posterior": Dataset({"value": ((*dims, "quantity"), values)}, coords=coords),
            f"/log_{group}": Dataset({"all": (dims, log_density)}, coords=coords),
        }
    )
    out[moving] = azs.psense(tree, group=group, alphas=ALPHAS)["value"].values
    return out


def _pareto_k(log_density: Floats) -> float:
    return max(smoothed_weights((alpha - 1.0) * log_density)[1] for alpha in ALPHAS)


def smoothed_weights(log_ratio: Floats) -> tuple[Floats, float]:
    """Return weights that sum to 1, Pareto smoothed, and their Pareto k.

    Parameters
    ----------
    log_ratio : ndarray
        Log of wanted over drawn density, up to a constant.
    """
    from arviz_stats.base import array_stats

    # ArviZ expects what leave-one-out has, the log of one over the ratio
    log_weight, k = array_stats.psislw(-np.ravel(log_ratio))
    weight = np.exp(log_weight - np.max(log_weight))
    return np.asarray(weight / weight.sum()).reshape(np.shape(log_ratio)), float(k)
