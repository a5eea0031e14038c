"""Which classes a model leaves exchangeable: the groups L and P of its labels.

L leaves the table (sharing, known values, verified classes) unchanged; P, within L, leaves the
priors and bounds unchanged too. Only what is stated breaks symmetry, never a name.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Hashable, Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations

import numpy as np

from bayeslca._typing import Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.permutations import (
    MOST_ENUMERATED,
    Factor,
    PermutationGroup,
    identity,
    permutation_group,
    transposition,
)
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.table import Table, UnitTable

Accept = Callable[[Ints, Ints], bool]
"""Whether a permutation (group, K), with its element map (E,), leaves everything unchanged."""


@dataclass(frozen=True, eq=False)
class Symmetry:
    """The symmetry of a model's labels.

    Attributes
    ----------
    table_group : PermutationGroup
        L: leaves the table unchanged. Moves in L are accepted with the ratio of the priors.
    prior_group : PermutationGroup
        P: leaves the priors and bounds unchanged too.
    named_group : PermutationGroup
        What is left of P once naming rules have named their classes.
    """

    table_group: PermutationGroup
    prior_group: PermutationGroup
    named_group: PermutationGroup


def symmetry(
    table: Table,
    source: PrevalenceSource,
    unit_table: UnitTable | None = None,
    named: Collection[int] = (),
) -> Symmetry:
    """Find the groups of permutations that a model leaves open.

    Parameters
    ----------
    table : Table
    source : PrevalenceSource
    unit_table : UnitTable, optional
        Needed where units carry extra log weight (verified classes).
    named : collection of int
        Classes that a naming rule names.
    """
    weight_key = _weight_keys(table, unit_table)
    orders = _closed_orders(table)

    def prior_key(g: int, k: int) -> Hashable:
        return weight_key(g, k), source.class_key(g, k)

    def named_key(g: int, k: int) -> Hashable:
        return prior_key(g, k), k if k in named else -1

    def same_prior(permutation: Ints, element_map: Ints) -> bool:
        moved = {(int(element_map[a]), int(element_map[b])) for a, b in orders}
        return moved == orders and source.is_invariant(permutation)

    uses = _uses(table)
    numbers = np.column_stack(
        [
            uses,
            table.element_prior,
            table.element_lower,
            table.element_upper,
            np.bincount([a for a, _ in orders], minlength=table.n_elements),
            np.bincount([b for _, b in orders], minlength=table.n_elements),
        ]
    )
    by_prior = _numbered(numbers)
    in_table = _Search(table, _numbered(uses), weight_key, lambda _p, _e: True, set())
    return Symmetry(
        in_table.group(),
        _Search(table, by_prior, prior_key, same_prior, orders).group(),
        _Search(table, by_prior, named_key, same_prior, orders).group(),
    )


def element_map(table: Table, permutation: Ints) -> Ints:
    """Return where each element comes from under a permutation of L.

    Parameters
    ----------
    table : Table
    permutation : ndarray of int, shape (groups, K)
        ``permutation[g, k]`` is the old class of group g that becomes class k.

    Returns
    -------
    ndarray of int64, shape (E,)
        ``new_elements = elements[..., element_map]``.

    Raises
    ------
    ModelError
        When the permutation changes the table.
    """
    found = _find_map(table, np.asarray(permutation))
    if found is None:
        msg = f"the permutation {np.asarray(permutation).tolist()} changes the model's table"
        raise ModelError(msg)
    return found


@dataclass(frozen=True, eq=False)
class _Forms:
    """The cells of every row and class, laid out so that they can be compared at once."""

    shape: Ints  # (R, K): same number where constants and numbers of elements are the same
    elements: Ints  # (R, K, most): elements of all cells in order, -1 beyond
    rows: tuple[Ints, ...]  # per group of cases: all its rows


@lru_cache(maxsize=8)
def _forms(table: Table) -> _Forms:
    rows = tuple(
        np.concatenate([table.response_row[g], table.joint_row[g]]) for g in table.response_group
    )
    direct = table.direct_element
    if table.is_direct:
        return _Forms(np.zeros(direct.shape, dtype=np.int64), direct[:, :, None], rows)
    shapes: dict[Hashable, int] = {}
    shape = np.empty(direct.shape, dtype=np.int64)
    flat: dict[tuple[int, int], list[int]] = {}
    for r, k in np.ndindex(*direct.shape):
        cells = table.cells(r, k)
        key = tuple((constant, len(elements)) for constant, elements in cells)
        shape[r, k] = shapes.setdefault(key, len(shapes))
        flat[r, k] = [e for _, elements in cells for e in elements]
    elements = np.full((*direct.shape, max(1, *map(len, flat.values()))), -1, dtype=np.int64)
    for (r, k), found in flat.items():
        elements[r, k, : len(found)] = found
    return _Forms(shape, elements, rows)


def _find_map(table: Table, permutation: Ints) -> Ints | None:
    """Match cells in the order in which the builder wrote them; None where they differ."""
    forms = _forms(table)
    out = np.full(table.n_elements, -1, dtype=np.int64)
    sources, targets = [], []
    for rows, image in zip(forms.rows, permutation, strict=True):
        shape = forms.shape[rows]
        if not np.array_equal(shape, shape[:, image]):
            return None
        here = forms.elements[rows]
        used = here >= 0
        sources.append(here[used])
        targets.append(here[:, image][used])
    source, target = np.concatenate(sources), np.concatenate(targets)
    out[source] = target
    if not np.array_equal(out[source], target):
        return None
    unused = np.flatnonzero(out < 0)
    out[unused] = unused
    if not np.array_equal(np.sort(out), np.arange(out.size)):
        return None
    return out if _keeps_blocks(table, out) else None


def _keeps_blocks(table: Table, mapped: Ints) -> bool:
    """Whether every block becomes one whole block."""
    if not table.n_blocks:
        return True
    block = table.element_block[mapped]
    starts = table.block_start[:-1]
    first, last = np.minimum.reduceat(block, starts), np.maximum.reduceat(block, starts)
    sizes = np.diff(table.block_start)
    return bool(np.array_equal(first, last) and np.array_equal(sizes[first], sizes))


def _uses(table: Table) -> Ints:
    """How often each element stands in a row of a class, shape (E,)."""
    return np.bincount(table.cell_element, minlength=table.n_elements)


def _numbered(values: Ints | np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> Ints:
    """Give equal values (or rows of values) the same number."""
    if not values.size:
        return np.zeros(0, dtype=np.int64)
    return np.unique(values, axis=0, return_inverse=True)[1].reshape(-1)


def _weight_keys(table: Table, unit_table: UnitTable | None) -> Callable[[int, int], Hashable]:
    """Tell apart classes of a group for which its units have different extra log weights."""
    if unit_table is None or not unit_table.log_weight.size:
        return lambda _g, _k: b""
    in_group = [unit_table.prevalence_row == g for g in range(table.n_prevalence_rows)]
    return lambda g, k: unit_table.log_weight[in_group[g], k].tobytes()


def _closed_orders(table: Table) -> set[tuple[int, int]]:
    """All orders of elements, also those that follow from others."""
    below: dict[int, set[int]] = {}
    for a, b in zip(table.order_above.tolist(), table.order_below.tolist(), strict=True):
        below.setdefault(a, set()).add(b)
    closed: set[tuple[int, int]] = set()
    for start in below:
        reached: set[int] = set()
        waiting = list(below[start])
        while waiting:
            at = waiting.pop()
            if at not in reached:
                reached.add(at)
                waiting.extend(below.get(at, ()))
        closed |= {(start, end) for end in reached}
    return closed


class _Search:
    """Find all permutations that keep a table and are accepted."""

    def __init__(
        self,
        table: Table,
        element_key: Ints,
        class_key: Callable[[int, int], Hashable],
        accept: Accept,
        orders: set[tuple[int, int]],
    ) -> None:
        self.table = table
        self.n_groups, self.n_classes = table.n_prevalence_rows, table.n_classes
        self.accept = accept
        self.forms = _forms(table)
        key = np.append(element_key, -1)  # the filling of unused places
        self.signature = {
            (g, k): (
                class_key(g, k),
                self.forms.shape[rows, k].tobytes(),
                key[self.forms.elements[rows, k]].tobytes(),
            )
            for g, rows in enumerate(self.forms.rows)
            for k in range(self.n_classes)
        }
        self.components = self._components(orders)

    def group(self) -> PermutationGroup:
        """Return the group: factors by transpositions, then what moves factors themselves."""
        factors: list[Factor] = []
        others: list[list[Ints]] = []
        for groups in self.components:
            orbits = self._orbits(groups)
            factors += [Factor(groups, orbit) for orbit in orbits]
            others.append(list(self._cosets(groups, orbits)))
        return permutation_group(self.n_groups, self.n_classes, factors, others)

    def _components(self, orders: set[tuple[int, int]]) -> list[tuple[int, ...]]:
        """Return sets of groups whose labels hang together, by shared elements or orders."""
        used = [set(self.forms.elements[rows].ravel().tolist()) - {-1} for rows in self.forms.rows]
        sets: list[tuple[set[int], set[int]]] = []
        for g, elements in enumerate(used):
            reached = elements | {b for a, b in orders if a in elements}
            reached |= {a for a, b in orders if b in elements}
            groups = {g}
            apart = []
            for others, theirs in sets:
                if theirs & reached:
                    groups |= others
                    reached |= theirs
                else:
                    apart.append((others, theirs))
            sets = [*apart, (groups, reached)]
        return sorted(tuple(sorted(groups)) for groups, _ in sets)

    def _keeps(self, permutation: Ints) -> bool:
        found = _find_map(self.table, permutation)
        return found is not None and self.accept(permutation, found)

    def _orbits(self, groups: tuple[int, ...]) -> list[tuple[int, ...]]:
        """Classes that can be swapped, alike in all of these groups, leaving the rest."""
        orbit_of = list(range(self.n_classes))
        for a, b in combinations(range(self.n_classes), 2):
            if orbit_of[a] == orbit_of[b]:
                continue
            alike = all(self.signature[g, a] == self.signature[g, b] for g in groups)
            swap = transposition(self.n_groups, self.n_classes, groups, a, b)
            if alike and self._keeps(swap):
                orbit_of = [orbit_of[a] if o == orbit_of[b] else o for o in orbit_of]
        return [
            tuple(k for k in range(self.n_classes) if orbit_of[k] == root)
            for root in sorted(set(orbit_of))
        ]

    def _cosets(self, groups: tuple[int, ...], orbits: Sequence[tuple[int, ...]]) -> Iterator[Ints]:
        """Go through one permutation of each coset of the orbits' symmetric groups.

        That product is normal (a transposition's conjugate is one), so a member carries orbits
        onto orbits and can be chosen to keep the order of classes within each of them in the
        first group.
        """
        positions = [(g, k) for g in groups for k in range(self.n_classes)]
        orbit_of = {k: orbit for orbit in orbits for k in orbit}
        n_found = 0

        def extend(at: int, permutation: Ints, forward: dict[int, int]) -> Iterator[Ints]:
            if at == len(positions):
                if self._keeps(permutation):
                    yield permutation.copy()
                return
            g, k = positions[at]
            taken = set(permutation[g, :k].tolist())
            for image in self._images(g, k, taken):
                if g == groups[0] and not _keeps_order(permutation[g], k, image, orbit_of):
                    continue
                longer = self._matched(g, k, image, forward)
                if longer is not None:
                    permutation[g, k] = image
                    yield from extend(at + 1, permutation, longer)

        for permutation in extend(0, identity(self.n_groups, self.n_classes), {}):
            yield permutation
            n_found += 1
            if n_found > MOST_ENUMERATED:
                return

    def _images(self, g: int, k: int, taken: set[int]) -> Iterator[int]:
        """Classes that look like class k in group g, itself first."""
        order = [k, *(other for other in range(self.n_classes) if other != k)]
        for other in order:
            if other not in taken and self.signature[g, other] == self.signature[g, k]:
                yield other

    def _matched(
        self, g: int, k: int, image: int, forward: dict[int, int]
    ) -> dict[int, int] | None:
        """Extend the map of elements by one position; None where it contradicts itself."""
        rows = self.forms.rows[g]
        longer = dict(forward)
        here, there = self.forms.elements[rows, k], self.forms.elements[rows, image]
        for one, two in zip(here[here >= 0].tolist(), there[there >= 0].tolist(), strict=True):
            if longer.setdefault(one, two) != two:
                return None
        return longer


def _keeps_order(
    permutation: Ints, k: int, image: int, orbit_of: dict[int, tuple[int, ...]]
) -> bool:
    """Whether class k may come from ``image``, given what its orbit's earlier classes did."""
    orbit = orbit_of[k]
    at = orbit.index(k)
    target = orbit_of[image]
    if len(target) != len(orbit) or target[at] != image:
        return False
    return at == 0 or orbit_of[int(permutation[orbit[at - 1]])] == target
