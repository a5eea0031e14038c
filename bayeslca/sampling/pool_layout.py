"""What the step of pooled units reads: the priors of mean and spread, and room to work in."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.sampling.layout import Layout


class Pool(NamedTuple):
    """What the step reads, and its scratch arrays; of one chain. Made by `pool`.

    Attributes
    ----------
    mean_prior : ndarray of float64, shape (K,)
    spread_prior : ndarray of float64, shape (2,)
    at_least : ndarray of int64, shape (K + 1, most + 1)
        at_least[k, j]: units with more than j cases in class k; in the last row: in all.
    parameter, mean : ndarray of float64, shape (K,)
    start : ndarray of int64, shape (2,)
    first_row : ndarray of float64, shape (1, K)
        Room for the mean's prior as one prevalence row.
    """

    mean_prior: Floats
    spread_prior: Floats
    at_least: Ints
    parameter: Floats
    mean: Floats
    start: Ints
    first_row: Floats


def pool(source: PooledPrevalence, layout: Layout) -> Pool:
    """Return what the step of one chain needs."""
    most = int(np.bincount(layout.prevalence_row, weights=layout.cases).max(initial=0.0))
    return room_for(source, most)


def room_for(source: PooledPrevalence, most: int) -> Pool:
    """Return the priors with room for units of so many cases at the most."""
    k = source.n_classes
    return Pool(
        mean_prior=np.ascontiguousarray(source.mean_prior, dtype=np.float64),
        spread_prior=np.asarray(source.spread_prior, dtype=np.float64),
        at_least=np.zeros((k + 1, most + 1), dtype=np.int64),
        parameter=np.zeros(k),
        mean=np.zeros(k),
        start=np.array([0, k], dtype=np.int64),
        first_row=np.ascontiguousarray(source.mean_prior[None], dtype=np.float64),
    )
