"""Pairs of items: their joint answers laid end to end, and how far they miss what is expected.

A pair of items whose answers have an order (two answers, or declared as ordered) is judged by
how much the two go together: the sum over joint answers of (a - E a)(b - E b) x (observed -
expected), in standard errors under the model. For two yes/no items every joint answer's count
differs from its expectation by just that, where the items' own shares are met. Any other pair
is judged by how far all its joint answers together go otherwise than expected, which has no
direction. Neither is moved much by items whose own shares are missed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import combinations

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.model.joint_answers import joints
from bayeslca.model.pair_measures import answer_scores, concordance, direction, has_order
from bayeslca.model.table import Table
from bayeslca.responses.item import Item

NO_SPREAD = 1e-12
"""A variance below this is of something that cannot vary."""


@dataclass(frozen=True, eq=False)
class ItemPairs:
    """All pairs of some items.

    Attributes
    ----------
    items : tuple of Item
    """

    items: tuple[Item, ...]

    @cached_property
    def pairs(self) -> tuple[tuple[int, int], ...]:
        """The pairs, in the items' order."""
        return tuple(combinations(range(len(self.items)), 2))

    @cached_property
    def start(self) -> Ints:
        """Joint answers of pair p are start[p]:start[p + 1], the second item's fastest."""
        sizes = [self.items[i].n_categories * self.items[j].n_categories for i, j in self.pairs]
        return np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)

    @cached_property
    def cell_pair(self) -> Ints:
        """The pair of each joint answer."""
        return np.repeat(np.arange(len(self.pairs)), np.diff(self.start))

    @cached_property
    def answers(self) -> Ints:
        """The two items' categories of each joint answer, shape (joint answers, 2)."""
        sizes = [(self.items[i].n_categories, self.items[j].n_categories) for i, j in self.pairs]
        return np.concatenate([np.argwhere(np.ones(size)) for size in sizes])

    @cached_property
    def columns(self) -> Ints:
        """The two response columns of each joint answer, shape (joint answers, 2)."""
        starts = np.concatenate([[0], np.cumsum([item.n_categories for item in self.items])])
        of_pair = starts[np.array(self.pairs)]
        return np.asarray(of_pair[self.cell_pair] + self.answers)

    @cached_property
    def values(self) -> Floats:
        """What the two answers of each joint answer count for, shape (joint answers, 2)."""
        return answer_scores(self.items)[self.columns].astype(np.float64)

    @cached_property
    def is_scored(self) -> Bools:
        """Tell which pairs have answers in an order."""
        scored = [has_order(item) for item in self.items]
        return np.array([scored[i] and scored[j] for i, j in self.pairs])

    @property
    def n_cells(self) -> int:
        """Number of joint answers of all pairs."""
        return int(self.start[-1])

    def summed(self, values: Floats) -> Floats:
        """Sum values (..., joint answers) over each pair's joint answers."""
        return np.asarray(np.add.reduceat(values, self.start[:-1], axis=-1))

    def probability(
        self, table: Table, rows: Floats, prevalence: Floats, response_group: Sequence[int]
    ) -> Floats:
        """Return the probability of each joint answer in each group.

        Parameters
        ----------
        table : Table
        rows : ndarray, shape (D, R, K)
            p(row | class).
        prevalence : ndarray, shape (D, groups, K)
        response_group : sequence of int
            The response group of each group.

        Returns
        -------
        ndarray, shape (D, groups, joint answers)
        """
        out = np.zeros((*prevalence.shape[:2], self.n_cells))
        joint = self._joint_rows(table)
        for g, at in enumerate(response_group):
            first, second = table.response_row[at][self.columns.T]
            for k in range(table.n_classes):
                cells = rows[:, first, k] * rows[:, second, k]
                together = joint[at] >= 0
                if together.any():
                    cells[:, together] = rows[:, joint[at][together], k]
                out[:, g] += prevalence[:, g, k, None] * cells
        return out

    def _joint_rows(self, table: Table) -> Ints:
        """Row of joint answers of pairs of a set that is answered together, -1 elsewhere."""
        out = np.full((table.n_response_groups, self.n_cells), -1, dtype=np.int64)
        for joint in joints(table):
            if len(joint.items) != 2:
                continue
            first, second = joint.items
            rows = table.joint_row[:, joint.columns]
            low, high = min(first, second), max(first, second)
            if first > second:
                rows = rows.reshape(len(rows), *joint.sizes).swapaxes(1, 2).reshape(len(rows), -1)
            at = self.pairs.index((low, high))
            out[:, self.start[at] : self.start[at + 1]] = rows
        return out

    def weights(self, probability: Floats) -> Floats:
        """Return (a - E a)(b - E b) of each joint answer, of probabilities (..., joint answers)."""
        a, b = self.values.T
        mean_a = self.summed(probability * a)[..., self.cell_pair]
        mean_b = self.summed(probability * b)[..., self.cell_pair]
        return np.asarray((a - mean_a) * (b - mean_b))

    def residuals(self, counts: Floats, probability: Floats, n_both: Floats) -> Floats:
        """Return how far each pair misses what is expected; last group: all groups together.

        Parameters
        ----------
        counts : ndarray, shape (..., groups, joint answers)
        probability : ndarray, shape (..., groups, joint answers)
        n_both : ndarray, shape (groups, pairs)
            Cases that answered both items.

        Returns
        -------
        ndarray, shape (..., groups + 1, pairs)
        """
        gap = counts - n_both[:, self.cell_pair] * probability
        weights = self.weights(probability)
        moved = self.summed(weights * gap)
        spread = n_both * (
            self.summed(weights**2 * probability) - self.summed(weights * probability) ** 2
        )
        signed = _in_errors(with_sum(moved), with_sum(spread))
        if self.is_scored.all():
            return signed
        unsigned = np.zeros_like(signed)
        for pair in np.flatnonzero(~self.is_scored).tolist():
            unsigned[..., pair] = self._unsigned(pair, gap, probability, n_both[:, pair])
        return np.where(self.is_scored, signed, unsigned)

    def _unsigned(self, pair: int, gap: Floats, probability: Floats, n: Floats) -> Floats:
        """Return (T - E T) / sqrt(2 df) of one pair, for each group and all together.

        T is the sum of squares of the joint answers' covariances less expected, over n p(a) p(b):
        under independence within a class a chi-square with df (R - 1)(C - 1).
        """
        i, j = self.pairs[pair]
        shape = (self.items[i].n_categories, self.items[j].n_categories)
        cells = slice(self.start[pair], self.start[pair + 1])
        gap = gap[..., cells].reshape(*gap.shape[:-1], *shape)
        p = probability[..., cells].reshape(*probability.shape[:-1], *shape)
        pa, pb = p.sum(axis=-1, keepdims=True), p.sum(axis=-2, keepdims=True)
        off = gap - pb * gap.sum(axis=-1, keepdims=True) - pa * gap.sum(axis=-2, keepdims=True)
        variance = (
            p * (1 - 2 * pa) * (1 - 2 * pb)
            + pa * (1 - 2 * pa) * pb**2
            + pb * (1 - 2 * pb) * pa**2
            + pa**2 * pb**2
            - (p - pa * pb) ** 2
        )
        may = pa * pb > 0
        scale = np.where(may, pa * pb, 1.0)
        cases = np.maximum(n, 1.0)[:, None, None]
        over = np.where(may, off**2 / (cases * scale) - variance / scale, 0.0).sum(axis=(-2, -1))
        over = np.where(n > 0, over, 0.0)[..., None]
        df = (shape[0] - 1) * (shape[1] - 1) * with_sum((n > 0).astype(np.float64)[:, None])[:, 0]
        return np.asarray(with_sum(over)[..., 0] / np.sqrt(2 * np.maximum(df, 1)))

    def odds_ratio(self, counts: Floats) -> Floats:
        """Return concordant over discordant pairs of cases (Agresti 1980), nan without an order.

        Of two yes/no items it is the odds ratio of their 2 x 2 table.

        Parameters
        ----------
        counts : ndarray, shape (..., joint answers)
            Counts, or probabilities.

        Returns
        -------
        ndarray, shape (..., pairs)
        """
        out = np.full((*counts.shape[:-1], len(self.pairs)), np.nan)
        for p, (i, j) in enumerate(self.pairs):
            if self.is_scored[p]:
                shape = (self.items[i].n_categories, self.items[j].n_categories)
                table = counts[..., self.start[p] : self.start[p + 1]]
                table = table.reshape(*table.shape[:-1], *shape)
                table = table[..., :: direction(self.items[i]), :: direction(self.items[j])]
                out[..., p] = concordance(table)
        return out


def with_sum(values: Floats) -> Floats:
    """Append the sum over groups to values (..., groups, n)."""
    return np.concatenate([values, values.sum(axis=-2, keepdims=True)], axis=-2)


def _in_errors(moved: Floats, variance: Floats) -> Floats:
    varies = variance > NO_SPREAD
    return np.where(varies, moved / np.sqrt(np.where(varies, variance, 1.0)), 0.0)
