"""Pooled units as a step of a joint model: mean, spread and prevalences given the classes."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.pooled_prevalence import PooledPrevalence, draw_dirichlets
from bayeslca.sampling.pool_layout import Pool, room_for


class PooledStep:
    """Prevalences of pooled units in one chain, as `bayeslca.sampling.steps.SourceStep`.

    Parameters
    ----------
    source : PooledPrevalence
    rng : numpy.random.Generator
        Draws the values to begin with, from the prior.
    """

    def __init__(self, source: PooledPrevalence, rng: np.random.Generator) -> None:
        self.source = source
        value, concentration = source.simulate_many(rng, 1)
        self._value = value[0]
        begin = np.clip(concentration[0], 1e-6, 1e6)
        self._state = np.ascontiguousarray(np.tile(begin, (source.n_rows, 1)))
        self._pool: Pool | None = None

    @property
    def parameters(self) -> Mapping[str, Floats]:
        """Concentration times mean (K,)."""
        return {"concentration": self._state[0]}

    def prevalence(self, out: Floats) -> None:
        """Write the current prevalences (row, K)."""
        out[:] = self._value

    def draw(self, class_count: Ints, prevalence: Floats, rng: np.random.Generator) -> None:
        """Draw mean and spread, then each unit's prevalences, given the cases (row, K)."""
        from bayeslca.sampling.pooled_step import redraw

        if self._pool is None:
            self._pool = room_for(self.source, int(class_count.sum(axis=1).max(initial=0)))
        redraw(self._pool, class_count, self._state, rng)
        self._value = draw_dirichlets(rng, self._state + class_count, 1)[:, 0]
        prevalence[:] = self._value

    def permute(self, permutation: Ints) -> None:
        """Rename classes: class k takes what was that of class ``permutation[k]``."""
        self._value = np.ascontiguousarray(self._value[:, permutation])
        self._state = np.ascontiguousarray(self._state[:, permutation])

    def log_prior(self) -> float:
        """Return the log density of mean, spread and the units' prevalences (as log odds)."""
        return float(self.source.log_density(self._value, self._state[0]))
