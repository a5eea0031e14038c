"""Draws of blocks from their prior under bounds and orders.

Blocks without bounds are drawn as they are. Blocks that bounds tie together are drawn by
rejection where the bounds are likely enough, which is exact, and else by a Gibbs sampler that
redraws two elements of a block at a time from a Beta cut off at the bounds. Never by sorting.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from scipy.special import betainc, betaincc, betainccinv, betaincinv

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.blocks import Blocks, constrained_elements
from bayeslca.model.inside_point import inside_point

BATCH = 2_000
MOST_TRIES = 20_000
"""Draws that are tried before rejection is given up for Gibbs."""
WALKERS = 64
BURN_IN = 200
APART = 5
"""Gibbs: chains that run side by side, sweeps before the first draw, sweeps between draws."""


@dataclass(frozen=True, eq=False)
class Component:
    """Blocks that bounds tie together.

    Attributes
    ----------
    blocks : tuple of (int, int)
        First and last element (exclusive) of each block.
    """

    blocks: tuple[tuple[int, int], ...]

    @property
    def elements(self) -> Ints:
        """All elements of the blocks."""
        return np.concatenate([np.arange(first, last) for first, last in self.blocks])


def components(blocks: Blocks) -> list[Component]:
    """Return the sets of bounded blocks that orders tie together."""
    start = blocks.block_start
    block = np.repeat(np.arange(start.size - 1), np.diff(start))
    group = {int(b): {int(b)} for b in np.unique(block[constrained_elements(blocks)])}
    for a, b in zip(blocks.order_above, blocks.order_below, strict=True):
        joined = group[int(block[a])] | group[int(block[b])]
        group |= dict.fromkeys(joined, joined)
    found = {min(members): sorted(members) for members in group.values()}
    return [
        Component(tuple((int(start[b]), int(start[b + 1])) for b in members))
        for _, members in sorted(found.items())
    ]


def draw_inside(blocks: Blocks, n: int, rng: np.random.Generator) -> Floats:
    """Draw elements (n, E) from the prior under all bounds and orders.

    Raises
    ------
    ModelError
        When the prior gives the bounds practically no probability.
    """
    out = draw_free(blocks, n, rng)
    for component in components(blocks):
        elements = component.elements
        found = _by_rejection(blocks, component, n, rng)
        if found is None:
            found = by_gibbs(blocks, component, n, rng)
        out[:, elements] = found
    return out


def draw_free(blocks: Blocks, n: int, rng: np.random.Generator) -> Floats:
    """Draw elements (n, E) from the Dirichlet priors, bounds aside."""
    gammas = rng.standard_gamma(blocks.element_prior, size=(n, blocks.element_prior.size))
    gammas = np.maximum(gammas, np.finfo(np.float64).tiny)
    start = blocks.block_start
    if start.size <= 1:
        return gammas
    sums = np.add.reduceat(gammas, start[:-1], axis=-1)
    return np.asarray(gammas / np.repeat(sums, np.diff(start), axis=-1))


def draw_component(
    blocks: Blocks, component: Component, n: int, rng: np.random.Generator
) -> Floats:
    """Draw all elements (n, E), those of one component from their prior, the others even."""
    out = np.full((n, blocks.element_prior.size), 0.5)
    for first, last in component.blocks:
        gammas = rng.standard_gamma(blocks.element_prior[first:last], size=(n, last - first))
        gammas = np.maximum(gammas, np.finfo(np.float64).tiny)
        out[:, first:last] = gammas / gammas.sum(axis=1, keepdims=True)
    return out


def keeps(blocks: Blocks, component: Component, elements: Floats) -> np.ndarray:
    """Tell which draws (n,) keep the bounds on one component."""
    inside = np.zeros(blocks.element_prior.size, dtype=bool)
    inside[component.elements] = True
    kept = (elements >= blocks.element_lower) & (elements <= blocks.element_upper)
    ours = inside[blocks.order_above]
    above, below = blocks.order_above[ours], blocks.order_below[ours]
    return np.asarray(
        kept[:, inside].all(axis=1) & (elements[:, above] > elements[:, below]).all(axis=1)
    )


def _by_rejection(
    blocks: Blocks, component: Component, n: int, rng: np.random.Generator
) -> Floats | None:
    """Return draws (n, elements of the component), or None where too few are kept."""
    found: list[Floats] = []
    n_found = tried = 0
    while n_found < n:
        if tried >= MOST_TRIES and n_found * 20 < min(n, tried // 20):
            return None
        draws = draw_component(blocks, component, BATCH, rng)
        kept = draws[keeps(blocks, component, draws)][:, component.elements]
        found.append(kept)
        n_found += len(kept)
        tried += BATCH
    return np.concatenate(found)[:n]


def by_gibbs(blocks: Blocks, component: Component, n: int, rng: np.random.Generator) -> Floats:
    """Return draws (n, elements of the component) of chains that began inside the bounds."""
    walk = Walk(blocks, component, min(n, WALKERS), rng)
    for _ in range(BURN_IN):
        walk.sweep()
    found = []
    for _ in range(-(-n // walk.state.shape[0])):
        for _ in range(APART):
            walk.sweep()
        found.append(walk.state[:, component.elements])
    return np.concatenate(found)[:n]


class Walk:
    """Gibbs chains side by side on the blocks of one component, all inside its bounds."""

    def __init__(
        self, blocks: Blocks, component: Component, n: int, rng: np.random.Generator
    ) -> None:
        self.blocks = blocks
        self.component = component
        self.rng = rng
        point = interior_point(blocks)
        self.state = np.tile(point, (n, 1))
        pairs = zip(blocks.order_above.tolist(), blocks.order_below.tolist(), strict=True)
        self._above: dict[int, list[int]] = {}
        self._below: dict[int, list[int]] = {}
        for above, below in pairs:
            self._above.setdefault(below, []).append(above)
            self._below.setdefault(above, []).append(below)

    def sweep(self) -> None:
        """Redraw every pair of elements of every block."""
        for r, s in self._pairs():
            self._redraw(r, s)
        for first, last in self.component.blocks:
            block = self.state[:, first:last]
            block /= block.sum(axis=1, keepdims=True)

    def _pairs(self) -> Iterator[tuple[int, int]]:
        for first, last in self.component.blocks:
            yield from combinations(range(first, last), 2)

    def _redraw(self, r: int, s: int) -> None:
        x = self.state
        total = x[:, r] + x[:, s]
        lower_r, upper_r = self._limits(r, s, total)
        lower_s, upper_s = self._limits(s, r, total)
        lower = np.maximum(lower_r, total - upper_s) / total
        upper = np.minimum(upper_r, total - lower_s) / total
        a = self.blocks.element_prior
        share = truncated_beta(a[r], a[s], lower, upper, self.rng)
        x[:, r] = share * total
        x[:, s] = total - x[:, r]

    def _limits(self, e: int, partner: int, total: Floats) -> tuple[Floats, Floats]:
        """Return the limits of an element, other blocks and the partner's share considered."""
        lower = np.full(total.shape, self.blocks.element_lower[e])
        upper = np.full(total.shape, self.blocks.element_upper[e])
        for below in self._below.get(e, ()):
            limit = total / 2 if below == partner else self.state[:, below]
            lower = np.maximum(lower, limit)
        for above in self._above.get(e, ()):
            limit = total / 2 if above == partner else self.state[:, above]
            upper = np.minimum(upper, limit)
        return lower, upper


