"""Layout: the compiled table and the units, arranged so that a sweep touches little memory.

Units share much: of 60 distinct patterns of seven answers, the first four answers take at most 16
forms. The items are therefore cut into a few chunks, and each distinct part of a pattern is
multiplied out, and counted back, once per sweep.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.table import Table, UnitTable

MOST_CHUNKS = 3


class Layout(NamedTuple):
    """What a sweep reads; arrays only, never changed. Made by `arrange`.

    A named tuple because compiled functions take it as one argument. R rows, K classes, E
    elements, S distinct parts of patterns, H chunks, U units (in an order of the layout's own).

    Attributes
    ----------
    block_start, element_prior, direct_element, cell_start, cell_constant, cell_element_start, \
    cell_element : see `bayeslca.model.table.Table`
    general : ndarray of int64, shape (n, 2)
        (row, class) of every row that is not one element alone.
    part_start : ndarray of int64, shape (S + 1,)
    part_row : ndarray of int64
        Rows of part s are part_row[part_start[s]:part_start[s + 1]].
    unit_part : ndarray of int64, shape (U, H)
        The parts that make up each unit.
    cases : ndarray of int64, shape (U,)
        Cases of each unit.
    prevalence_row : ndarray of int64, shape (U,)
    log_weight : ndarray of float64, shape (U, K) or (0, K)
        Extra log weight per class.
    weight : ndarray of float64, shape (U, K) or (0, K)
        exp(log_weight - shift): the shift keeps each unit's largest weight at 1.
    log_shift : float
        Sum of cases x shift, owed to the log likelihood.
    shift : ndarray of float64, shape (U,) or (0,)
    unit : ndarray of int64, shape (U,)
        Position in the unit table of each unit of the layout.
    class_start : ndarray of int64, shape (groups + 1,)
        Where each prevalence row starts when they are laid end to end.
    """

    block_start: Ints
    element_prior: Floats
    direct_element: Ints
    cell_start: Ints
    cell_constant: Floats
    cell_element_start: Ints
    cell_element: Ints
    general: Ints
    part_start: Ints
    part_row: Ints
    unit_part: Ints
    cases: Ints
    prevalence_row: Ints
    log_weight: Floats
    weight: Floats
    log_shift: float
    shift: Floats
    unit: Ints
    class_start: Ints

    @property
    def groups(self) -> int:
        """Number of prevalence rows."""
        return self.class_start.size - 1


class Workspace(NamedTuple):
    """Scratch arrays of one chain, and what a sweep leaves in them. Made by `workspace`.

    Attributes
    ----------
    row_probability : ndarray of float64, shape (R, K)
    part_probability : ndarray of float64, shape (S, K)
    part_count : ndarray of int64, shape (S, K)
    row_count : ndarray of int64, shape (R, K)
    element_parameter : ndarray of float64, shape (E,)
        Dirichlet parameter plus count of every element, after `allocate`.
    class_count : ndarray of int64, shape (groups, K)
        Cases per class and prevalence row, after `allocate`.
    unit_count : ndarray of int64, shape (U, K) or (0, K)
        Cases of each unit per class, after `allocate`; (0, K) when nobody asked for it.
    unit_log_probability : ndarray of float64, shape (U,) or (0,)
        log p(unit) with the class summed out, likewise on request.
    class_parameter, class_share : ndarray of float64, shape (groups * K,)
    weights, cumulative : ndarray of float64, shape (K,)
    numbers : ndarray of int64, shape (K,)
    cells, cell_cumulative : ndarray of float64
    cell_numbers : ndarray of int64
    swap_elements : ndarray of float64, shape (E,)
    swap_prevalence : ndarray of float64, shape (groups, K)
    """

    row_probability: Floats
    part_probability: Floats
    part_count: Ints
    row_count: Ints
    element_parameter: Floats
    class_count: Ints
    unit_count: Ints
    unit_log_probability: Floats
    class_parameter: Floats
    class_share: Floats
    weights: Floats
    cumulative: Floats
    numbers: Ints
    cells: Floats
    cell_cumulative: Floats
    cell_numbers: Ints
    swap_elements: Floats
    swap_prevalence: Floats


def arrange(table: Table, units: UnitTable, groups: int) -> Layout:
    """Arrange a compiled table and its units for the sweep.

    Parameters
    ----------
    table : Table
    units : UnitTable
    groups : int
        Number of prevalence rows of the prevalence source.

    Returns
    -------
    Layout
    """
    order = np.lexsort((units.prevalence_row, -np.asarray(units.count)))
    rows: list[Ints] = [
        np.asarray(units.row[units.row_start[u] : units.row_start[u + 1]], dtype=np.int64)
        for u in order
    ]
    part_start, part_row, unit_part = _cheapest_parts(rows, _item_of_row(table))
    general_row, general_class = np.nonzero(np.asarray(table.direct_element) < 0)
    log_weight = np.ascontiguousarray(units.log_weight, dtype=np.float64)
    shift = np.zeros(0)
    weight = log_weight
    if log_weight.shape[0]:
        log_weight = log_weight[order]
        highest = log_weight.max(axis=1)
        shift = np.where(np.isfinite(highest), highest, 0.0)
        weight = np.exp(log_weight - shift[:, None])
    cases = np.asarray(units.count, dtype=np.int64)[order]
    return Layout(
        block_start=_integers(table.block_start),
        element_prior=np.ascontiguousarray(table.element_prior, dtype=np.float64),
        direct_element=_integers(table.direct_element),
        cell_start=_integers(table.cell_start),
        cell_constant=np.ascontiguousarray(table.cell_constant, dtype=np.float64),
        cell_element_start=_integers(table.cell_element_start),
        cell_element=_integers(table.cell_element),
        general=_integers(np.stack([general_row, general_class], axis=1)),
        part_start=part_start,
        part_row=part_row,
        unit_part=unit_part,
        cases=cases,
        prevalence_row=_integers(np.asarray(units.prevalence_row)[order]),
        log_weight=np.ascontiguousarray(log_weight),
        weight=np.ascontiguousarray(weight),
        log_shift=float(cases @ shift) if shift.size else 0.0,
        shift=shift,
        unit=_integers(order),
        class_start=np.arange(groups + 1, dtype=np.int64) * table.n_classes,
    )


def workspace(layout: Layout, *, keep_units: bool = False) -> Workspace:
    """Return the scratch arrays of one chain.

    Parameters
    ----------
    layout : Layout
    keep_units : bool
        True to have every sweep leave each unit's class counts and log probability behind.
    """
    n_rows, n_classes = layout.direct_element.shape
    n_parts = layout.part_start.size - 1
    n_units = layout.cases.size if keep_units else 0
    most_cells = int(np.diff(layout.cell_start).max(initial=1))
    return Workspace(
        row_probability=np.zeros((n_rows, n_classes)),
        part_probability=np.zeros((n_parts, n_classes)),
        part_count=np.zeros((n_parts, n_classes), dtype=np.int64),
        row_count=np.zeros((n_rows, n_classes), dtype=np.int64),
        element_parameter=np.zeros(layout.element_prior.size),
        class_count=np.zeros((layout.groups, n_classes), dtype=np.int64),
        unit_count=np.zeros((n_units, n_classes), dtype=np.int64),
        unit_log_probability=np.zeros(n_units),
        class_parameter=np.zeros(layout.groups * n_classes),
        class_share=np.zeros(layout.groups * n_classes),
        weights=np.zeros(n_classes),
        cumulative=np.zeros(n_classes),
        numbers=np.zeros(n_classes, dtype=np.int64),
        cells=np.zeros(most_cells),
        cell_cumulative=np.zeros(most_cells),
        cell_numbers=np.zeros(most_cells, dtype=np.int64),
        swap_elements=np.zeros(layout.element_prior.size),
        swap_prevalence=np.zeros((layout.groups, n_classes)),
    )


def _integers(values: Ints) -> Ints:
    return np.ascontiguousarray(values, dtype=np.int64)


def _item_of_row(table: Table) -> Ints:
    """Give every row the first item that it answers; rows of none (joint answers) go last."""
    n_items = len(table.item_start) - 1
    item = np.full(table.direct_element.shape[0], max(n_items - 1, 0), dtype=np.int64)
    item_of_column = np.repeat(np.arange(n_items), np.diff(table.item_start))
    for rows in np.asarray(table.response_row)[::-1]:
        known = rows >= 0
        item[rows[known]] = item_of_column[known]
    return item


def _cheapest_parts(rows: list[Ints], item_of_row: Ints) -> tuple[Ints, Ints, Ints]:
    """Cut the items into one to three chunks, whichever makes a sweep touch least."""
    n_items = int(item_of_row.max(initial=0)) + 1
    options = []
    for n_chunks in range(1, min(MOST_CHUNKS, n_items) + 1):
        chunk_of_row = item_of_row * n_chunks // n_items
        part_start, part_row, unit_part = _parts(rows, chunk_of_row, n_chunks)
        options.append((part_row.size + unit_part.size, part_start, part_row, unit_part))
    _, part_start, part_row, unit_part = min(options, key=lambda option: option[0])
    return part_start, part_row, unit_part


def _parts(rows: list[Ints], chunk_of_row: Ints, n_chunks: int) -> tuple[Ints, Ints, Ints]:
    """Find the distinct parts of the units' rows, chunk by chunk.

    Returns
    -------
    part_start, part_row, unit_part : see `Layout`
    """
    known: dict[tuple[int, bytes], int] = {}
    parts: list[Ints] = []
    unit_part = np.zeros((len(rows), n_chunks), dtype=np.int64)
    for position, unit_rows in enumerate(rows):
        chunk = chunk_of_row[unit_rows]
        for h in range(n_chunks):
            part = np.sort(unit_rows[chunk == h])
            key = (h, part.tobytes())
            if key not in known:
                known[key] = len(parts)
                parts.append(part)
            unit_part[position, h] = known[key]
    lengths = [part.size for part in parts]
    part_start = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64)
    part_row = np.concatenate([np.zeros(0, dtype=np.int64), *parts])
    return part_start, part_row, unit_part
