"""From inequalities to bounds and orders of elements."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import accumulate, pairwise

import numpy as np

from bayeslca.exceptions import ModelError
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.contradictions import contradiction, guilty_statements
from bayeslca.model.inside_point import inside_point
from bayeslca.model.places import Link, Place, Side
from bayeslca.model.ties import Form, Tied


@dataclass(frozen=True, slots=True)
class ElementBound:
    """An element lies above ``lower`` and below ``upper``, by a statement."""

    element: int
    lower: float
    upper: float
    text: str


@dataclass(frozen=True, slots=True)
class ElementOrder:
    """An element lies above another, by a statement."""

    above: int
    below: int
    text: str


@dataclass(frozen=True, slots=True)
class Bounds:
    """All bounds and orders of a set of blocks."""

    bounds: tuple[ElementBound, ...] = ()
    orders: tuple[ElementOrder, ...] = ()


def element_bounds(tied: Tied, links: Sequence[Link]) -> Bounds:
    """Turn inequalities between places into bounds and orders of elements.

    Raises
    ------
    ModelError
        Where an inequality is of what no exact sampler is written for, or where inequalities
        leave only a single value.
    """
    bounds: list[ElementBound] = []
    orders: list[ElementOrder] = []
    for link in links:
        if link.sign == "=":
            continue
        one, two = _form(link.left, tied.forms), _form(link.right, tied.forms)
        if len(one.elements) > 1 or len(two.elements) > 1:
            raise ModelError(_not_exact(link, "one of its answers is only a part of a shared one"))
        if not one.elements and not two.elements:
            continue  # known values: already found to be true
        if not two.elements:
            lower = two.constant / one.constant
            bounds.append(ElementBound(one.elements[0], lower, 1.0, link.text))
        elif not one.elements:
            upper = one.constant / two.constant
            bounds.append(ElementBound(two.elements[0], 0.0, upper, link.text))
        elif one == two:
            continue  # equal and >=: true
        elif one.constant == two.constant:
            orders.append(ElementOrder(one.elements[0], two.elements[0], link.text))
        elif _are_the_block(one, two, tied):  # c x > d (1 - x)
            lower = two.constant / (one.constant + two.constant)
            bounds.append(ElementBound(one.elements[0], lower, 1.0, link.text))
        else:
            reason = "known or equal values leave its two answers different shares of 1"
            raise ModelError(_not_exact(link, reason))
    found = Bounds(tuple(bounds), tuple(orders))
    _refuse_no_room(tied, found)
    return found


def bounded_blocks(blocks: Sequence[tuple[float, ...]], bounds: Bounds) -> BlockArrays:
    """Return blocks with their bounds and orders as arrays."""
    n_elements = sum(len(block) for block in blocks)
    lower, upper = np.zeros(n_elements), np.ones(n_elements)
    for bound in bounds.bounds:
        lower[bound.element] = max(lower[bound.element], bound.lower)
        upper[bound.element] = min(upper[bound.element], bound.upper)
    orders = list(dict.fromkeys((order.above, order.below) for order in bounds.orders))
    pairs = np.asarray(orders, dtype=np.int64).reshape(-1, 2)
    return BlockArrays(
        block_start=np.asarray([0, *accumulate(map(len, blocks))], dtype=np.int64),
        element_prior=np.asarray([a for block in blocks for a in block], dtype=np.float64),
        element_lower=lower,
        element_upper=upper,
        order_above=pairs[:, 0].copy(),
        order_below=pairs[:, 1].copy(),
    )


def _refuse_no_room(tied: Tied, found: Bounds) -> None:
    if not (found.bounds or found.orders):
        return
    if inside_point(bounded_blocks(tied.blocks, found)) is not None:
        return

    def feasible(texts: Sequence[str]) -> bool:
        kept = Bounds(
            tuple(bound for bound in found.bounds if bound.text in texts),
            tuple(order for order in found.orders if order.text in texts),
        )
        return inside_point(bounded_blocks(tied.blocks, kept)) is not None

    stated = [bound.text for bound in found.bounds] + [order.text for order in found.orders]
    texts = guilty_statements(stated, feasible)
    msg = f"{contradiction(texts)} Where only one value is left, write it with '='."
    raise ModelError(msg)


def _are_the_block(one: Form, two: Form, tied: Tied) -> bool:
    """Whether two elements are all of a block."""
    first = min(one.elements[0], two.elements[0])
    starts = [0, *accumulate(map(len, tied.blocks))]
    return abs(one.elements[0] - two.elements[0]) == 1 and any(
        (a, b) == (first, first + 2) for a, b in pairwise(starts)
    )


def _form(side: Side, forms: Mapping[Place, Form]) -> Form:
    return forms[side] if isinstance(side, Place) else Form(side, ())


def _not_exact(link: Link, reason: str) -> str:
    return (
        f"no exact sampler is written for '{link.text}' in this model: {reason}. Leave it out, or "
        "test it as a hypothesis of the posterior."
    )
