"""How probable the bounds are under the prior: what the constrained prior is divided by.

Exact where it is simple (a Beta between constants; exchangeable probabilities in a partial
order; a chain or tree of Betas, by quadrature), else by drawing, step by step where the bounds
are improbable. Drawn values come with their Monte Carlo error and are the same every time.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.special import betainc, betaincc

from bayeslca._typing import Floats
from bayeslca.model.blocks import BlockArrays, Blocks, constrained_elements
from bayeslca.model.truncated_prior import (
    BURN_IN,
    Component,
    Walk,
    components,
    draw_component,
    keeps,
)

DRAWS = 100_000
LEAST_KEPT = 1_000
"""With fewer kept of all draws, the probability is found step by step."""
MOST_ORDERED = 14
"""Partial orders of more elements are not counted exactly."""
WALKERS, SWEEPS = 100, 100
GRID = 20_000
"""Cells of the grid on which trees of Betas are integrated: errors of about 1e-7."""
SEED = 20261201


@dataclass(frozen=True, slots=True)
class LogProbability:
    """The log of a probability.

    Attributes
    ----------
    value : float
    mcse : float
        Its Monte Carlo standard error; 0 where it is exact.
    """

    value: float
    mcse: float = 0.0


@lru_cache(maxsize=32)
def log_bounds_probability(blocks: Blocks) -> LogProbability:
    """Return the log prior probability that blocks keep all their bounds and orders."""
    found = [_of_component(blocks, component) for component in components(blocks)]
    return LogProbability(
        float(sum(one.value for one in found)),
        float(np.sqrt(sum(one.mcse**2 for one in found))),
    )


def _of_component(blocks: Blocks, component: Component) -> LogProbability:
    for exact in (_exchangeable, _tree):
        share = exact(blocks, component)
        if share is not None and share > 0.0:
            return LogProbability(float(np.log(share)))
    rng = np.random.default_rng(SEED)
    n_kept = int(keeps(blocks, component, draw_component(blocks, component, DRAWS, rng)).sum())
    if n_kept < LEAST_KEPT:
        return _step_by_step(blocks, component, rng)
    share = n_kept / DRAWS
    return LogProbability(float(np.log(share)), float(np.sqrt((1 - share) / n_kept)))


@dataclass(frozen=True, slots=True)
class _Coordinate:
    """The one element of a block that matters: a Beta between constants."""

    a: float
    b: float
    lower: float
    upper: float


def _coordinate(
    blocks: Blocks, first: int, last: int, orders: list[tuple[int, int]]
) -> tuple[int, _Coordinate] | None:
    """Return the one bounded element of a block; None where there are several.

    Bounds on the other of two elements, and an order of the two, are bounds on the one.
    """
    bounded = (np.flatnonzero(constrained_elements(blocks)[first:last]) + first).tolist()
    outside = {e for order in orders if not set(order) <= {first, last - 1} for e in order}
    used = [e for e in bounded if e in outside]
    if len(bounded) > 1 and (last - first > 2 or len(used) > 1):
        return None
    e = used[0] if used else bounded[0]
    a = float(blocks.element_prior[e])
    b = float(blocks.element_prior[first:last].sum()) - a
    lower, upper = float(blocks.element_lower[e]), float(blocks.element_upper[e])
    for other in set(bounded) - {e}:
        lower = max(lower, 1.0 - float(blocks.element_upper[other]))
        upper = min(upper, 1.0 - float(blocks.element_lower[other]))
    for above, below in orders:
        if {above, below} == {first, last - 1}:
            lower = max(lower, 0.5) if above == e else lower
            upper = min(upper, 0.5) if below == e else upper
    return e, _Coordinate(a, b, lower, upper)


def _tree(blocks: Blocks, component: Component) -> float | None:
    """Return the probability of independent Betas in an order that is a tree.

    Each element lies below one other at the most (or above one other at the most, turned
    round); the probability is worked out from the leaves up, on a grid.
    """
    orders = _orders_of(blocks, component)
    found = [_coordinate(blocks, first, last, orders) for first, last in component.blocks]
    if any(one is None for one in found):
        return None
    at = dict(one for one in found if one is not None)
    links = [(above, below) for above, below in orders if above in at and below in at]
    if len(links) < sum(1 for order in orders if not _within(component, order)):
        return None
    lowers = [below for _, below in links]
    if len(set(lowers)) == len(lowers):
        return _mass(at, links)
    uppers = [above for above, _ in links]
    if len(set(uppers)) == len(uppers):
        turned = {e: _Coordinate(c.b, c.a, 1 - c.upper, 1 - c.lower) for e, c in at.items()}
        return _mass(turned, [(below, above) for above, below in links])
    return None


def _within(component: Component, order: tuple[int, int]) -> bool:
    return any(first <= min(order) and max(order) < last for first, last in component.blocks)


def _mass(at: dict[int, _Coordinate], links: list[tuple[int, int]]) -> float | None:
    """Return the probability of a tree: every element lies below one other at the most."""
    tops = [e for e in at if e not in {below for _, below in links}]
    if len(tops) != 1:
        return None
    if not links:
        return _between(at[tops[0]])
    grid = np.linspace(0.0, 1.0, GRID + 1)

    def up_to(e: int) -> Floats:
        """Probability that an element and all under it lie below each end of the grid's cells."""
        coordinate = at[e]
        ends = np.clip(grid, coordinate.lower, coordinate.upper)
        masses = np.diff(betainc(coordinate.a, coordinate.b, ends))
        for above, below in links:
            if above == e:
                total = up_to(below)
                masses = masses * (total[1:] + total[:-1]) / 2
        return np.concatenate([[0.0], np.cumsum(masses)])

    return float(up_to(tops[0])[-1])


