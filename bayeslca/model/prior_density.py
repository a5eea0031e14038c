"""The normalised log density of the prior, in all and block by block."""

from __future__ import annotations

import numpy as np
from scipy.special import gammaln, xlogy

from bayeslca._typing import Bools, Floats
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.table import Table


def log_prior(
    table: Table, source: PrevalenceSource, elements: Floats, prevalence: Floats
) -> Floats:
    """Return the log density of all parameters under the prior.

    Parameters
    ----------
    table : Table
    source : PrevalenceSource
    elements : ndarray, shape (..., E)
    prevalence : ndarray, shape (..., prevalence rows, K)

    Returns
    -------
    ndarray, shape (...)
        Minus infinity outside the bounds; inside them not divided by the bounds' probability.
    """
    total = log_block_priors(table, elements).sum(axis=-1) + source.log_density(prevalence)
    if table.is_bounded:
        total = np.where(inside_bounds(table, elements), total, -np.inf)
    return np.asarray(total)


def log_block_priors(table: Table, elements: Floats) -> Floats:
    """Return the log density of each block (..., B) under its Dirichlet prior."""
    if not table.n_blocks:
        return np.zeros((*elements.shape[:-1], 0))
    a, starts = table.element_prior, table.block_start[:-1]
    norm = gammaln(np.add.reduceat(a, starts)) - np.add.reduceat(gammaln(a), starts)
    return np.asarray(norm + np.add.reduceat(xlogy(a - 1.0, elements), starts, axis=-1))


def inside_bounds(table: Table, elements: Floats) -> Bools:
    """Tell which draws (...) of elements (..., E) keep all bounds and orders."""
    kept = (elements >= table.element_lower) & (elements <= table.element_upper)
    ordered = elements[..., table.order_above] > elements[..., table.order_below]
    return np.asarray(kept.all(axis=-1) & ordered.all(axis=-1))
