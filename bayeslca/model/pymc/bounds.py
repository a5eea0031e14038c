"""Bounds and orders of binary probabilities on the real line, for NUTS.

Each bounded block of two is one coordinate x. In an order from the lowest to the highest,
x = L + (U - L) / (1 + exp(-u)), with L the largest of its lower bound and of the coordinates
below it, and U the least constant upper bound of itself and of all above it. Bounds on items
with more categories cross between elements of a simplex and have no such order: they are refused
by name, and Gibbs serves.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.blocks import BlockArrays, Blocks, constrained_elements
from bayeslca.model.bounds_probability import log_bounds_probability
from bayeslca.model.truncated_prior import draw_inside, interior_point

TURNED_ROUND = (
    "the model's orders turn round on themselves (one answer above another's opposite and above "
    "the other itself), which cannot be written as a PyMC model. Use sampler='gibbs', which is "
    "exact."
)
EDGE = 1e-9
"""Starting values keep this share of their interval away from its ends."""


@dataclass(frozen=True, eq=False)
class Coordinates:
    """Bounded blocks of two, each as one coordinate, from the lowest to the highest.

    Attributes
    ----------
    elements : ndarray of int64, shape (n, 2)
        The element that is the coordinate, and the other one.
    lower, upper : ndarray of float64, shape (n,)
        Constant bounds; ``upper`` is also that of all coordinates above.
    below : tuple of tuple of int
        Which earlier coordinates each one lies above.
    """

    elements: Ints
    lower: Floats
    upper: Floats
    below: tuple[tuple[int, ...], ...]


def coordinates(
    blocks: Blocks, larger: str = "probabilities of items with more than two categories"
) -> Coordinates:
    """Arrange the bounded blocks of a table, or refuse them by name.

    Parameters
    ----------
    blocks : Blocks
    larger : str
        What bounded blocks of more than two elements are, for the refusal.

    Raises
    ------
    ModelError
        Where bounds are on items with more than two categories, or orders turn round on
        themselves (one item's yes above another's no, and its yes above the other's yes).
    """
    start = blocks.block_start
    block = np.repeat(np.arange(start.size - 1), np.diff(start))
    used = np.unique(block[constrained_elements(blocks)])
    if np.any(np.diff(start)[used] != 2):
        msg = (
            f"the model bounds or orders {larger}, which cannot be written as a PyMC model. Use "
            "sampler='gibbs', which is exact."
        )
        raise ModelError(msg)
    orders = [
        (int(a), int(b))
        for a, b in zip(blocks.order_above, blocks.order_below, strict=True)
        if block[a] != block[b]
    ]
    chosen = _oriented(used.tolist(), orders, start, block)
    lower, upper = _constants(blocks, chosen, start)
    links = {(int(block[a]), int(block[b])) for a, b in orders if chosen[int(block[a])] == a}
    links |= {(int(block[b]), int(block[a])) for a, b in orders if chosen[int(block[a])] != a}
    ranked = _from_lowest(used.tolist(), links)
    for b in reversed(ranked):
        for above, below in links:
            if below == b:
                upper[b] = min(upper[b], upper[above])
    at = {b: i for i, b in enumerate(ranked)}
    other = {b: int(start[b]) + int(start[b]) + 1 - chosen[b] for b in ranked}
    return Coordinates(
        elements=np.array([[chosen[b], other[b]] for b in ranked], dtype=np.int64).reshape(-1, 2),
        lower=np.array([lower[b] for b in ranked]),
        upper=np.array([upper[b] for b in ranked]),
        below=tuple(tuple(sorted(at[c] for a, c in links if a == b)) for b in ranked),
    )


def _oriented(
    used: Sequence[int], orders: Sequence[tuple[int, int]], start: Ints, block: Ints
) -> dict[int, int]:
    """Choose of each block the element that is its coordinate, so that orders are of these.

    An order of two others is one of the two coordinates turned round.
    """
    chosen: dict[int, int] = {}
    for root in used:
        if root in chosen:
            continue
        chosen[root] = int(start[root]) + 1
        waiting = [root]
        while waiting:
            b = waiting.pop()
            for order in orders:
                for mine, theirs in (order, order[::-1]):
                    if block[mine] != b:
                        continue
                    c = int(block[theirs])
                    same = chosen[b] == mine
                    wanted = theirs if same else int(2 * start[c] + 1 - theirs)
                    if c not in chosen:
                        chosen[c] = wanted
                        waiting.append(c)
                    elif chosen[c] != wanted:
                        raise ModelError(TURNED_ROUND)
    return chosen


def _constants(
    blocks: Blocks, chosen: dict[int, int], start: Ints
) -> tuple[dict[int, float], dict[int, float]]:
    """Return the constant bounds of each coordinate: its own, and its opposite's turned round."""
    lower, upper = {}, {}
    inside = set(zip(blocks.order_above.tolist(), blocks.order_below.tolist(), strict=True))
    for b, e in chosen.items():
        other = int(2 * start[b] + 1 - e)
        lower[b] = max(blocks.element_lower[e], 1.0 - blocks.element_upper[other])
        upper[b] = min(blocks.element_upper[e], 1.0 - blocks.element_lower[other])
        if (e, other) in inside:
            lower[b] = max(lower[b], 0.5)
        if (other, e) in inside:
            upper[b] = min(upper[b], 0.5)
    return lower, upper


def _from_lowest(used: Sequence[int], links: set[tuple[int, int]]) -> list[int]:
    """Rank blocks so that each stands after all that it lies above."""
    ranked: list[int] = []
    while len(ranked) < len(used):
        ranked += [
            b for b in used if b not in ranked and all(c in ranked for a, c in links if a == b)
        ]
    return ranked


def add_bounded(name: str, blocks: Blocks, found: Coordinates, dims: tuple[str, ...]) -> Any:
    """Add the coordinates as one random variable to the PyMC model in context.

    Its density is the product of the blocks' Betas over the probability of the bounds; draws
    from the prior keep the bounds.
    """
    import pymc as pm
    import pytensor.tensor as pt

    arrays = BlockArrays.of(blocks)
    first, second = arrays.element_prior[found.elements].T
    log_probability = log_bounds_probability(blocks).value

    def log_density(value: Any, a: Any, b: Any) -> Any:
        inside: Any = pt.all(value >= found.lower) & pt.all(value <= found.upper)
        for i, lower_ones in enumerate(found.below):
            for j in lower_ones:
                inside &= value[i] >= value[j]
        density = pt.sum(pm.logp(pm.Beta.dist(a, b), value)) - log_probability
        return pt.switch(inside, density, -np.inf)

    def draw(a: Floats, b: Floats, rng: np.random.Generator, size: Any) -> Floats:
        n = int(np.prod(size)) if size else 1
        drawn = draw_inside(arrays, n, rng)[:, found.elements[:, 0]]
        return drawn.reshape(*(size or ()), len(first))

    return pm.CustomDist(
        name,
        first,
        second,
        logp=log_density,
        random=draw,
        signature="(n),(n)->(n)",
        dims=dims,
        default_transform=bounded_transform(found),
        initval=interior_point(arrays)[found.elements[:, 0]],
    )


def interval(found: Coordinates, x: Sequence[Any], i: int) -> tuple[Any, Any]:
    """Return the bounds of a coordinate, given those before it; symbolic."""
    import pytensor.tensor as pt

    lower: Any = pt.constant(found.lower[i])
    for j in found.below[i]:
        lower = pt.maximum(lower, x[j])
    return lower, found.upper[i]


def bounded_transform(found: Coordinates) -> Any:
    """Return a PyMC transform of a vector of coordinates to the real line.

    Parameters
    ----------
    found : Coordinates
    """
    import pytensor.tensor as pt
    from pymc.distributions.transforms import Transform

    n = len(found.lower)

    class Bounded(Transform):  # type: ignore[misc]
        """See the module."""

        name = "bounded"

        def forward(self, value: Any, *inputs: Any) -> Any:
            x = [value[i] for i in range(n)]
            out = []
            for i in range(n):
                low, high = interval(found, x, i)
                share = pt.clip((x[i] - low) / (high - low), EDGE, 1.0 - EDGE)
                out.append(pt.log(share) - pt.log1p(-share))
            return pt.stack(out)

        def backward(self, value: Any, *inputs: Any) -> Any:
            return pt.stack(self._values(value))

        def log_jac_det(self, value: Any, *inputs: Any) -> Any:
            x = self._values(value)
            total: Any = 0.0
            for i in range(n):
                low, high = interval(found, x, i)
                total += pt.log(high - low) - pt.softplus(value[i]) - pt.softplus(-value[i])
            return total

        def _values(self, value: Any) -> list[Any]:
            x: list[Any] = []
            for i in range(n):
                low, high = interval(found, x, i)
                x.append(low + (high - low) * pt.sigmoid(value[i]))
            return x

    return Bounded()
