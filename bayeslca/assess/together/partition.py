"""A point partition: the sets of cases that lie nearest, on average, to the sampled partitions.

Classes change their number and their labels from draw to draw; who is together with whom does
not depend on either. Of all ways to put cases into sets the one is sought whose expected
variation of information to the partitions sampled from the posterior is smallest. Cases with the
same answers cannot be told apart and are kept together. The expectation is taken over the sampled
partitions themselves, not over a bound on it; the search starts from several partitions and moves
one response pattern at a time, or joins two sets, while that helps.

References
----------
Meila, M. (2007). Comparing clusterings: an information based distance. Journal of Multivariate
Analysis 98, 873-895. Wade, S. & Ghahramani, Z. (2018). Bayesian cluster analysis: point
estimation and credible balls. Bayesian Analysis 13, 559-626 (the loss, a greedy search, and the
radius of a ball that holds 95 % of the posterior). Both from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats, Ints

STARTS = 4
"""The best of the partitions tried first from which a search begins."""
SAMPLED_STARTS = 20
MOST_ROUNDS = 50
BALL = 0.95


@dataclass(frozen=True, eq=False)
class Partition:
    """A way to put cases into sets.

    Attributes
    ----------
    labels : ndarray of int64, shape (U,)
        The set of each unit's cases, 0 for the set with the most cases.
    loss : float
        Expected variation of information to the posterior's partitions, in bits.
    radius : float
        95 % of the sampled partitions lie within this distance, in bits.
    sampled : int
        Number of sampled partitions.
    """

    labels: Ints
    loss: float
    radius: float
    sampled: int

    @property
    def n_sets(self) -> int:
        """Number of sets."""
        return int(self.labels.max(initial=-1)) + 1


def point_partition(splits: Ints, count: Ints, together: Floats) -> Partition:
    """Return the partition with the smallest expected variation of information that was found.

    Parameters
    ----------
    splits : ndarray of int, shape (S, U, K)
        Sampled partitions: how many cases of each unit are in each class.
    count : ndarray of int, shape (U,)
    together : ndarray, shape (U, U)
        Probability that cases of two units are together; only says where to start.
    """
    search = _Search(splits, count)
    tried = {
        _tidy(labels, count).tobytes(): _tidy(labels, count)
        for labels in _starts(splits, count, together)
    }
    ranked = sorted(tried.values(), key=search.loss)
    found = [_improved(search, labels) for labels in ranked[:STARTS]]
    best = _tidy(min(found, key=search.loss), count)
    distances = search.distances(best)
    return Partition(
        best, float(distances.mean()), float(np.quantile(distances, BALL)), splits.shape[0]
    )


def variation_of_information(labels: Ints, splits: Ints, count: Ints) -> Floats:
    """Return the distances (S,), in bits, of a partition of units from sampled partitions.

    Parameters
    ----------
    labels : ndarray of int, shape (U,)
    splits : ndarray of int, shape (S, U, K)
    count : ndarray of int, shape (U,)
    """
    return _Search(splits, count).distances(labels)


class _Search:
    """Distances to sampled partitions, and what a move changes in their mean."""

    def __init__(self, splits: Ints, count: Ints) -> None:
        self.splits, self.count = splits.astype(np.int64), count.astype(np.int64)
        self.n_cases = int(count.sum())
        numbers = np.arange(self.n_cases + 1, dtype=np.float64)
        self.n_log_n = numbers * np.log2(np.maximum(numbers, 1.0))
        self.slots = splits.shape[2] + 3
        """Sets at the most: a few more than there are classes."""
        self.own = self.n_log_n[self.splits.sum(axis=1)].sum(axis=1)

    def joint(self, labels: Ints) -> Ints:
        """Return the cases (S, slots, K) of each set in each class."""
        holds = np.zeros((max(self.slots, int(labels.max()) + 1), labels.size), dtype=np.int64)
        holds[labels, np.arange(labels.size)] = 1
        return np.asarray(np.einsum("cu,suk->sck", holds, self.splits, optimize=True))

    def distances(self, labels: Ints) -> Floats:
        """Return the variation of information (S,) to each sampled partition, in bits."""
        sizes = np.bincount(labels, weights=self.count).astype(np.int64)
        shared = self.n_log_n[self.joint(labels)].sum(axis=(1, 2))
        total = self.n_log_n[sizes].sum() + self.own - 2.0 * shared
        return np.asarray(np.maximum(total / self.n_cases, 0.0))

    def loss(self, labels: Ints) -> float:
        """Return the mean distance."""
        return float(self.distances(labels).mean())

    def change(self, joint: Ints, sizes: Ints, unit: int) -> Floats:
        """Return what putting a unit (now in no set) into each set (slots,) adds to the loss."""
        mine, added = self.splits[:, unit], self.count[unit]
        classes = np.flatnonzero(mine.any(axis=0))
        before = joint[:, :, classes]
        more = self.n_log_n[before + mine[:, None, classes]] - self.n_log_n[before]
        shared = more.sum(axis=(0, 2)) / joint.shape[0]
        return np.asarray(self.n_log_n[sizes + added] - self.n_log_n[sizes] - 2.0 * shared)


def _improved(search: _Search, labels: Ints) -> Ints:
    """Move units, then join sets, until neither helps."""
    labels = labels.copy()
    for _ in range(MOST_ROUNDS):
        moved = _moved(search, labels)
        if not (_joined(search, labels) or moved):
            break
    return labels


def _moved(search: _Search, labels: Ints) -> bool:
    """Move each unit to the set that suits it best; say whether any moved."""
    joint = search.joint(labels)
    sizes = np.bincount(labels, weights=search.count, minlength=joint.shape[1]).astype(np.int64)
    any_moved = False
    for unit, at in enumerate(labels.tolist()):
        joint[:, at] -= search.splits[:, unit]
        sizes[at] -= search.count[unit]
        change = search.change(joint, sizes, unit)
        best = int(np.argmin(change))
        if change[best] < change[at] - 1e-9:
            labels[unit], any_moved = best, True
        else:
            best = at
        joint[:, best] += search.splits[:, unit]
        sizes[best] += search.count[unit]
    return any_moved


def _joined(search: _Search, labels: Ints) -> bool:
    """Join two sets where that helps; say whether any were joined."""
    any_joined = False
    best = search.loss(labels)
    used = sorted(set(labels.tolist()))
    for i, one in enumerate(used):
        for other in used[:i]:
            if not np.any(labels == one):
                continue
            trial = np.where(labels == one, other, labels)
            loss = search.loss(trial)
            if loss < best - 1e-12:
                labels[:], best, any_joined = trial, loss, True
    return any_joined


def _starts(splits: Ints, count: Ints, together: Floats) -> list[Ints]:
    """Return partitions (U,) to begin with: one set, some sampled ones, and trees cut."""
    n_units, most = count.size, splits.shape[2] + 1
    starts: list[Ints] = [np.zeros(n_units, dtype=np.int64)]
    some = np.unique(np.linspace(0, splits.shape[0] - 1, SAMPLED_STARTS).astype(np.int64))
    starts += [splits[s].argmax(axis=1).astype(np.int64) for s in some]
    if n_units > 1:
        from scipy.cluster.hierarchy import fcluster, linkage
        from scipy.spatial.distance import squareform

        apart = np.clip(1.0 - 0.5 * (together + together.T), 0.0, 1.0)
        np.fill_diagonal(apart, 0.0)
        tree = linkage(squareform(apart, checks=False), method="average")
        starts += [
            fcluster(tree, n, criterion="maxclust").astype(np.int64) - 1
            for n in range(2, min(most, n_units) + 1)
        ]
    return starts


def _tidy(labels: Ints, count: Ints) -> Ints:
    """Give the sets numbers by falling size; of two of one size, the first unit's comes first."""
    sizes = np.bincount(labels, weights=count)
    first = {at: i for i, at in reversed(list(enumerate(labels.tolist())))}
    order = sorted(first, key=lambda at: (-sizes[at], first[at]))
    new = np.zeros(sizes.size, dtype=np.int64)
    new[order] = np.arange(len(order))
    return np.asarray(new[labels])
