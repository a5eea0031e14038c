"""Draws of blocks whose elements are bounded or ordered: two elements of a block at a time.

Given all other elements, the share of one in the sum of two is a Beta, cut off where a bound or
another block's value says. Elements of such a block that nothing bounds are redrawn together.
Numba code: import inside functions.
"""

from __future__ import annotations

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounds_layout import Bounded
from bayeslca.sampling.compiled import compiled_part
from bayeslca.sampling.split import SMALLEST
from bayeslca.sampling.truncated import truncated_beta


@compiled_part
def draw_bounded(
    block: Ints,
    member: Ints,
    lower: Floats,
    upper: Floats,
    over_start: Ints,
    over: Ints,
    under_start: Ints,
    under: Ints,
    parameter: Floats,
    elements: Floats,
    rng: np.random.Generator,
) -> None:
    """Redraw the bounded blocks in place; ``elements`` lie inside the bounds before and after.

    Takes the arrays of a `Bounded` one by one, which is faster than the tuple.

    Parameters
    ----------
    block, member, lower, upper, over_start, over, under_start, under : see `Bounded`
    parameter : ndarray, shape (E,)
        Dirichlet parameter plus count of every element.
    elements : ndarray, shape (E,)
    rng : numpy.random.Generator
    """
    for b in range(block.shape[0]):
        first, free, end = block[b, 0], block[b, 1], block[b, 2]
        for i in range(first, free):
            r = member[i]
            for j in range(i + 1, end):
                s = member[j]
                total = 1.0 if end - first == 2 else elements[r] + elements[s]
                low = max(lower[r], total - upper[s])
                high = min(upper[r], total - lower[s])
                for at in range(under_start[r], under_start[r + 1]):
                    e = under[at]
                    low = max(low, 0.5 * total if e == s else elements[e])
                for at in range(over_start[r], over_start[r + 1]):
                    e = over[at]
                    high = min(high, 0.5 * total if e == s else elements[e])
                for at in range(under_start[s], under_start[s + 1]):
                    if under[at] != r:
                        high = min(high, total - elements[under[at]])
                for at in range(over_start[s], over_start[s + 1]):
                    if over[at] != r:
                        low = max(low, total - elements[over[at]])
                low, high = max(low / total, 0.0), min(high / total, 1.0)
                share = truncated_beta(parameter[r], parameter[s], low, high, rng)
                elements[r] = max(share * total, SMALLEST)
                elements[s] = max(total - elements[r], SMALLEST)
        if end - free > 1:
            _redraw_free(member, free, end, parameter, elements, rng)
        if end - first > 2:
            _restore_sum(member, first, end, elements)


@compiled_part
def _redraw_free(
    member: Ints,
    first: int,
    end: int,
    parameter: Floats,
    elements: Floats,
    rng: np.random.Generator,
) -> None:
    """Redraw the elements that nothing bounds, their sum kept."""
    total, gammas = 0.0, 0.0
    for i in range(first, end):
        e = member[i]
        total += elements[e]
        elements[e] = max(rng.standard_gamma(parameter[e]), SMALLEST)
        gammas += elements[e]
    for i in range(first, end):
        elements[member[i]] = max(elements[member[i]] / gammas * total, SMALLEST)


@compiled_part
def _restore_sum(member: Ints, first: int, end: int, elements: Floats) -> None:
    """Divide by the sum, from which rounding would let a long run drift away."""
    total = 0.0
    for i in range(first, end):
        total += elements[member[i]]
    for i in range(first, end):
        elements[member[i]] /= total


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


@compiled_part
def elements_of_shares(first: Ints, share: Floats, prevalence: Floats, elements: Floats) -> None:
    """Set the elements that make prevalences; see `Shares` for ``first`` and ``share``."""
    for e in range(first.shape[0]):
        g, k = first[e, 0], first[e, 1]
        elements[e] = prevalence[g, k] / share[g, k]
