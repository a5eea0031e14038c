"""How probable bounds and orders are, for many Dirichlet parameters at once, without drawing.

Given the classes of all cases, the blocks are independent, and each bounded element is a Beta
variate. Where orders between them form a forest (chains, "one above several", no closed rings),
the probability is found by passing cumulative integrals from the leaves to a root.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.special import betainc, betaincc

from bayeslca._typing import Bools, Floats
from bayeslca.model.blocks import Blocks, constrained_elements

NODES = 512
"""Cells of the integrals; evenly spread on the arcsine scale, where a Beta's width is even."""
PIECE = 200
"""Parameter sets that are worked through at once."""


@dataclass(frozen=True, slots=True)
class Variate:
    """A Beta variate: one element of a block, between constants.

    Attributes
    ----------
    element : int
    block : tuple of int
        First and last element (exclusive) of its block.
    lower, upper : float
    """

    element: int
    block: tuple[int, int]
    lower: float
    upper: float


@dataclass(frozen=True)
class Forest:
    """Independent Beta variates, and orders between them without rings.

    Attributes
    ----------
    variates : tuple of Variate
    orders : tuple of (int, int)
        ``(a, b)``: variate a lies above variate b.
    """

    variates: tuple[Variate, ...]
    orders: tuple[tuple[int, int], ...]


def forest(blocks: Blocks) -> Forest | None:
    """Return what bounds and orders ask of blocks; None where it is no forest of Betas."""
    start = np.asarray(blocks.block_start)
    constrained = np.flatnonzero(constrained_elements(blocks))
    by_block: dict[int, list[int]] = {}
    for e in constrained.tolist():
        by_block.setdefault(int(np.searchsorted(start, e, side="right")) - 1, []).append(e)
    variates: list[Variate] = []
    of_element: dict[int, tuple[int, bool]] = {}  # element -> (variate, turned round)
    for b, elements in by_block.items():
        first, last = int(start[b]), int(start[b + 1])
        if len(elements) > 1 and last - first > 2:
            return None
        main = elements[0]
        lower, upper = float(blocks.element_lower[main]), float(blocks.element_upper[main])
        of_element[main] = (len(variates), False)
        for other in elements[1:]:  # the other of two elements is one minus the first
            of_element[other] = (len(variates), True)
            lower = max(lower, 1.0 - float(blocks.element_upper[other]))
            upper = min(upper, 1.0 - float(blocks.element_lower[other]))
        variates.append(Variate(main, (first, last), lower, upper))
    orders: set[tuple[int, int]] = set()
    for above, below in zip(blocks.order_above.tolist(), blocks.order_below.tolist(), strict=True):
        (a, a_turned), (b, b_turned) = of_element[above], of_element[below]
        if a_turned != b_turned or a == b:
            return None
        orders.add((b, a) if a_turned else (a, b))
    reduced = _without_implied(orders)
    if _has_ring(len(variates), reduced):
        return None
    return Forest(tuple(variates), tuple(sorted(reduced)))


def _without_implied(orders: set[tuple[int, int]]) -> set[tuple[int, int]]:
    """Leave out orders that others imply: a > c beside a > b > c."""
    below: dict[int, set[int]] = {}
    for a, b in orders:
        below.setdefault(a, set()).add(b)

    def reach(a: int, without: int | None) -> set[int]:
        found: set[int] = set()
        waiting = [b for b in below.get(a, ()) if b != without]
        while waiting:
            b = waiting.pop()
            if b not in found:
                found.add(b)
                waiting.extend(below.get(b, ()))
        return found

    return {(a, b) for a, b in orders if b not in reach(a, b)}


def _has_ring(n: int, orders: set[tuple[int, int]]) -> bool:
    tree = list(range(n))
    for a, b in orders:
        one, two = tree[a], tree[b]
        if one == two:
            return True
        tree = [one if root == two else root for root in tree]
    return False


def log_probability(found: Forest, parameter: Floats) -> Floats:
    """Return the log probability (S,) that all bounds and orders hold.

    Parameters
    ----------
    found : Forest
    parameter : ndarray, shape (S, E)
        Dirichlet parameters of all elements.
    """
    out = np.zeros(parameter.shape[0])
    done: set[int] = set()
    for root in range(len(found.variates)):
        if root in done:
            continue
        members = _tree_of(root, found.orders)
        done |= set(members)
        ab = [_beta(found.variates[v], parameter) for v in members]
        if len(members) == 1:
            variate = found.variates[root]
            values = interval_probability(ab[0], variate.lower, variate.upper)
        else:
            values = _tree_probability(found, root, members, ab)
        with np.errstate(divide="ignore"):
            out += np.log(values)
    return out


