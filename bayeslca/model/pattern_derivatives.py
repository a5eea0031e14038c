"""Derivatives of the probabilities of observable response patterns by the free parameters."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations, pairwise, product
from math import prod

import numpy as np
from scipy.linalg import qr

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.model.compile import compile_units
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.probabilities import row_probability
from bayeslca.model.simulate import Parameters, draw_answers, draw_classes
from bayeslca.model.table import Table
from bayeslca.responses.units import MISSING, Units

MOST_CELLS = 4000
"""Up to this many response patterns are all checked; beyond, a selection and margins."""
MOST_TRIPLES = 20_000
"""At the most this many cells of three-way margins are checked."""


def free_directions(table: Table, source: PrevalenceSource | None = None) -> Floats:
    """Return the directions (E + groups * K, free) in which parameters can move.

    Within each block all elements but the first are free (the first takes up the difference),
    within each group all prevalences but the last. Blocks that no row uses are left out. Known
    prevalences do not move, and equal ones move together, where the ``source`` says so.
    """
    n_elements, n_classes = table.n_elements, table.n_classes
    size = n_elements + table.n_prevalence_rows * n_classes
    used = np.isin(np.arange(n_elements), table.cell_element)
    columns: list[tuple[int, int]] = []
    for start, end in zip(table.block_start[:-1], table.block_start[1:], strict=True):
        if used[start:end].any():
            columns += [(e, int(start)) for e in range(int(start) + 1, int(end))]
    constrained = isinstance(source, ConstrainedPrevalence)
    for g in range(0 if constrained else table.n_prevalence_rows):
        last = n_elements + (g + 1) * n_classes - 1
        columns += [(last - n_classes + 1 + k, last) for k in range(n_classes - 1)]
    out = np.zeros((size, len(columns)))
    for at, (free, reference) in enumerate(columns):
        out[free, at], out[reference, at] = 1.0, -1.0
    if isinstance(source, ConstrainedPrevalence):
        moves = np.zeros((size, source.n_free))
        moves[n_elements:] = _prevalence_directions(source)
        out = np.hstack([out, moves])
    return out


def _prevalence_directions(source: ConstrainedPrevalence) -> Floats:
    """Return the directions (groups * K, free) in which constrained prevalences can move."""
    start, element = source.blocks.block_start.tolist(), source.element.ravel()
    share = source.share.ravel()
    columns = [
        np.where(element == e, share, 0.0) - np.where(element == first, share, 0.0)
        for first, last in pairwise(start)
        for e in range(first + 1, last)
    ]
    return np.array(columns).reshape(-1, element.size).T


def n_other_cells(table: Table, mask: Bools) -> int:
    """Count the response patterns on the items of a mask, less one."""
    sizes = np.diff(table.item_start)[mask]
    return prod(int(size) for size in sizes) - 1


def scaled_derivatives(
    table: Table,
    masks: list[list[Bools]],
    point: Parameters,
    free: Floats,
    rng: np.random.Generator,
) -> Floats:
    """Return the triangle (free, free) of d p(pattern) / d free, scaled by 1 / sqrt(p).

    Its singular values are those of the whole matrix, which is worked through in pieces.
    """
    triangle: Floats = np.zeros((0, free.shape[1]))
    for g, group in enumerate(masks):
        for mask in group:
            cells = _cells(table, g, mask, point, free.shape[1], rng)
            for first in range(0, len(cells), 1000):
                piece = _derivatives(table, cells[first : first + 1000], g, point) @ free
                triangle = np.vstack([triangle, piece])
                if len(triangle) > 2 * free.shape[1]:
                    triangle = np.asarray(qr(triangle, mode="r")[0][: free.shape[1]])
    return triangle


def _cells(
    table: Table, g: int, mask: Bools, point: Parameters, n_free: int, rng: np.random.Generator
) -> Ints:
    """Return patterns (cell, J): all of them, or a selection and the margins of 1 to 3 items."""
    items = [int(j) for j in np.flatnonzero(mask)]
    sizes = np.diff(table.item_start)
    if n_other_cells(table, mask) < MOST_CELLS:
        return _margin(table, items)
    n_random = 3 * n_free
    group = np.full(n_random, g)
    classes = draw_classes(point.prevalence, group, rng)
    patterns = draw_answers(table, point.elements, classes, group, rng)
    selected = np.unique(np.where(mask, patterns, MISSING), axis=0)
    margins = [_margin(table, chosen) for n in (1, 2) for chosen in combinations(items, n)]
    triples = list(combinations(items, 3))
    rng.shuffle(triples)
    n_triples = 0
    for chosen in triples:
        n_triples += prod(int(sizes[j]) for j in chosen)
        if n_triples > MOST_TRIPLES:
            break
        margins.append(_margin(table, chosen))
    return np.concatenate([selected, *margins])


def _margin(table: Table, items: Sequence[int]) -> Ints:
    """Return all answers (cell, J) to some items, the others missing."""
    sizes = np.diff(table.item_start)
    answers = np.asarray(list(product(*(range(int(sizes[j])) for j in items))), dtype=np.int16)
    out = np.full((len(answers), table.n_items), MISSING, dtype=np.int16)
    out[:, np.asarray(items)] = answers
    return out


def _derivatives(table: Table, cells: Ints, g: int, point: Parameters) -> Floats:
    """Return d p(cell) / d (elements, prevalences) / sqrt(p), shape (cell, E + groups * K)."""
    n_classes, n_elements = table.n_classes, table.n_elements
    rows = _padded_rows(table, cells, g)
    by_class = row_probability(table, point.elements)
    probability = np.concatenate([by_class, np.ones((1, n_classes))])[rows]  # (cell, J, K)
    before = np.cumprod(probability, axis=1)
    after = np.cumprod(probability[:, ::-1], axis=1)[:, ::-1]
    one = np.ones_like(probability[:, :1])
    others = np.concatenate([one, before[:, :-1]], axis=1)
    others = others * np.concatenate([after[:, 1:], one], axis=1)  # the product without this row
    share = point.prevalence[g]
    joint = before[:, -1]  # p(cell | class)
    by_row = np.zeros((len(cells), table.n_rows + 1, n_classes))
    for j in range(table.n_items):  # of one item, each cell has one row only
        by_row[np.arange(len(cells)), rows[:, j]] += others[:, j] * share
    out = np.zeros((len(cells), n_elements + table.n_prevalence_rows * n_classes))
    at = by_row[:, :-1].reshape(len(cells), -1)
    out[:, :n_elements] = at @ _row_derivatives(table, point.elements)
    out[:, n_elements + g * n_classes : n_elements + (g + 1) * n_classes] = joint
    total = joint @ share
    possible = total > 0
    return np.asarray(out[possible] / np.sqrt(total[possible])[:, None])


def _padded_rows(table: Table, cells: Ints, g: int) -> Ints:
    """Return the rows (cell, J) of patterns, the number of rows where there is none."""
    n = len(cells)
    units = Units(cells, np.full(n, g), np.ones(n, dtype=np.int64), np.arange(n))
    compiled = compile_units(table, units)
    sizes = np.diff(compiled.row_start)
    out = np.full((n, table.n_items), table.n_rows, dtype=np.int64)
    out[np.arange(table.n_items) < sizes[:, None]] = compiled.row
    return out


def _row_derivatives(table: Table, elements: Floats) -> Floats:
    """Return d p(row | class) / d element, shape (R * K, E)."""
    out = np.zeros((table.n_rows * table.n_classes, table.n_elements))
    for r, k in np.ndindex(table.n_rows, table.n_classes):
        for constant, multiplied in table.cells(r, k):
            for at, element in enumerate(multiplied):
                rest = [e for i, e in enumerate(multiplied) if i != at]
                out[r * table.n_classes + k, element] += constant * np.prod(
                    elements[np.asarray(rest, dtype=np.int64)]
                )
    return out
