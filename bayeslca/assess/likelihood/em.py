"""EM on units: expected classes given parameters, best parameters given expected classes.

The expected count of a row that is a sum of cells is split over its cells in proportion to their
probabilities, as the Gibbs sweep splits whole counts, and blocks are set to their shares of the
counts. A block with one bounded or ordered element is set exactly too: given that element the
others are free, so that the constrained elements alone are an isotonic regression within bounds,
which pooling adjacent violators solves. Every step therefore climbs.

Functions that loop over units take arrays, not the layout: see `compiled_inline`. Numba code:
import inside functions.

References
----------
Dempster, A. P., Laird, N. M. & Rubin, D. B. (1977). Journal of the Royal Statistical Society B
39, 1-38. Barlow, R. E., Bartholomew, D. J., Bremner, J. M. & Brunk, H. D. (1972). Statistical
inference under order restrictions, Wiley (pooling).
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.em_layout import EmLayout
from bayeslca.sampling.compiled import compiled, compiled_inline, compiled_part

TOO_SMALL = 1e-200
"""A unit whose product of probabilities is below this is done again in logs."""
NO_CASES = 1e-30
"""Weight in pooling of a block without cases: it follows the others."""
ROUNDING = 1e-14
"""A gain below this share of the log likelihood is rounding: the run has ended."""


class EmWork(NamedTuple):
    """Scratch arrays of one run, and what a step leaves in them. Made by `work_for`.

    Attributes
    ----------
    rows, row_counts : ndarray, shape (R, K)
        P(row | class), and expected count.
    shares : ndarray, shape (U, K)
        P(class | unit).
    prevalence, class_counts : ndarray, shape (G, K)
        And expected cases.
    counts : ndarray, shape (E,)
        Expected count of every element; after `maximise`, its new value.
    best : ndarray, shape (chain elements,)
    pools : ndarray, shape (5, chain elements)
        Of every pool: sum, weight, lower and upper bound, length.
    """

    rows: Floats
    row_counts: Floats
    shares: Floats
    prevalence: Floats
    class_counts: Floats
    counts: Floats
    best: Floats
    pools: Floats


@compiled
def work_for(layout: EmLayout) -> EmWork:
    """Return the scratch arrays of one run."""
    n_rows, n_classes = layout.direct_element.shape
    return EmWork(
        np.zeros((n_rows, n_classes)),
        np.zeros((n_rows, n_classes)),
        np.zeros((layout.cases.size, n_classes)),
        np.zeros(layout.prevalence_element.shape),
        np.zeros(layout.prevalence_element.shape),
        np.zeros(layout.block_start[-1]),
        np.zeros(layout.chain_element.size),
        np.zeros((5, layout.chain_element.size)),
    )


@compiled
def climb(
    layout: EmLayout, elements: Floats, most: int, tolerance: float, trace: Floats
) -> tuple[float, int]:
    """Climb from a starting point to a maximum of the likelihood, in place.

    Parameters
    ----------
    layout : EmLayout
    elements : ndarray of float64, shape (E,)
        The starting point; replaced by the maximum.
    most : int
        Steps at the most.
    tolerance : float
        Ends when what is left to gain, extrapolated (Aitken), is below this many nats.
    trace : ndarray of float64
        Filled with the log likelihood before each step, as far as it reaches.

    Returns
    -------
    float
        Log likelihood; -inf when a unit is impossible.
    int
        Steps taken; ``most`` when the run did not end by itself.
    """
    work = work_for(layout)
    last, last_gain = -np.inf, np.inf
    for step in range(most):
        value = expect(layout, work, elements)
        if step < trace.size:
            trace[step] = value
        gain = value - last
        if value == -np.inf or gain <= ROUNDING * (1.0 + abs(value)):
            return value, step
        if step > 1 and gain < tolerance and gain < last_gain:
            ratio = gain / last_gain
            if gain * ratio / (1.0 - ratio) < tolerance:
                return value, step
        last, last_gain = value, gain
        add_up(layout, work, elements)
        maximise(layout, work, elements)
    return expect(layout, work, elements), most


@compiled
def climb_all(layout: EmLayout, points: Floats, most: int, tolerance: float, found: Floats) -> None:
    """Climb from several starting points (n, E), in place; fill ``found`` (n,)."""
    trace = np.empty(0)
    for i in range(points.shape[0]):
        found[i], _ = climb(layout, points[i], most, tolerance, trace)


@compiled_inline
def expect(layout: EmLayout, work: EmWork, elements: Floats) -> float:
    """Fill P(row | class) and P(class | unit); return the log likelihood."""
    rows, prevalence = work.rows, work.prevalence
    n_classes = layout.direct_element.shape[1]
    for r in range(layout.direct_element.shape[0]):
        for k in range(n_classes):
            if layout.direct_element[r, k] >= 0:
                rows[r, k] = elements[layout.direct_element[r, k]]
    for i in range(layout.general.shape[0]):
        r, k = layout.general[i, 0], layout.general[i, 1]
        rows[r, k] = 0.0
        first = layout.cell_start[r * n_classes + k]
        for c in range(first, layout.cell_start[r * n_classes + k + 1]):
            rows[r, k] += _cell(layout, c, elements)
    for g in range(prevalence.shape[0]):
        for k in range(n_classes):
            prevalence[g, k] = layout.prevalence_share[g, k]
            if layout.prevalence_element[g, k] >= 0:
                prevalence[g, k] *= elements[layout.prevalence_element[g, k]]
    log_likelihood = _shares(
        layout.unit_start,
        layout.unit_row,
        layout.cases,
        layout.prevalence_row,
        layout.log_weight,
        rows,
        prevalence,
        work.shares,
    )
    return log_likelihood


@compiled_part
def _shares(
    unit_start: Ints,
    unit_row: Ints,
    count: Floats,
    prevalence_row: Ints,
    log_weight: Floats,
    rows: Floats,
    prevalence: Floats,
    shares: Floats,
) -> float:
    """Fill P(class | unit) by products, in logs where these are too small."""
    n_classes = prevalence.shape[1]
    weighted = log_weight.shape[0] > 0
    log_likelihood = 0.0
    for u in range(count.size):
        g = prevalence_row[u]
        total = 0.0
        for k in range(n_classes):
            product = prevalence[g, k]
            for i in range(unit_start[u], unit_start[u + 1]):
                product *= rows[unit_row[i], k]
            shares[u, k] = product
            total += product
        if total < TOO_SMALL or weighted:
            log_p = _by_logs(unit_start, unit_row, log_weight, rows, prevalence[g], u, shares)
            if log_p == -np.inf:
                return log_p
            log_likelihood += count[u] * log_p
            continue
        log_likelihood += count[u] * math.log(total)
        for k in range(n_classes):
            shares[u, k] /= total
    return log_likelihood


@compiled_part
def _by_logs(
    unit_start: Ints,
    unit_row: Ints,
    log_weight: Floats,
    rows: Floats,
    prevalence: Floats,
    u: int,
    shares: Floats,
) -> float:
    """Fill P(class | unit) of one unit; return log p(unit)."""
    highest = -np.inf
    for k in range(prevalence.size):
        value = math.log(prevalence[k]) if prevalence[k] > 0.0 else -np.inf
        if log_weight.shape[0]:
            value += log_weight[u, k]
        for i in range(unit_start[u], unit_start[u + 1]):
            p = rows[unit_row[i], k]
            value += math.log(p) if p > 0.0 else -np.inf
        shares[u, k] = value
        highest = max(highest, value)
    if highest == -np.inf:
        return highest
    total = 0.0
    for k in range(prevalence.size):
        shares[u, k] = math.exp(shares[u, k] - highest)
        total += shares[u, k]
    for k in range(prevalence.size):
        shares[u, k] /= total
    return highest + math.log(total)


@compiled_inline
def _cell(layout: EmLayout, cell: int, elements: Floats) -> float:
    product = layout.cell_constant[cell]
    for i in range(layout.cell_element_start[cell], layout.cell_element_start[cell + 1]):
        product *= elements[layout.cell_element[i]]
    return float(product)


@compiled_inline
def add_up(layout: EmLayout, work: EmWork, elements: Floats) -> None:
    """Fill the expected count of every element, given P(class | unit)."""
    rows, row_counts, counts = work.rows, work.row_counts, work.counts
    n_classes = rows.shape[1]
    counts[:] = 0.0
    row_counts[:] = 0.0
    class_counts = work.class_counts
    class_counts[:] = 0.0
    _rows_from_units(
        layout.unit_start,
        layout.unit_row,
        layout.cases,
        layout.prevalence_row,
        work.shares,
        row_counts,
        class_counts,
    )
    for g in range(class_counts.shape[0]):
        for k in range(n_classes):
            if layout.prevalence_element[g, k] >= 0:
                counts[layout.prevalence_element[g, k]] += class_counts[g, k]
    for r in range(rows.shape[0]):
        for k in range(n_classes):
            if layout.direct_element[r, k] >= 0:
                counts[layout.direct_element[r, k]] += row_counts[r, k]
    for i in range(layout.general.shape[0]):
        r, k = layout.general[i, 0], layout.general[i, 1]
        if row_counts[r, k] > 0.0:
            first = layout.cell_start[r * n_classes + k]
            for c in range(first, layout.cell_start[r * n_classes + k + 1]):
                part = row_counts[r, k] * _cell(layout, c, elements) / rows[r, k]
                for j in range(layout.cell_element_start[c], layout.cell_element_start[c + 1]):
                    counts[layout.cell_element[j]] += part


@compiled_part
def _rows_from_units(
    unit_start: Ints,
    unit_row: Ints,
    count: Floats,
    prevalence_row: Ints,
    shares: Floats,
    row_counts: Floats,
    class_counts: Floats,
) -> None:
    """Add the expected cases of every unit to its rows and to its prevalence row."""
    for u in range(count.size):
        for k in range(shares.shape[1]):
            cases = count[u] * shares[u, k]
            class_counts[prevalence_row[u], k] += cases
            for i in range(unit_start[u], unit_start[u + 1]):
                row_counts[unit_row[i], k] += cases


@compiled_inline
def maximise(layout: EmLayout, work: EmWork, elements: Floats) -> None:
    """Set every block to its best shares given expected counts; empty blocks stay as they are."""
    counts = work.counts
    for c in range(layout.chain_start.size - 1):
        _pool(layout, work, elements, layout.chain_start[c], layout.chain_start[c + 1])
    for b in range(layout.block_start.size - 1):
        total = 0.0
        for e in range(layout.block_start[b], layout.block_start[b + 1]):
            total += counts[e]
        if total > 0.0:
            for e in range(layout.block_start[b], layout.block_start[b + 1]):
                counts[e] /= total
        else:
            for e in range(layout.block_start[b], layout.block_start[b + 1]):
                counts[e] = elements[e]
    for i in range(layout.chain_element.size):
        _set_rest(layout, counts, i, work.best[i])
    elements[:] = counts


@compiled_inline
def _set_rest(layout: EmLayout, shares: Floats, i: int, value: float) -> None:
    """Set one element of a block, and divide what is left as the free shares are."""
    e, b = layout.chain_element[i], layout.chain_block[i]
    first, last = layout.block_start[b], layout.block_start[b + 1]
    rest = 0.0
    for other in range(first, last):
        if other != e:
            rest += shares[other]
    for other in range(first, last):
        if other != e and rest > 0.0:
            shares[other] *= (1.0 - value) / rest
        elif other != e:
            shares[other] = (1.0 - value) / (last - first - 1)
    shares[e] = value


@compiled_inline
def _pool(layout: EmLayout, work: EmWork, elements: Floats, first: int, last: int) -> None:
    """Pool adjacent violators along one chain."""
    pools = work.pools
    n = 0
    for i in range(first, last):
        b = layout.chain_block[i]
        cases = 0.0
        for e in range(layout.block_start[b], layout.block_start[b + 1]):
            cases += work.counts[e]
        if cases > 0.0:
            pools[0, n], pools[1, n] = work.counts[layout.chain_element[i]], cases
        else:
            pools[0, n], pools[1, n] = NO_CASES * elements[layout.chain_element[i]], NO_CASES
        pools[2, n], pools[3, n] = layout.chain_lower[i], layout.chain_upper[i]
        pools[4, n] = 1.0
        n += 1
        while n > 1 and _inside(pools, n - 2) >= _inside(pools, n - 1):
            pools[0, n - 2] += pools[0, n - 1]
            pools[1, n - 2] += pools[1, n - 1]
            pools[2, n - 2] = pools[2, n - 1]  # the highest lower bound; [3, n - 2] is the lowest
            pools[4, n - 2] += pools[4, n - 1]
            n -= 1
    at = first
    for j in range(n):
        value = _inside(pools, j)
        for _ in range(int(pools[4, j])):
            work.best[at] = value
            at += 1


@compiled_inline
def _inside(pools: Floats, j: int) -> float:
    return float(min(max(pools[0, j] / pools[1, j], pools[2, j]), pools[3, j]))
