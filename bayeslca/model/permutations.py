"""Permutations of classes within groups, and groups of such permutations.

A permutation is an array (group, K): ``permutation[g, k]`` is the old class of group g that
becomes class k.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property, reduce
from itertools import combinations, permutations, product
from math import factorial, prod

import numpy as np

from bayeslca._typing import Ints

MOST_ENUMERATED = 720
"""Groups of permutations up to this size (6!) are kept as a list of their members."""


@dataclass(frozen=True, slots=True)
class Factor:
    """All permutations of some classes, the same in each of some groups."""

    groups: tuple[int, ...]
    classes: tuple[int, ...]


@dataclass(frozen=True, eq=False)
class PermutationGroup:
    """A group of permutations of (group, class) positions.

    Attributes
    ----------
    n_groups, n_classes : int
    factors : tuple of Factor or None
        The factors (of two classes or more), when the group is the product of the full symmetric
        groups on them; classes can then be assigned factor by factor. None when it is not.
    permutations : ndarray of int64, shape (M, group, K), or None
        All members, the identity first; None when there are more than 720.
    n_members : int
    """

    n_groups: int
    n_classes: int
    factors: tuple[Factor, ...] | None
    permutations: Ints | None
    n_members: int

    @property
    def is_identity(self) -> bool:
        """True when nothing can be exchanged."""
        return self.n_members == 1

    @property
    def group_sets(self) -> tuple[tuple[int, ...], ...]:
        """Sets of groups in which all classes can be exchanged apart from the other sets.

        One set of all groups wherever something ties their classes together.
        """
        everything = tuple(range(self.n_groups))
        factors = self.factors or ()
        whole = all(len(factor.classes) == self.n_classes for factor in factors)
        covered = sorted(g for factor in factors for g in factor.groups)
        if not whole or covered != list(everything):
            return (everything,)
        return tuple(factor.groups for factor in factors)

    @cached_property
    def proposals(self) -> Ints:
        """Members (M, group, K) that reach all others, closed under inversion, no identity.

        Transpositions where the group is a product of symmetric groups, else all members.
        """
        if self.factors is None:
            assert self.permutations is not None
            return self.permutations[1:]
        swaps = [
            transposition(self.n_groups, self.n_classes, factor.groups, a, b)
            for factor in self.factors
            for a, b in combinations(factor.classes, 2)
        ]
        return np.asarray(swaps, dtype=np.int64).reshape(-1, self.n_groups, self.n_classes)

    @cached_property
    def orbits(self) -> tuple[tuple[tuple[int, int], ...], ...]:
        """Positions (group, class) that members carry into one another, two or more each."""
        start = {(g, k): (g, k) for g in range(self.n_groups) for k in range(self.n_classes)}
        for permutation in self.proposals:
            for (g, k), target in np.ndenumerate(permutation):
                one, two = start[g, k], start[g, int(target)]
                start = {at: one if root == two else root for at, root in start.items()}
        roots = sorted(set(start.values()))
        orbits = [tuple(at for at, root in start.items() if root == r) for r in roots]
        return tuple(orbit for orbit in orbits if len(orbit) > 1)

    def mixed_classes(self) -> tuple[tuple[int, ...], ...]:
        """Return the sets of classes that are exchangeable in some group."""
        sets = {tuple(k for _, k in orbit) for orbit in self.orbits}
        return tuple(sorted(sets))


def identity(n_groups: int, n_classes: int) -> Ints:
    """Return the permutation (group, K) that changes nothing."""
    return np.tile(np.arange(n_classes), (n_groups, 1))


def transposition(n_groups: int, n_classes: int, groups: Sequence[int], a: int, b: int) -> Ints:
    """Return the permutation (group, K) that swaps two classes in some groups."""
    out = identity(n_groups, n_classes)
    out[np.ix_(list(groups), [a, b])] = [b, a]
    return out


def compose(first: Ints, second: Ints) -> Ints:
    """Return the permutation (..., K) that does ``first``, then ``second``."""
    return np.take_along_axis(first, second, axis=-1)


def inverse(permutation: Ints) -> Ints:
    """Return the permutation (..., K) that undoes this one."""
    return np.argsort(permutation, axis=-1)


def product_members(n_groups: int, n_classes: int, factors: Sequence[Factor]) -> Iterator[Ints]:
    """Go through all members of a product of symmetric groups, the identity first."""
    for choice in product(*(permutations(factor.classes) for factor in factors)):
        out = identity(n_groups, n_classes)
        for factor, image in zip(factors, choice, strict=True):
            out[np.ix_(list(factor.groups), list(factor.classes))] = image
        yield out


def permutation_group(
    n_groups: int,
    n_classes: int,
    factors: Sequence[Factor],
    others: Sequence[Sequence[Ints]] = (),
) -> PermutationGroup:
    """Return the group made of symmetric factors and of what maps factors onto each other.

    Parameters
    ----------
    n_groups, n_classes : int
    factors : sequence of Factor
    others : sequence of lists of permutations (group, K)
        For each set of groups that hang together: one representative, the identity among them,
        of each coset of the factors' product.

    Notes
    -----
    A group that is neither small nor a product is cut down to its factors: labels are then moved
    within a part of what the model leaves open, which is valid but not complete.
    """
    factors = tuple(factor for factor in factors if len(factor.classes) > 1)
    n_factors = prod(factorial(len(factor.classes)) for factor in factors)
    n_others = prod(len(cosets) for cosets in others)
    is_product = n_others == 1
    is_small = n_factors * n_others <= MOST_ENUMERATED
    if not is_small:
        return PermutationGroup(n_groups, n_classes, factors, None, n_factors)
    members = [
        compose(member, reduce(compose, cosets, identity(n_groups, n_classes)))
        for cosets in product(*others)
        for member in product_members(n_groups, n_classes, factors)
    ]
    return PermutationGroup(
        n_groups,
        n_classes,
        factors if is_product else None,
        np.asarray(members, dtype=np.int64),
        len(members),
    )
