"""Classes of all cases, drawn given each kept draw, as counts of answers per class."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.probabilities import PIECE, membership

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior


@dataclass(frozen=True, eq=False)
class Allocated:
    """How many cases of each class gave each answer, in each of S draws of the classes.

    Attributes
    ----------
    answers : ndarray of float64, shape (S, groups, K, A)
    cases : ndarray of float64, shape (S, groups, K)
    chains : int
        The draws are those of so many chains, end to end.
    """

    answers: Floats
    cases: Floats
    chains: int

    def relabelled(self, classes: Sequence[int]) -> Allocated:
        """Return the same draws with classes in another order."""
        order = list(classes)
        return Allocated(self.answers[:, :, order], self.cases[:, :, order], self.chains)


def draw_allocated(posterior: Posterior, seed: int) -> Allocated:
    """Draw the class of every case given each kept draw of the parameters.

    Parameters
    ----------
    posterior : Posterior
    seed : int
    """
    rng = np.random.default_rng(seed)
    table, units, draws = posterior.table, posterior.units, posterior.draws
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    n, n_groups, n_classes = prevalence.shape
    gave = _answers_given(posterior)
    answers = np.zeros((n, n_groups, n_classes, gave.shape[1]))
    cases = np.zeros((n, n_groups, n_classes))
    size = max(1, PIECE // max(1, units.n_units * n_classes))
    for first in range(0, n, size):
        piece = slice(first, first + size)
        share = membership(table, posterior.unit_table, elements[piece], prevalence[piece])
        drawn = rng.multinomial(units.count, share).astype(np.float64)  # (s, U, K)
        for g in range(n_groups):
            mine = drawn[:, units.group == g].transpose(0, 2, 1)
            answers[piece, g] = mine @ gave[units.group == g]
            cases[piece, g] = mine.sum(axis=2)
    return Allocated(answers, cases, draws.n_chains)


def _answers_given(posterior: Posterior) -> Floats:
    """Return which answers (U, A) each unit gave, as 0 and 1."""
    start, pattern = posterior.table.item_start, posterior.units.pattern
    out = np.zeros((posterior.units.n_units, int(start[-1])))
    rows, items = np.nonzero(pattern >= 0)
    out[rows, start[items] + pattern[rows, items]] = 1.0
    return out


def thinned(allocated: Allocated, most: int) -> Allocated:
    """Keep every so many draws of each chain, so that no more than ``most`` are left."""
    n = allocated.cases.shape[0]
    keep = np.arange(n).reshape(allocated.chains, -1)[:, :: max(1, -(-n // most))].reshape(-1)
    return Allocated(allocated.answers[keep], allocated.cases[keep], allocated.chains)
