"""A mixture of full conditionals, symmetrised over a model's labels: a proposal near the posterior.

The components are the Dirichlets of all blocks given the classes of one kept draw; half of them
are flattened, so that the mixture has heavier tails than the posterior. Averaged over every
permutation of the classes that leaves the model unchanged, whatever labels the draws had.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations
from math import lgamma, log

import numpy as np
from scipy.special import logsumexp

from bayeslca._typing import Floats, Ints
from bayeslca.assess.evidence.conditionals import FreeParameters
from bayeslca.exceptions import ModelError
from bayeslca.model.permutations import Factor, PermutationGroup, transposition

FLATTENED = 0.5
"""Counts of every other component are multiplied by this."""
PIECE = 4_000_000
"""Numbers held at once per array (32 MB)."""
MOST_EXCHANGEABLE = 12
"""More classes than this in one symmetric group are too many to sum over (2^K terms each)."""


@dataclass(frozen=True, eq=False)
class Labels:
    """Which parameters belong to which exchangeable class.

    Attributes
    ----------
    aligned : tuple of ndarray of int64, each (classes, parameters of a class)
        For each factor of the group: what the same place is called in each of its classes.
    rest : ndarray of int64
        Parameters that no permutation moves.
    members : ndarray of int64, shape (M, F), or None
        Where each parameter comes from under every member, where the group is not a product of
        symmetric groups whose classes own their parameters; ``aligned`` is empty then.
    """

    aligned: tuple[Ints, ...]
    rest: Ints
    members: Ints | None

    @property
    def log_size(self) -> float:
        """Log of the number of permutations."""
        if self.members is not None:
            return log(len(self.members))
        return sum(lgamma(len(one) + 1) for one in self.aligned)


def labels_of(free: FreeParameters, group: PermutationGroup) -> Labels:
    """Find which parameters the permutations of a group move.

    Raises
    ------
    ModelError
        Where permutations are too many to be summed over.
    """
    everything = np.arange(free.prior.size)
    if group.is_identity:
        return Labels((), everything, None)
    if group.factors is not None:
        aligned = _aligned(free, group, group.factors)
        if aligned is not None:
            owned = np.concatenate([one.ravel() for one in aligned])
            return Labels(aligned, np.setdiff1d(everything, owned), None)
    if group.permutations is None:
        msg = (
            f"the classes can be exchanged in {group.n_members} ways that do not come apart class "
            "by class: too many to sum over"
        )
        raise ModelError(msg)
    members = np.stack([free.moved_by(member) for member in group.permutations])
    return Labels((), everything, members)


def _aligned(
    free: FreeParameters, group: PermutationGroup, factors: Sequence[Factor]
) -> tuple[Ints, ...] | None:
    """Find the parameters of each class of each factor; None where they are not its own."""
    everything = np.arange(free.prior.size)
    found, taken = [], np.zeros(everything.size, dtype=np.bool_)
    for factor in factors:
        if len(factor.classes) > MOST_EXCHANGEABLE:
            msg = (
                f"the evidence of {len(factor.classes)} exchangeable classes is not offered: at "
                f"most {MOST_EXCHANGEABLE}"
            )
            raise ModelError(msg)
        maps = {
            pair: free.moved_by(
                transposition(group.n_groups, group.n_classes, factor.groups, *pair)
            )
            for pair in combinations(factor.classes, 2)
        }
        first = factor.classes[0]
        own = np.ones(everything.size, dtype=np.bool_)
        for pair, moved in maps.items():
            own &= (moved != everything) if first in pair else (moved == everything)
        if len(factor.classes) == 2:  # of each swapped pair either may stand for the first class
            own = maps[factor.classes[0], factor.classes[1]] > everything
        mine = everything[own]
        rows = np.stack([mine, *(maps[first, k][mine] for k in factor.classes[1:])])
        moved_at_all = np.any([moved != everything for moved in maps.values()], axis=0)
        if rows.size != np.unique(rows).size or set(rows.ravel()) != set(everything[moved_at_all]):
            return None
        if taken[rows].any():
            return None
        taken[rows] = True
        found.append(rows)
    return tuple(found)


@dataclass(frozen=True, eq=False)
class Proposal:
    """The symmetrised mixture.

    Attributes
    ----------
    free : FreeParameters
    labels : Labels
    components : ndarray, shape (S, F)
        Dirichlet parameters.
    """

    free: FreeParameters
    labels: Labels
    components: Floats

    @classmethod
    def flattened(cls, free: FreeParameters, labels: Labels, conditionals: Floats) -> Proposal:
        """Flatten every other conditional (S, F), so that tails are heavier."""
        factor = np.where(np.arange(len(conditionals)) % 2 == 1, FLATTENED, 1.0)[:, None]
        return cls(free, labels, free.prior + factor * (conditionals - free.prior))

    def draw(self, n: int, rng: np.random.Generator) -> Floats:
        """Draw parameters (n, F), each component equally often.

        Labels are left as they are: what is computed from the draws does not depend on them.
        """
        which = np.resize(rng.permutation(len(self.components)), n)
        return self.free.draw(self.components[which], rng)

    def log_density(self, values: Floats) -> Floats:
        """Return the log density (n,) at parameters (n, F)."""
        return self.log_terms_summed(values) - log(len(self.components)) - self.labels.log_size

    def log_terms_summed(self, values: Floats) -> Floats:
        """Return the log of the sum (n,) over components and permutations."""
        out = np.empty(len(values))
        for rows, base, matched in self._pieces(np.log(values)):
            if len(matched) == 1:
                from bayeslca.assess.evidence.permanent import log_sum_of_permanents

                out[rows] = log_sum_of_permanents(base, matched[0])
            else:
                out[rows] = logsumexp(_with_permanents(base, matched), axis=1)
        return out

    def log_terms(self, values: Floats) -> Floats:
        """Return the log density (n, S) of each symmetrised component."""
        out = np.empty((len(values), len(self.components)))
        for rows, base, matched in self._pieces(np.log(values)):
            out[rows] = _with_permanents(base, matched)
        return out - self.labels.log_size

    def _pieces(self, logs: Floats) -> Iterator[tuple[slice, Floats, list[Floats]]]:
        """Go through the draws: log terms that no permutation moves, and matrices of the rest."""
        n_components = len(self.components)
        widest = max([1, *(len(one) ** 2 for one in self.labels.aligned)])
        size = max(1, PIECE // (n_components * widest))
        norm = self.free.log_norms(self.components)
        powers = self.components - 1.0
        for first in range(0, len(logs), size):
            rows = slice(first, first + size)
            if self.labels.members is not None:
                yield rows, norm + self._over_members(logs[rows], powers), []
                continue
            rest = self.labels.rest
            base = norm + logs[rows][:, rest] @ powers[:, rest].T
            matched = []
            for aligned in self.labels.aligned:
                entries, shift = self._matched(logs[rows], powers, aligned)
                base = base + shift
                matched.append(entries)
            yield rows, base, matched

    def _over_members(self, logs: Floats, powers: Floats) -> Floats:
        members = self.labels.members
        assert members is not None
        return np.asarray(logsumexp([logs[:, moved] @ powers.T for moved in members], axis=0))

    def _matched(self, logs: Floats, powers: Floats, aligned: Ints) -> tuple[Floats, Floats]:
        """Return what class k adds (K, n, S, K) in the place of each of a component's classes.

        A column has its value at the component's own mean taken off (the shift (S,) puts it back):
        exponentials then neither overflow nor vanish.
        """
        n_classes, width = aligned.shape
        power = powers[:, aligned]  # (S, K, width)
        mean = self.components / np.repeat(
            np.add.reduceat(self.components, self.free.block_start[:-1], axis=1),
            np.diff(self.free.block_start),
            axis=1,
        )
        typical = np.sum(power * np.log(mean)[:, aligned], axis=2)  # (S, K)
        flat = power.reshape(-1, width).T
        entries = np.empty((n_classes, len(logs), flat.shape[1]))
        for k in range(n_classes):
            np.matmul(logs[:, aligned[k]], flat, out=entries[k])
        entries -= typical.ravel()
        return entries.reshape(n_classes, len(logs), -1, n_classes), typical.sum(axis=1)


def _with_permanents(base: Floats, matched: Sequence[Floats]) -> Floats:
    from bayeslca.assess.evidence.permanent import log_permanents

    return base + sum(log_permanents(entries) for entries in matched) if matched else base