def interior_point(blocks: Blocks) -> Floats:
    """Return elements (E,) well inside all bounds.

    Raises
    ------
    ModelError
        When the bounds leave no room.
    """
    point = inside_point(blocks)
    if point is None:
        msg = "the model's bounds leave no room for any probability. Leave some of them out."
        raise ModelError(msg)
    return point


def truncated_beta(
    a: float, b: float, lower: Floats, upper: Floats, rng: np.random.Generator
) -> Floats:
    """Draw Beta(a, b) variates between bounds, by inversion from the lighter tail."""
    lower, upper = np.clip(lower, 0.0, 1.0), np.clip(upper, 0.0, 1.0)
    u = rng.random(lower.shape)
    if a == 1.0 and b == 1.0:
        return np.asarray(lower + u * (upper - lower))
    low, high = betainc(a, b, lower), betainc(a, b, upper)
    low_c, high_c = betaincc(a, b, lower), betaincc(a, b, upper)
    from_above = low > 0.5  # where the lower tail is nearly 1, differences of it are lost
    mass = np.where(from_above, low_c - high_c, high - low)
    if np.any((mass <= 0.0) & (upper > lower)):
        msg = (
            "the prior gives the model's bounds practically no probability. State priors that "
            "agree with the bounds."
        )
        raise ModelError(msg)
    by_lower = betaincinv(a, b, low + u * (high - low))
    by_upper = betainccinv(a, b, high_c + u * (low_c - high_c))
    return np.asarray(np.clip(np.where(from_above, by_upper, by_lower), lower, upper))