def _beta(variate: Variate, parameter: Floats) -> Floats:
    """Return the two parameters (S, 2) of a variate."""
    first, last = variate.block
    a = parameter[:, variate.element]
    return np.stack([a, np.maximum(parameter[:, first:last].sum(axis=1) - a, 1e-300)], axis=1)


def _tree_of(root: int, orders: Sequence[tuple[int, int]]) -> list[int]:
    found = [root]
    for v in found:
        found += [w for w, _ in _neighbours(v, orders) if w not in found]
    return found


def _neighbours(v: int, orders: Sequence[tuple[int, int]]) -> list[tuple[int, bool]]:
    """Return the variates tied to one, and whether each lies below it."""
    return [(b, True) for a, b in orders if a == v] + [(a, False) for a, b in orders if b == v]


def _tree_probability(
    found: Forest, root: int, members: Sequence[int], ab: Sequence[Floats]
) -> Floats:
    cuts = {x for v in members for x in (found.variates[v].lower, found.variates[v].upper)}
    inside_cuts = tuple(sorted(cuts - {0.0, 1.0}))
    # The same parameters come again and again: each set of them is worked out once.
    together, which = np.unique(np.concatenate(ab, axis=1), axis=0, return_inverse=True)
    cells, of_row = {}, {}
    for i, v in enumerate(members):
        distinct, of_row[v] = np.unique(together[:, 2 * i : 2 * i + 2], axis=0, return_inverse=True)
        mass = np.stack([_cell_masses(*row, inside_cuts) for row in distinct.tolist()])
        cells[v] = np.where(_inside(found.variates[v], inside_cuts), mass, 0.0)
    values = np.empty(len(together))
    for first in range(0, len(together), PIECE):
        rows = slice(first, first + PIECE)
        piece = {v: cells[v][of_row[v].reshape(-1)[rows]] for v in members}
        fine = _masses(found, root, None, piece).sum(axis=1)
        if not inside_cuts:  # Richardson: the error falls with the square of the width
            halved = {v: mass[:, ::2] + mass[:, 1::2] for v, mass in piece.items()}
            coarse = _masses(found, root, None, halved).sum(axis=1)
            fine = np.clip((4.0 * fine - coarse) / 3.0, 0.5 * fine, 1.0)
        values[rows] = fine
    return np.asarray(values[which.reshape(-1)])


def _masses(found: Forest, v: int, parent: int | None, cells: dict[int, Floats]) -> Floats:
    """Return the probability (S, cells) that a variate lies in a cell and its subtree is kept."""
    mass = cells[v]
    for child, is_below in _neighbours(v, found.orders):
        if child == parent:
            continue
        inner = _masses(found, child, v, cells)
        # Inside one cell either order is even: half of the child's mass there counts.
        if is_below:
            mass = mass * (np.cumsum(inner, axis=1) - 0.5 * inner)
        else:
            mass = mass * (np.cumsum(inner[:, ::-1], axis=1)[:, ::-1] - 0.5 * inner)
    return mass


@lru_cache(maxsize=64)
def _nodes(cuts: tuple[float, ...]) -> Floats:
    """Return the ends of the cells, with cuts among them."""
    return np.unique(np.append(np.sin(np.linspace(0.0, np.pi / 2, NODES + 1)) ** 2, cuts))


def _inside(variate: Variate, cuts: tuple[float, ...]) -> Bools:
    """Tell which cells lie between a variate's bounds."""
    nodes = _nodes(cuts)
    middle = 0.5 * (nodes[1:] + nodes[:-1])
    return np.asarray((middle > variate.lower) & (middle < variate.upper))


@lru_cache(maxsize=20_000)
def _cell_masses(a: float, b: float, cuts: tuple[float, ...]) -> Floats:
    """Return the probability (cells,) of each cell under Beta(a, b).

    Below the mean from the lower tail, above it from the upper: no small number is lost.
    """
    nodes = _nodes(cuts)
    low = nodes <= a / (a + b)
    tail = betainc(np.where(low, a, b), np.where(low, b, a), np.where(low, nodes, 1.0 - nodes))
    mass = np.where(low[1:], tail[1:] - tail[:-1], tail[:-1] - tail[1:])
    split = low[:-1] & ~low[1:]
    return np.asarray(np.where(split, 1.0 - tail[:-1] - tail[1:], mass))


def interval_probability(ab: Floats, lower: float, upper: float) -> Floats:
    """Return the probability (S,) that Beta variates with parameters (S, 2) lie between bounds."""
    a, b = ab[:, 0], ab[:, 1]
    from_below = betainc(a, b, upper) - betainc(a, b, lower)
    from_above = betaincc(a, b, lower) - betaincc(a, b, upper)
    return np.asarray(np.where(betainc(a, b, lower) < 0.5, from_below, from_above))
