"""Rows that are more than one element: sums of cells, products of elements, known values.

Numba code: import inside functions.
"""

from __future__ import annotations

import numpy as np

from bayeslca._typing import Floats
from bayeslca.sampling.compiled import compiled_part
from bayeslca.sampling.layout import Layout, Workspace
from bayeslca.sampling.split import split_count


@compiled_part
def general_rows(layout: Layout, work: Workspace, elements: Floats) -> None:
    """Set the probability of every row that is not one element alone."""
    n_classes = layout.direct_element.shape[1]
    for i in range(layout.general.shape[0]):
        r, k = layout.general[i, 0], layout.general[i, 1]
        first = layout.cell_start[r * n_classes + k]
        last = layout.cell_start[r * n_classes + k + 1]
        work.row_probability[r, k] = 0.0
        for c in range(first, last):
            work.row_probability[r, k] += _cell_probability(layout, c, elements)


@compiled_part
def count_general_rows(
    layout: Layout, work: Workspace, elements: Floats, rng: np.random.Generator
) -> None:
    """Split the count of each such row over its cells, exactly, and count the cells' elements."""
    n_classes = layout.direct_element.shape[1]
    for i in range(layout.general.shape[0]):
        r, k = layout.general[i, 0], layout.general[i, 1]
        if work.row_count[r, k]:
            first = layout.cell_start[r * n_classes + k]
            n_cells = layout.cell_start[r * n_classes + k + 1] - first
            _count_cells(layout, work, elements, first, n_cells, work.row_count[r, k], rng)


@compiled_part
def _cell_probability(layout: Layout, cell: int, elements: Floats) -> float:
    product = layout.cell_constant[cell]
    for i in range(layout.cell_element_start[cell], layout.cell_element_start[cell + 1]):
        product *= elements[layout.cell_element[i]]
    return float(product)


@compiled_part
def _count_cells(
    layout: Layout,
    work: Workspace,
    elements: Floats,
    first: int,
    n_cells: int,
    count: int,
    rng: np.random.Generator,
) -> None:
    total = 0.0
    for c in range(n_cells):
        work.cells[c] = _cell_probability(layout, first + c, elements)
        total += work.cells[c]
        work.cell_cumulative[c] = total
    numbers = work.cell_numbers[:n_cells]
    split_count(count, work.cells[:n_cells], work.cell_cumulative[:n_cells], numbers, rng)
    for c in range(n_cells):
        taken = numbers[c]
        for i in range(
            layout.cell_element_start[first + c], layout.cell_element_start[first + c + 1]
        ):
            work.element_parameter[layout.cell_element[i]] += taken
