"""Classes that hold no cases, and classes that cannot be told apart.

Their quantities need not converge: an empty class wanders over its prior, and the labels of twins
are arbitrary. They are reported as such and do not hold the run.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.probabilities import membership
from bayeslca.model.table import Table, UnitTable
from bayeslca.sampling.draws import Draws

FEWEST_CASES = 1.0
"""A class is empty when fewer cases than this are expected in it in most draws."""
ALIKE = 0.9
"""Classes are twins when their memberships are at least so similar (cosine over the cases)."""
MOST_DRAWS = 500


@dataclass(frozen=True, slots=True)
class ClassState:
    """Which classes are empty or not told apart.

    Attributes
    ----------
    empty : tuple of int
        Classes in which most draws expect fewer than one case.
    twins : tuple of tuple of int
        Pairs of classes whose cases are the same ones.
    """

    empty: tuple[int, ...] = ()
    twins: tuple[tuple[int, int], ...] = ()

    @property
    def unsteady(self) -> frozenset[int]:
        """All classes whose quantities need not converge."""
        return frozenset(self.empty) | {k for pair in self.twins for k in pair}


def class_state(table: Table, unit_table: UnitTable, draws: Draws) -> ClassState:
    """Look for empty classes and twins.

    Parameters
    ----------
    table : Table
    unit_table : UnitTable
    draws : Draws
        Relabelled.
    """
    step = max(1, draws.n_chains * draws.n_draws // MOST_DRAWS)
    share = membership(
        table,
        unit_table,
        draws.flat_elements[::step],
        draws.flat_prevalence[::step],
    )
    expected = np.einsum("u,suk->sk", unit_table.count, share)
    empty = np.flatnonzero((expected < FEWEST_CASES).mean(axis=0) > 0.5)
    return ClassState(tuple(empty.tolist()), _twins(share.mean(axis=0), unit_table, set(empty)))


def _twins(mean: Floats, unit_table: UnitTable, empty: set[int]) -> tuple[tuple[int, int], ...]:
    scaled = mean * np.sqrt(unit_table.count)[:, None]
    scaled = scaled / np.linalg.norm(scaled, axis=0)
    alike = scaled.T @ scaled >= ALIKE
    n_classes = mean.shape[1]
    return tuple(
        (one, two)
        for one in range(n_classes)
        for two in range(one + 1, n_classes)
        if alike[one, two] and not {one, two} & empty
    )
