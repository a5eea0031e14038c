"""Blocks of elements with bounds and orders, whatever they are used for.

Response probabilities (a `bayeslca.model.table.Table`) and constrained prevalences hold the same
six arrays, and what can be said of blocks alone is said here once.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from scipy.special import gammaln, xlogy

from bayeslca._typing import Bools, Floats, Ints

ROUNDING = 1e-12
"""An element may lie so far beyond a bound: sums of elements are rounded."""


class Blocks(Protocol):
    """Arrays of blocks; see `bayeslca.model.table.Table` for their meaning."""

    def __hash__(self) -> int:
        """Blocks are told apart as objects, not by their values."""
        ...

    @property
    def block_start(self) -> Ints:
        """Where each block starts, shape (B + 1,)."""
        ...

    @property
    def element_prior(self) -> Floats:
        """Dirichlet parameters, shape (E,)."""
        ...

    @property
    def element_lower(self) -> Floats:
        """Constant lower bounds, shape (E,)."""
        ...

    @property
    def element_upper(self) -> Floats:
        """Constant upper bounds, shape (E,)."""
        ...

    @property
    def order_above(self) -> Ints:
        """Elements that lie above those of ``order_below``."""
        ...

    @property
    def order_below(self) -> Ints:
        """Elements that lie below those of ``order_above``."""
        ...


@dataclass(frozen=True, eq=False)
class BlockArrays:
    """Blocks that belong to no table."""

    block_start: Ints
    element_prior: Floats
    element_lower: Floats
    element_upper: Floats
    order_above: Ints
    order_below: Ints

    @classmethod
    def of(cls, blocks: Blocks) -> BlockArrays:
        """Return the arrays of any blocks."""
        return cls(
            blocks.block_start,
            blocks.element_prior,
            blocks.element_lower,
            blocks.element_upper,
            blocks.order_above,
            blocks.order_below,
        )

    @classmethod
    def without_bounds(cls, blocks: Blocks, prior: float) -> BlockArrays:
        """Return the blocks with one Dirichlet parameter throughout and no bounds."""
        n_elements = blocks.element_prior.size
        none = np.zeros(0, dtype=np.int64)
        return cls(
            blocks.block_start,
            np.full(n_elements, prior),
            np.zeros(n_elements),
            np.ones(n_elements),
            none,
            none,
        )

    def with_prior(self, prior: Floats) -> BlockArrays:
        """Return the same blocks with other Dirichlet parameters."""
        return replace(self, element_prior=prior)


def constrained_elements(blocks: Blocks) -> Bools:
    """Tell which elements (E,) have a bound or an order."""
    out = (blocks.element_lower > 0.0) | (blocks.element_upper < 1.0)
    out[blocks.order_above] = True
    out[blocks.order_below] = True
    return np.asarray(out)


def inside_blocks(blocks: Blocks, elements: Floats) -> Bools:
    """Tell which draws (...) of elements (..., E) keep all bounds and orders."""
    kept = elements >= blocks.element_lower - ROUNDING
    kept &= elements <= blocks.element_upper + ROUNDING
    above, below = elements[..., blocks.order_above], elements[..., blocks.order_below]
    return np.asarray(kept.all(axis=-1) & (above >= below - ROUNDING).all(axis=-1))


def log_block_densities(blocks: Blocks, elements: Floats) -> Floats:
    """Return the log density of each block (..., B) under its Dirichlet prior, bounds aside."""
    if blocks.block_start.size <= 1:
        return np.zeros((*elements.shape[:-1], 0))
    a, starts = blocks.element_prior, blocks.block_start[:-1]
    norm = gammaln(np.add.reduceat(a, starts)) - np.add.reduceat(gammaln(a), starts)
    return np.asarray(norm + np.add.reduceat(xlogy(a - 1.0, elements), starts, axis=-1))
