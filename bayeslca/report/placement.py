"""How surely cases are placed, read off the posterior by response pattern."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior


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
    table = posterior.membership(rows="patterns")
    names = list(posterior.model.class_names)
    return Placement(
        highest=table["modal_probability"].to_numpy(dtype=np.float64),
        modal=table["modal_class"].map(names.index).to_numpy(dtype=np.int64),
        count=table["count"].to_numpy(dtype=np.int64),
        n_classes=len(names),
    )
