"""Bounds and orders as chains, for which the best probabilities are found exactly.

Within a block with a single constrained element, the likelihood of that element is a binomial's
whatever the others are. So a chain of such elements, each at most the next, is an isotonic
regression. Anything else (two constrained elements of one block, orders that branch) is refused:
no step that is surely the best is written for it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.blocks import Blocks

TWICE = "two answers of one block are bounded or ordered"
BRANCHES = "the orders around it branch, they are not one chain"
BOTH_WAYS = "the orders run both ways through it"


@dataclass(frozen=True, eq=False)
class OrderChains:
    """Constrained elements, chain by chain, from the lowest to the highest.

    Attributes
    ----------
    start : ndarray of int64, shape (chains + 1,)
    element, block : ndarray of int64
    lower, upper : ndarray of float64
        Bounds, carried along the chain: neither falls.
    """

    start: Ints
    element: Ints
    block: Ints
    lower: Floats
    upper: Floats


def order_chains(blocks: Blocks, names: Sequence[str]) -> OrderChains:
    """Arrange all bounds and orders as chains.

    Parameters
    ----------
    blocks : Blocks
    names : sequence of str
        Of all elements, for the message.

    Raises
    ------
    ModelError
        Where this cannot be done; names the probability.
    """
    work = _Blocks(blocks, names)
    lower, upper = blocks.element_lower.copy(), blocks.element_upper.copy()
    orders = []
    pairs = zip(blocks.order_above.tolist(), blocks.order_below.tolist(), strict=True)
    for above, below in pairs:
        if work.other(above) == below:
            lower[above] = max(lower[above], 0.5)  # above the only other one: above a half
        else:
            orders.append((above, below))
    chosen = work.choose(orders)
    for e in np.flatnonzero((lower > 0.0) | (upper < 1.0)).tolist():
        if chosen.setdefault(work.block[e], e) != e:
            other = work.other(e)
            if other is None:
                raise work.refusal(e, TWICE)
            lower[other] = max(lower[other], 1.0 - upper[e])
            upper[other] = min(upper[other], 1.0 - lower[e])
    below_of: dict[int, set[int]] = {e: set() for e in chosen.values()}
    for above, below in orders:
        if chosen[work.block[above]] == above:
            below_of[above].add(below)
        else:  # both in binary blocks: what the others do is the same
            low, high = work.other(above), work.other(below)
            assert low is not None
            assert high is not None
            below_of[high].add(low)
    return _along(work, below_of, lower, upper)


class _Blocks:
    """What must be looked up of the blocks."""

    def __init__(self, blocks: Blocks, names: Sequence[str]) -> None:
        sizes = np.diff(blocks.block_start)
        self.block: list[int] = np.repeat(np.arange(sizes.size), sizes).tolist()
        self._start: list[int] = blocks.block_start.tolist()
        self._names = names

    def other(self, element: int) -> int | None:
        """Return the only other element of the block; None when there are more."""
        b = self.block[element]
        first, last = self._start[b], self._start[b + 1]
        return first + last - 1 - element if last - first == 2 else None

    def refusal(self, element: int, reason: str) -> ModelError:
        return ModelError(
            f"maximum likelihood is not written for the constraints on {self._names[element]}: "
            f"{reason}. Leave some of them out, or sample the posterior, which takes them all."
        )

    def choose(self, orders: Sequence[tuple[int, int]]) -> dict[int, int]:
        """Choose one element of every ordered block, so that all orders are between chosen ones.

        In binary blocks the other two elements stand in the opposite order, and may be chosen.
        """
        beside: dict[int, list[tuple[int, int]]] = {}
        for one, two in orders:
            beside.setdefault(self.block[one], []).append((one, two))
            beside.setdefault(self.block[two], []).append((two, one))
        chosen: dict[int, int] = {}
        for first, ((element, _), *_rest) in beside.items():
            if first in chosen:
                continue
            chosen[first] = element
            waiting = [first]
            while waiting:
                at = waiting.pop()
                for mine, theirs in beside[at]:
                    wanted = theirs if mine == chosen[at] else self._turned(mine, theirs)
                    there = self.block[theirs]
                    if there not in chosen:
                        chosen[there] = wanted
                        waiting.append(there)
                    elif chosen[there] != wanted:
                        binary = self.other(theirs) is not None
                        raise self.refusal(theirs, BOTH_WAYS if binary else TWICE)
        return chosen

    def _turned(self, mine: int, theirs: int) -> int:
        other = self.other(theirs)
        if self.other(mine) is None or other is None:
            raise self.refusal(mine, TWICE)
        return other


def _along(
    work: _Blocks, below_of: dict[int, set[int]], lower: Floats, upper: Floats
) -> OrderChains:
    """Put elements in the order of their chains, and carry bounds along these."""
    under = {e: _reached(e, below_of) for e in below_of}
    beside: dict[int, set[int]] = {e: set(found) for e, found in under.items()}
    for e, found in under.items():
        for lower_one in found:
            beside[lower_one].add(e)
    start, element = [0], list[int]()
    for e in below_of:
        if e in element:
            continue
        chain = sorted(_reached(e, beside) | {e}, key=lambda one: len(under[one]))
        for at, one in enumerate(chain):
            if len(under[one]) != at:
                raise work.refusal(one, BRANCHES)
        element += chain
        start.append(len(element))
    order = np.asarray(element, dtype=np.int64)
    low, high = lower[order], upper[order]
    for first, last in pairwise(start):
        low[first:last] = np.maximum.accumulate(low[first:last])
        high[first:last] = np.minimum.accumulate(high[first:last][::-1])[::-1]
    return OrderChains(
        start=np.asarray(start, dtype=np.int64),
        element=order,
        block=np.asarray([work.block[e] for e in element], dtype=np.int64),
        lower=low,
        upper=high,
    )


def _reached(start: int, beside: dict[int, set[int]]) -> set[int]:
    found: set[int] = set()
    waiting = list(beside[start])
    while waiting:
        at = waiting.pop()
        if at not in found:
            found.add(at)
            waiting.extend(beside[at])
    return found - {start}