def _between(coordinate: _Coordinate) -> float:
    a, b, low, high = coordinate.a, coordinate.b, coordinate.lower, coordinate.upper
    if betainc(a, b, low) > 0.5:
        return float(betaincc(a, b, low) - betaincc(a, b, high))
    return float(betainc(a, b, high) - betainc(a, b, low))


def _exchangeable(blocks: Blocks, component: Component) -> float | None:
    """Return the probability of a partial order of elements that are alike, one a block."""
    elements, n_blocks = component.elements, len(component.blocks)
    if np.any(blocks.element_lower[elements] > 0) or np.any(blocks.element_upper[elements] < 1):
        return None
    orders = _orders_of(blocks, component)
    used = sorted({e for order in orders for e in order})
    block = np.searchsorted(blocks.block_start, used, side="right")
    if len(used) > MOST_ORDERED or np.unique(block).size != len(used) != n_blocks:
        return None
    first = [blocks.block_start[b - 1] for b in block]
    last = [blocks.block_start[b] for b in block]
    kinds = {
        (float(blocks.element_prior[e]), float(blocks.element_prior[i:j].sum()))
        for e, i, j in zip(used, first, last, strict=True)
    }
    if len(kinds) > 1:
        return None
    below = {at: {used.index(b) for a, b in orders if a == e} for at, e in enumerate(used)}
    return _linear_extensions(below) / float(np.prod(np.arange(1.0, len(used) + 1)))


def _linear_extensions(below: dict[int, set[int]]) -> int:
    """Count the total orders that keep a partial one: subsets that can come first."""
    n = len(below)
    masks = [sum(1 << b for b in below[at]) for at in range(n)]
    ways = [0] * (1 << n)
    ways[0] = 1
    for taken in range(1 << n):
        if ways[taken]:
            for at in range(n):
                if not taken >> at & 1 and masks[at] & taken == masks[at]:
                    ways[taken | 1 << at] += ways[taken]
    return ways[-1]


def _orders_of(blocks: Blocks, component: Component) -> list[tuple[int, int]]:
    inside = set(component.elements.tolist())
    pairs = zip(blocks.order_above.tolist(), blocks.order_below.tolist(), strict=True)
    return [pair for pair in pairs if pair[0] in inside]


def _step_by_step(blocks: Blocks, component: Component, rng: np.random.Generator) -> LogProbability:
    """Multiply the probabilities of each bound given the ones before it."""
    elements = component.elements
    orders = _orders_of(blocks, component)
    bounds = [
        int(e) for e in elements if blocks.element_lower[e] > 0 or blocks.element_upper[e] < 1
    ]
    size = blocks.element_prior.size
    lower, upper = np.zeros(size), np.ones(size)
    kept: list[tuple[int, int]] = []
    value, variance = 0.0, 0.0
    steps: list[int | tuple[int, int]] = [*bounds, *orders]
    for step in steps:
        now = _partial(blocks, lower, upper, kept)
        if isinstance(step, tuple):
            kept.append(step)
        else:
            lower[step], upper[step] = blocks.element_lower[step], blocks.element_upper[step]
        share, error = _share_kept(now, _partial(blocks, lower, upper, kept), component, rng)
        value += float(np.log(share))
        variance += (error / share) ** 2
    return LogProbability(value, float(np.sqrt(variance)))


def _partial(
    blocks: Blocks, lower: Floats, upper: Floats, orders: list[tuple[int, int]]
) -> BlockArrays:
    pairs = np.asarray(orders, dtype=np.int64).reshape(-1, 2)
    return BlockArrays(
        blocks.block_start,
        blocks.element_prior,
        lower.copy(),
        upper.copy(),
        pairs[:, 0].copy(),
        pairs[:, 1].copy(),
    )


def _share_kept(
    now: BlockArrays, then: BlockArrays, component: Component, rng: np.random.Generator
) -> tuple[float, float]:
    """Return the share of draws under some bounds that keep one more, with its error."""
    walk = Walk(now, component, WALKERS, rng)
    for _ in range(BURN_IN // 4):
        walk.sweep()
    kept = np.zeros(WALKERS)
    for _ in range(SWEEPS):
        walk.sweep()
        kept += keeps(then, component, walk.state)
    shares = kept / SWEEPS
    mean = float(max(shares.mean(), 0.5 / (WALKERS * SWEEPS)))
    return mean, float(shares.std(ddof=1) / np.sqrt(WALKERS))
