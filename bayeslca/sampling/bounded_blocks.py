"""Draws of blocks whose elements are bounded or ordered: two elements of a block at a time.

Given all other elements, the share of one in the sum of two is a Beta, cut off where a bound or
another block's value says. Elements of such a block that nothing bounds are redrawn together.
Numba code: import inside functions.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.blocks import Blocks, constrained_elements
from bayeslca.sampling.compiled import compiled_part
from bayeslca.sampling.truncated import truncated_beta

SMALLEST = 1e-300
"""No drawn probability is smaller: its logarithm stays finite."""


class Bounded(NamedTuple):
    """The bounded blocks of a table or of the prevalences; made by `bounded`.

    Attributes
    ----------
    block : ndarray of int64, shape (n, 3)
        First element, first element that nothing bounds, and end of each bounded block in
        ``member``.
    member : ndarray of int64
        Elements of the bounded blocks, those with a bound or an order first.
    lower, upper : ndarray of float64, shape (E,)
    over_start : ndarray of int64, shape (E + 1,)
    over : ndarray of int64
        Elements that lie above element e are over[over_start[e]:over_start[e + 1]].
    under_start, under : ndarray of int64
        Likewise those that lie below.
    free_block : ndarray of int64, shape (m,)
        The blocks without bounds.
    """

    block: Ints
    member: Ints
    lower: Floats
    upper: Floats
    over_start: Ints
    over: Ints
    under_start: Ints
    under: Ints
    free_block: Ints


def bounded(blocks: Blocks) -> Bounded:
    """Arrange the bounds and orders of blocks for the kernel."""
    constrained = constrained_elements(blocks)
    start = blocks.block_start
    block: list[tuple[int, int, int]] = []
    member: list[int] = []
    free: list[int] = []
    for b in range(start.size - 1):
        elements = np.arange(start[b], start[b + 1])
        touched = constrained[elements]
        if not touched.any():
            free.append(b)
            continue
        first = len(member)
        member += [*elements[touched].tolist(), *elements[~touched].tolist()]
        block.append((first, first + int(touched.sum()), len(member)))
    over_start, over = _lists(blocks.order_below, blocks.order_above, constrained.size)
    under_start, under = _lists(blocks.order_above, blocks.order_below, constrained.size)
    return Bounded(
        block=np.asarray(block, dtype=np.int64).reshape(-1, 3),
        member=np.asarray(member, dtype=np.int64),
        lower=np.ascontiguousarray(blocks.element_lower, dtype=np.float64),
        upper=np.ascontiguousarray(blocks.element_upper, dtype=np.float64),
        over_start=over_start,
        over=over,
        under_start=under_start,
        under=under,
        free_block=np.asarray(free, dtype=np.int64),
    )


def _lists(keys: Ints, values: Ints, size: int) -> tuple[Ints, Ints]:
    """Return for each of ``size`` keys its values, as CSR lists."""
    order = np.argsort(keys, kind="stable")
    counts = np.bincount(keys, minlength=size)
    start = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
    return start, np.ascontiguousarray(values[order], dtype=np.int64)


@compiled_part
def draw_bounded(
    bounds: Bounded, parameter: Floats, elements: Floats, rng: np.random.Generator
) -> None:
    """Redraw the bounded blocks in place; ``elements`` lie inside the bounds before and after.

    Parameters
    ----------
    bounds : Bounded
    parameter : ndarray, shape (E,)
        Dirichlet parameter plus count of every element.
    elements : ndarray, shape (E,)
    rng : numpy.random.Generator
    """
    for b in range(bounds.block.shape[0]):
        first, free, end = bounds.block[b, 0], bounds.block[b, 1], bounds.block[b, 2]
        for i in range(first, free):
            for j in range(i + 1, end):
                r, s = bounds.member[i], bounds.member[j]
                total = 1.0 if end - first == 2 else elements[r] + elements[s]
                _redraw_pair(bounds, parameter, elements, r, s, total, rng)
        if end - free > 1:
            _redraw_free(bounds.member[free:end], parameter, elements, rng)
        if end - first > 2:
            _restore_sum(bounds.member[first:end], elements)


@compiled_part
def _redraw_pair(
    bounds: Bounded,
    parameter: Floats,
    elements: Floats,
    r: int,
    s: int,
    total: float,
    rng: np.random.Generator,
) -> None:
    """Redraw two elements of a block, their sum kept."""
    lower = max(bounds.lower[r], total - bounds.upper[s])
    upper = min(bounds.upper[r], total - bounds.lower[s])
    for i in range(bounds.under_start[r], bounds.under_start[r + 1]):
        e = bounds.under[i]
        lower = max(lower, 0.5 * total if e == s else elements[e])
    for i in range(bounds.over_start[r], bounds.over_start[r + 1]):
        e = bounds.over[i]
        upper = min(upper, 0.5 * total if e == s else elements[e])
    for i in range(bounds.under_start[s], bounds.under_start[s + 1]):
        e = bounds.under[i]
        if e != r:
            upper = min(upper, total - elements[e])
    for i in range(bounds.over_start[s], bounds.over_start[s + 1]):
        e = bounds.over[i]
        if e != r:
            lower = max(lower, total - elements[e])
    low, high = max(lower / total, 0.0), min(upper / total, 1.0)
    share = truncated_beta(parameter[r], parameter[s], low, high, rng)
    elements[r] = max(share * total, SMALLEST)
    elements[s] = max(total - elements[r], SMALLEST)


@compiled_part
def _redraw_free(
    members: Ints, parameter: Floats, elements: Floats, rng: np.random.Generator
) -> None:
    """Redraw the elements that nothing bounds, their sum kept."""
    total, gammas = 0.0, 0.0
    for e in members:
        total += elements[e]
        elements[e] = max(rng.standard_gamma(parameter[e]), SMALLEST)
        gammas += elements[e]
    for e in members:
        elements[e] = max(elements[e] / gammas * total, SMALLEST)


@compiled_part
def _restore_sum(members: Ints, elements: Floats) -> None:
    """Divide by the sum, from which rounding would let a long run drift away."""
    total = 0.0
    for e in members:
        total += elements[e]
    for e in members:
        elements[e] /= total


@compiled_part
def keeps_bounds(bounds: Bounded, elements: Floats) -> bool:
    """Tell whether elements keep all bounds and orders."""
    for e in range(bounds.lower.shape[0]):
        if elements[e] < bounds.lower[e] or elements[e] > bounds.upper[e]:
            return False
        for i in range(bounds.under_start[e], bounds.under_start[e + 1]):
            if elements[e] < elements[bounds.under[i]]:
                return False
    return True
