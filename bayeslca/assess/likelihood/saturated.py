"""The saturated model: a probability of its own for every response pattern, answers missing or not.

With complete answers its log likelihood is a sum. With missing ones it is found by EM under
missingness at random. No table is enumerated: a case whose answers are missing is a set of cells,
and the likelihood is highest with all probability on the smallest intersections of such sets
(maximal sets of cases whose answers do not contradict each other), one cell in each.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from math import nan

import numpy as np
from scipy.sparse import csr_array
from scipy.special import xlogy

from bayeslca._typing import Floats, Ints
from bayeslca.responses.units import MISSING, Units

MOST_CELLS, MOST_UNITS = 20_000, 10_000
"""Intersections and distinct answers of one group; with more, and answers missing, the saturated
model is not fitted."""
MOST_STEPS = 20_000
CLOSE = 1e-6
"""The log likelihood is known to lie at most so much below the highest when EM ends."""


@dataclass(frozen=True)
class Saturated:
    """The saturated model's log likelihood.

    Attributes
    ----------
    log_likelihood : float
        nan when it was not found; ``reason`` then says why.
    gap : float
        At most so much below the highest possible; 0 with complete answers.
    reason : str
    """

    log_likelihood: float
    gap: float = 0.0
    reason: str = ""


def saturated(units: Units) -> Saturated:
    """Fit the saturated model to units, each group by itself."""
    total, gap = 0.0, 0.0
    for g in np.unique(units.group):
        here = units.group == g
        pattern, count = units.pattern[here], units.count[here].astype(np.float64)
        if not (pattern == MISSING).any():
            total += float(xlogy(count, count / count.sum()).sum())
            continue
        cells = _cells(pattern) if len(pattern) <= MOST_UNITS else None
        if cells is None:
            reason = (
                f"answers are missing, and the saturated model would have more than {MOST_CELLS:,} "
                "cells to fit, or too many distinct answers to find them"
            )
            return Saturated(nan, nan, reason)
        value, left = _fit(cells, count)
        total, gap = total + value, gap + left
    if gap > 1e-3:
        return Saturated(nan, gap, f"EM of the saturated model ended {gap:.2g} below its maximum")
    return Saturated(total, gap)


def _cells(pattern: Ints) -> csr_array | None:
    """Return which units (cell, unit) each cell belongs to; None when there are too many."""
    agree = np.ones((len(pattern),) * 2, dtype=bool)
    for code in pattern.T:
        missing = code == MISSING
        agree &= (code[:, None] == code) | missing[:, None] | missing
    np.fill_diagonal(agree, False)
    neighbours = [sum(1 << int(v) for v in np.flatnonzero(row)) for row in agree]
    rows: list[list[int]] = []
    for members in _maximal_sets(neighbours):
        rows.append(_members(members))
        if len(rows) > MOST_CELLS:
            return None
    start = np.cumsum([0, *map(len, rows)])
    column = np.concatenate([np.asarray(row, dtype=np.int64) for row in rows])
    return csr_array((np.ones(column.size), column, start), shape=(len(rows), len(pattern)))


def _maximal_sets(neighbours: list[int]) -> Iterator[int]:
    """Go through all maximal sets of units that agree pair by pair, as bits (Bron & Kerbosch).

    Answers that agree pair by pair agree all together: items are independent of each other.
    """
    waiting = [(0, (1 << len(neighbours)) - 1, 0)]
    while waiting:
        chosen, may, done = waiting.pop()
        if not may and not done:
            yield chosen
            continue
        most = max((may & neighbours[v]).bit_count() for v in _members(may | done))
        reached = (
            n for v in _members(may | done) if (n := may & neighbours[v]).bit_count() == most
        )
        for v in _members(may & ~next(reached)):
            bit = 1 << v
            waiting.append((chosen | bit, may & neighbours[v], done & neighbours[v]))
            may &= ~bit
            done |= bit


def _members(bits: int) -> list[int]:
    out = []
    while bits:
        low = bits & -bits
        out.append(low.bit_length() - 1)
        bits ^= low
    return out


def _fit(cells: csr_array, count: Floats) -> tuple[float, float]:
    """Return the highest log likelihood, and how much higher it could be at the most.

    The latter from the largest derivative by a cell's share (Lindsay 1983, Annals of Statistics
    11, 86-94): the log likelihood is concave in the shares.
    """
    n, transposed = float(count.sum()), cells.T.tocsr()
    share = np.full(cells.shape[0], 1.0 / cells.shape[0])
    gap = np.inf
    for _ in range(MOST_STEPS):
        probability = transposed @ share
        slope = cells @ (count / probability)
        gap = float(slope.max() - n)
        if gap < CLOSE:
            break
        share *= slope / n
    return float(count @ np.log(transposed @ share)), gap
