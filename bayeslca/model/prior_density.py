"""The normalised log density of the prior, in all and block by block."""

from __future__ import annotations

import numpy as np

from bayeslca._typing import Bools, Floats
from bayeslca.model.blocks import inside_blocks, log_block_densities
from bayeslca.model.bounds_probability import log_bounds_probability
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.table import Table


def log_prior(
    table: Table,
    source: PrevalenceSource,
    elements: Floats,
    prevalence: Floats,
    concentration: Floats | None = None,
) -> Floats:
    """Return the log density of all parameters under the prior.

    Parameters
    ----------
    table : Table
    source : PrevalenceSource
    elements : ndarray, shape (..., E)
    prevalence : ndarray, shape (..., prevalence rows, K)
    concentration : ndarray, shape (..., K), optional
        Of pooled units; see `bayeslca.model.pooled_prevalence`.

    Returns
    -------
    ndarray, shape (...)
        Minus infinity outside the bounds; inside them divided by the bounds' probability.
    """
    if isinstance(source, PooledPrevalence):
        of_prevalence = source.log_density(prevalence, concentration)
    else:
        of_prevalence = source.log_density(prevalence)
    total = log_block_priors(table, elements).sum(axis=-1) + of_prevalence
    if table.is_bounded:
        total = total - log_bounds_probability(table).value
        total = np.where(inside_bounds(table, elements), total, -np.inf)
    return np.asarray(total)


def log_block_priors(table: Table, elements: Floats) -> Floats:
    """Return the log density of each block (..., B) under its Dirichlet prior."""
    return log_block_densities(table, elements)


def inside_bounds(table: Table, elements: Floats) -> Bools:
    """Tell which draws (...) of elements (..., E) keep all bounds and orders."""
    return inside_blocks(table, elements)
