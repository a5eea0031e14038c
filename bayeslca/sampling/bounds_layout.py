"""Bounds and orders, arranged for the kernel: of the table's blocks and of the prevalences'."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.blocks import BlockArrays, Blocks, constrained_elements
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.prevalence import PrevalenceSource


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


class Shares(NamedTuple):
    """Constrained prevalences, each a share of an element of a block; made by `shares`.

    Attributes
    ----------
    element : ndarray of int64, shape (groups, K) or (0, K)
        -1 where a prevalence is known; (0, K) when prevalences are not constrained.
    share : ndarray of float64, shape (groups, K) or (0, K)
    first : ndarray of int64, shape (E, 2)
        Group and class of the first prevalence that each element makes.
    prior : ndarray of float64, shape (E,)
    block_start : ndarray of int64, shape (B + 1,)
    bounds : Bounded
    """

    element: Ints
    share: Floats
    first: Ints
    prior: Floats
    block_start: Ints
    bounds: Bounded


def shares(source: PrevalenceSource | None, n_classes: int) -> Shares:
    """Arrange the prevalences of a source; nothing is constrained unless it says so."""
    if not isinstance(source, ConstrainedPrevalence):
        none, nothing = np.zeros(0), np.zeros(0, dtype=np.int64)
        empty = BlockArrays(np.zeros(1, dtype=np.int64), none, none, none, nothing, nothing)
        return Shares(
            element=np.zeros((0, n_classes), dtype=np.int64),
            share=np.zeros((0, n_classes)),
            first=np.zeros((0, 2), dtype=np.int64),
            prior=none,
            block_start=empty.block_start,
            bounds=bounded(empty),
        )
    return Shares(
        element=np.ascontiguousarray(source.element, dtype=np.int64),
        share=np.ascontiguousarray(source.share, dtype=np.float64),
        first=np.ascontiguousarray(source.first_place, dtype=np.int64),
        prior=np.ascontiguousarray(source.blocks.element_prior, dtype=np.float64),
        block_start=np.ascontiguousarray(source.blocks.block_start, dtype=np.int64),
        bounds=bounded(source.blocks),
    )
