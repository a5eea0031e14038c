"""How surely cases are placed, read off the posterior by response pattern."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.probabilities import membership

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MOST_DRAWS = 1000
"""Draws used for the average membership; more would not show in a figure."""


@dataclass(frozen=True, eq=False)
class Placement:
    """The most probable class of each unit (distinct answers in a group).

    Attributes
    ----------
    highest : ndarray of float64, shape (unit,)
        Probability of the most probable class.
    modal : ndarray of int64, shape (unit,)
        Index of that class.
    count : ndarray of int64, shape (unit,)
        Number of cases.
    n_classes : int
    """

    highest: Floats
    modal: Ints
    count: Ints
    n_classes: int

    @property
    def n_cases(self) -> int:
        """Number of cases that were placed."""
        return int(self.count.sum())

    @property
    def mean_highest(self) -> float:
        """Probability of the most probable class, averaged over the cases."""
        return float(np.average(self.highest, weights=self.count))

    def placed_in(self) -> Ints:
        """Return the number of cases by most probable class, shape (K,)."""
        placed = np.bincount(self.modal, weights=self.count, minlength=self.n_classes)
        return np.asarray(placed, dtype=np.int64)

    def n_at_least(self, probability: float) -> int:
        """Return the number of cases whose most probable class has at least a probability."""
        return int(self.count[self.highest >= probability].sum())


def placement(posterior: Posterior) -> Placement:
    """Return how surely each unit is placed: the posterior mean of its membership."""
    draws = posterior.draws
    flat = draws.elements.reshape(-1, draws.elements.shape[-1])
    prevalence = draws.prevalence.reshape(-1, *draws.prevalence.shape[2:])
    step = max(1, flat.shape[0] // MOST_DRAWS)
    mean = membership(posterior.table, posterior.unit_table, flat[::step], prevalence[::step]).mean(
        axis=0
    )
    return Placement(
        highest=mean.max(axis=1),
        modal=mean.argmax(axis=1),
        count=np.asarray(posterior.unit_table.count),
        n_classes=posterior.model.n_classes,
    )
