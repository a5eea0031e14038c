"""The compiled form: rows as sums of cells, cells as constant times elements of blocks.

Flat arrays and nothing else; the only description of a model that engines read. For every row
and class, p(row | class) = sum over its cells of constant x product of elements. Nearly always
a row has one cell with one element and constant 1 (``direct_element`` then holds it: the fast
path).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats, Ints


@dataclass(frozen=True, eq=False)
class Table:
    """A latent class model as arrays.

    Sizes: R rows, K classes, B blocks, E elements (all blocks laid end to end), C cells, G
    response groups (1 when all groups share their response probabilities), A response columns
    (all items' categories laid end to end: "fees=no", "fees=yes", ...).

    Attributes
    ----------
    n_classes : int
    block_start : ndarray of int64, shape (B + 1,)
        Block b holds the elements block_start[b]:block_start[b + 1]; they sum to 1.
    element_prior : ndarray of float64, shape (E,)
        Dirichlet parameter of each element.
    element_lower, element_upper : ndarray of float64, shape (E,)
        Constant bounds; 0 and 1 where there is none.
    order_above, order_below : ndarray of int64, shape (orders,)
        element order_above[i] > element order_below[i].
    cell_start : ndarray of int64, shape (R * K + 1,)
        Cells of row r in class k are cell_start[r * K + k]:cell_start[r * K + k + 1].
    cell_constant : ndarray of float64, shape (C,)
    cell_element_start : ndarray of int64, shape (C + 1,)
    cell_element : ndarray of int64
        Elements multiplied within each cell, CSR by cell_element_start.
    direct_element : ndarray of int64, shape (R, K)
        The one element of a row whose one cell has constant 1; -1 otherwise.
    response_row : ndarray of int64, shape (G, A)
        Row of each response column in each response group.
    item_start : ndarray of int64, shape (J + 1,)
        Response columns of item j are item_start[j]:item_start[j + 1].
    response_group : ndarray of int64, shape (prevalence groups,)
        The response group of each (declared) group of cases.
    joint_item : ndarray of int64, shape (joints, widest)
        The items of each joint answer to items that are answered together within a class, in
        the set's order, filled with -1; (0, 0) when there are none. A set of two has one entry;
        a larger one an entry for each way to answer two or more of its items. See
        `bayeslca.model.joint_answers`.
    joint_set : ndarray of int64, shape (joints,)
        The set that each belongs to.
    joint_start : ndarray of int64, shape (joints + 1,)
        Joint answers of entry p are columns joint_start[p]:joint_start[p + 1] of ``joint_row``,
        the last item's category changing fastest.
    joint_row : ndarray of int64, shape (G, joint answers)
        Row of each joint answer in each response group. A case that answered one item of a set
        has that item's own row, a sum of joint cells, instead.

    Notes
    -----
    A row without a cell in a class has probability 0 there; a cell without elements is its
    constant (a known probability). Rows of different response groups are one row where the
    groups share all of its cells.
    """

    n_classes: int
    block_start: Ints
    element_prior: Floats
    element_lower: Floats
    element_upper: Floats
    order_above: Ints
    order_below: Ints
    cell_start: Ints
    cell_constant: Floats
    cell_element_start: Ints
    cell_element: Ints
    direct_element: Ints
    response_row: Ints
    item_start: Ints
    response_group: Ints
    joint_item: Ints
    joint_set: Ints
    joint_start: Ints
    joint_row: Ints

    @property
    def n_rows(self) -> int:
        """Number of rows, R."""
        return int(self.direct_element.shape[0])

    @property
    def n_elements(self) -> int:
        """Number of elements of all blocks, E."""
        return int(self.element_prior.size)

    @property
    def n_blocks(self) -> int:
        """Number of blocks, B."""
        return int(self.block_start.size) - 1

    @property
    def n_items(self) -> int:
        """Number of items, J."""
        return int(self.item_start.size) - 1

    @property
    def n_response_groups(self) -> int:
        """Number of response groups, G."""
        return int(self.response_row.shape[0])

    @property
    def n_prevalence_rows(self) -> int:
        """Number of prevalence rows: one per group of cases."""
        return int(self.response_group.size)

    @property
    def is_direct(self) -> bool:
        """True when every row is one element in every class (the fast path throughout)."""
        return bool(np.all(self.direct_element >= 0))

    @property
    def is_bounded(self) -> bool:
        """True when an element has a bound or an order."""
        inside = np.any(self.element_lower > 0) or np.any(self.element_upper < 1)
        return bool(inside or self.order_above.size)

    @property
    def element_block(self) -> Ints:
        """Block of each element, shape (E,)."""
        return np.repeat(np.arange(self.n_blocks), np.diff(self.block_start))

    def cells(self, row: int, latent_class: int) -> tuple[tuple[float, tuple[int, ...]], ...]:
        """Return the (constant, elements) cells of a row in a class."""
        at = row * self.n_classes + latent_class
        return tuple(
            (
                float(self.cell_constant[c]),
                tuple(
                    self.cell_element[
                        self.cell_element_start[c] : self.cell_element_start[c + 1]
                    ].tolist()
                ),
            )
            for c in range(self.cell_start[at], self.cell_start[at + 1])
        )


@dataclass(frozen=True, eq=False)
class UnitTable:
    """Units as the engines read them.

    Attributes
    ----------
    row_start : ndarray of int64, shape (U + 1,)
        Rows of unit u are row[row_start[u]:row_start[u + 1]]; a missing answer has no row.
    row : ndarray of int64
    count : ndarray of int64, shape (U,)
    prevalence_row : ndarray of int64, shape (U,)
    log_weight : ndarray of float64, shape (U, K) or (0, K)
        Extra log weight per class (verified class: 0 and -inf); (0, K) when there is none.
    """

    row_start: Ints
    row: Ints
    count: Ints
    prevalence_row: Ints
    log_weight: Floats

    @property
    def n_units(self) -> int:
        """Number of units, U."""
        return int(self.count.size)

    @property
    def n_cases(self) -> int:
        """Number of cases."""
        return int(np.sum(self.count))
