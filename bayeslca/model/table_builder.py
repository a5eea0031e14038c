"""Building a compiled table row by row: what a statement may do to the table, one method each."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations, product
from math import prod

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.probabilities import draw_elements, response_probability
from bayeslca.model.table import Table

Cell = tuple[float, tuple[int, ...]]
"""A constant and the elements that multiply it."""
Cells = tuple[Cell, ...]
Position = tuple[int, int, int]
"""Response group, column (of answers or of joint answers), class."""


class TableBuilder:
    """Collect blocks and rows, then ``build`` the table that engines read.

    Parameters
    ----------
    n_categories : sequence of int
        Categories of each item.
    n_classes : int
    response_group : sequence of int
        The response group of each group of cases; ``(0,)`` without groups.
    """

    def __init__(
        self,
        n_categories: Sequence[int],
        n_classes: int,
        response_group: Sequence[int] = (0,),
    ) -> None:
        self.n_categories = tuple(n_categories)
        self.n_classes = n_classes
        self.response_group = tuple(response_group)
        self.n_response_groups = max(self.response_group) + 1
        self.item_start = np.concatenate([[0], np.cumsum(self.n_categories)]).astype(np.int64)
        self.together: list[tuple[int, ...]] = []
        self._block_start = [0]
        self._prior: list[float] = []
        self._lower: dict[int, float] = {}
        self._upper: dict[int, float] = {}
        self._orders: list[tuple[int, int]] = []
        self._cells: dict[Position, Cells] = {}
        self._joint_cells: dict[Position, Cells] = {}

    def block(self, prior: Sequence[float] | Floats) -> tuple[int, ...]:
        """Add a block of probabilities that sum to 1, with its Dirichlet parameters.

        Returns
        -------
        tuple of int
            The block's elements, to be put into rows.
        """
        first = self._block_start[-1]
        self._prior.extend(float(a) for a in prior)
        self._block_start.append(len(self._prior))
        return tuple(range(first, len(self._prior)))

    def set_row(
        self, group: int, item: int, category: int, latent_class: int, cells: Sequence[Cell]
    ) -> None:
        """Say what p(answer | class) is: a sum of cells; an empty sum is 0."""
        column = int(self.item_start[item]) + category
        self._cells[group, column, latent_class] = _kept(cells)

    def set_item(self, group: int, item: int, latent_class: int, elements: Sequence[int]) -> None:
        """Let an item's answers be the elements of one block, in the order given."""
        for category, element in enumerate(elements):
            self.set_row(group, item, category, latent_class, [(1.0, (element,))])

    def set_known(
        self,
        group: int,
        item: int,
        latent_class: int,
        known: Mapping[int, float],
        rest: Sequence[int] = (),
    ) -> None:
        """Fix the probabilities of some categories; the others share what is left.

        Parameters
        ----------
        group, item, latent_class : int
        known : mapping from category to probability
        rest : sequence of int
            Elements of the block of the other categories, in order; empty when at most one is
            left, which then is known too.
        """
        left = 1.0 - sum(known.values())
        others = [c for c in range(self.n_categories[item]) if c not in known]
        for category, value in known.items():
            self.set_row(group, item, category, latent_class, [(value, ())])
        for at, category in enumerate(others):
            elements = (rest[at],) if rest else ()
            self.set_row(group, item, category, latent_class, [(left, elements)])

    def set_split(
        self,
        group: int,
        item: int,
        latent_class: int,
        category: int,
        split: tuple[int, int],
        rest: Sequence[int] = (),
    ) -> None:
        """Split one category from the others, so that it alone can be tied elsewhere.

        Parameters
        ----------
        group, item, latent_class, category : int
        split : tuple of int
            The elements "this category" and "another one" of a block of two.
        rest : sequence of int
            Elements of the block of the other categories given that it is another one; empty
            for a binary item.
        """
        this, another = split
        others = [c for c in range(self.n_categories[item]) if c != category]
        self.set_row(group, item, category, latent_class, [(1.0, (this,))])
        for at, other in enumerate(others):
            elements = (another, rest[at]) if rest else (another,)
            self.set_row(group, item, other, latent_class, [(1.0, elements)])

    def answered_together(self, *items: int) -> int:
        """Declare that two or more items may depend on each other within a class.

        Returns
        -------
        int
            The number of the set, for ``set_joint``.
        """
        taken = {item for items in self.together for item in items}
        if len(set(items)) < max(2, len(items)) or taken & set(items):
            msg = (
                f"items {', '.join(map(str, items))} cannot be answered together: a set has two "
                "items or more, and an item can be in one set only. Put each item into at most "
                "one set."
            )
            raise ModelError(msg)
        self.together.append(items)
        return len(self.together) - 1

    def set_joint(
        self, group: int, together: int, latent_class: int, cells: Sequence[Cell | int]
    ) -> None:
        """Say what the joint answers of a set are; the rows of its items are their sums.

        Parameters
        ----------
        group, together, latent_class : int
        cells : sequence of Cell or int
            One for each joint answer, the last item's category changing fastest; an element
            alone stands for itself.
        """
        items = self.together[together]
        sizes = [self.n_categories[j] for j in items]
        each = [(1.0, (int(c),)) if not isinstance(c, tuple) else c for c in cells]
        answers = list(product(*map(range, sizes)))
        for members in _some_of(items):
            at = [items.index(j) for j in members]
            start = self._joint_start()[self._joints().index((together, members))]
            found: dict[tuple[int, ...], list[Cell]] = {}
            for answer, cell in zip(answers, each, strict=True):
                found.setdefault(tuple(answer[i] for i in at), []).append(cell)
            for column, answer in enumerate(product(*(range(sizes[i]) for i in at))):
                position = (group, int(start) + column, latent_class)
                self._joint_cells[position] = _kept(found[answer])
        for i, j in enumerate(items):
            for category in range(sizes[i]):
                summed = [c for a, c in zip(answers, each, strict=True) if a[i] == category]
                self.set_row(group, j, category, latent_class, summed)

    def bound(self, element: int, lower: float = 0.0, upper: float = 1.0) -> None:
        """Keep an element between two constants (the narrower of what was said before)."""
        self._lower[element] = max(lower, self._lower.get(element, 0.0))
        self._upper[element] = min(upper, self._upper.get(element, 1.0))

    def order(self, above: int, below: int) -> None:
        """Keep one element above another."""
        self._orders.append((above, below))

    def build(self) -> Table:
        """Return the table.

        Raises
        ------
        ModelError
            When a row was not set, or the answers of an item do not sum to 1 in a class.
        """
        self._fill_joint_rows()
        columns, response_row = self._rows(self._cells, int(self.item_start[-1]), 0)
        joints, joint_start = self._joints(), self._joint_start()
        joint, joint_row = self._rows(self._joint_cells, int(joint_start[-1]), len(columns))
        rows = columns + joint
        positions = [cells for row in rows for cells in row]
        cells = [cell for position in positions for cell in position]
        orders = np.asarray(self._orders, dtype=np.int64).reshape(-1, 2)
        n_elements = len(self._prior)
        table = Table(
            n_classes=self.n_classes,
            block_start=np.asarray(self._block_start, dtype=np.int64),
            element_prior=np.asarray(self._prior, dtype=np.float64),
            element_lower=_filled(n_elements, 0.0, self._lower),
            element_upper=_filled(n_elements, 1.0, self._upper),
            order_above=orders[:, 0].copy(),
            order_below=orders[:, 1].copy(),
            direct_element=_direct_elements(rows, self.n_classes),
            response_row=response_row,
            item_start=self.item_start,
            response_group=np.asarray(self.response_group, dtype=np.int64),
            joint_item=_filled_up([members for _, members in joints]),
            joint_set=np.asarray([together for together, _ in joints], dtype=np.int64),
            joint_start=joint_start,
            joint_row=joint_row,
            cell_start=_starts([len(position) for position in positions]),
            cell_constant=np.asarray([constant for constant, _ in cells], dtype=np.float64),
            cell_element_start=_starts([len(multiplied) for _, multiplied in cells]),
            cell_element=np.asarray([e for _, many in cells for e in many], dtype=np.int64),
        )
        _check_sums(table)
        return table

    def _joints(self) -> list[tuple[int, tuple[int, ...]]]:
        """Return every way to answer two or more items of a set, with the set's number."""
        return [
            (together, members)
            for together, items in enumerate(self.together)
            for members in _some_of(items)
        ]

    def _joint_start(self) -> Ints:
        sizes = [prod(self.n_categories[j] for j in members) for _, members in self._joints()]
        return _starts(sizes)

    def _fill_joint_rows(self) -> None:
        """In classes where a set is independent, a joint answer is the product of its rows."""
        start = self._joint_start()
        groups, classes = range(self.n_response_groups), range(self.n_classes)
        for joint, (_, members) in enumerate(self._joints()):
            answers = product(*(range(self.n_categories[j]) for j in members))
            for at, answer in enumerate(answers):
                columns = [
                    int(self.item_start[j]) + c for j, c in zip(members, answer, strict=True)
                ]
                for g, k in product(groups, classes):
                    position = (g, int(start[joint]) + at, k)
                    if position not in self._joint_cells:
                        rows = [self._cells[g, column, k] for column in columns]
                        self._joint_cells[position] = _multiplied(rows)

    def _rows(
        self, cells: Mapping[Position, Cells], n_columns: int, first_row: int
    ) -> tuple[list[tuple[Cells, ...]], Ints]:
        """Give rows their numbers; groups with the same cells in a column share its row."""
        rows: list[tuple[Cells, ...]] = []
        row_of = np.empty((self.n_response_groups, n_columns), dtype=np.int64)
        for column in range(n_columns):
            seen: dict[tuple[Cells, ...], int] = {}
            for group in range(self.n_response_groups):
                try:
                    row = tuple(cells[group, column, k] for k in range(self.n_classes))
                except KeyError:
                    msg = f"column {column} of response group {group} was not set in every class"
                    raise ModelError(msg) from None
                if row not in seen:
                    seen[row] = first_row + len(rows)
                    rows.append(row)
                row_of[group, column] = seen[row]
        return rows, row_of


def _kept(cells: Sequence[Cell]) -> Cells:
    return tuple((float(c), tuple(int(e) for e in elements)) for c, elements in cells if c != 0.0)


def _some_of(items: tuple[int, ...]) -> list[tuple[int, ...]]:
    """Return all choices of two or more of some items, the fewest first."""
    return [some for n in range(2, len(items) + 1) for some in combinations(items, n)]


def _multiplied(rows: Sequence[Cells]) -> Cells:
    """Return the cells of a product of rows."""
    out: Cells = ((1.0, ()),)
    for row in rows:
        out = tuple((a * b, x + y) for (a, x), (b, y) in product(out, row))
    return out


def _filled_up(lists: Sequence[Sequence[int]]) -> Ints:
    """Lay lists of different lengths under each other, filled with -1."""
    out = np.full((len(lists), max(map(len, lists), default=0)), -1, dtype=np.int64)
    for row, values in zip(out, lists, strict=True):
        row[: len(values)] = values
    return out


def _filled(size: int, default: float, values: Mapping[int, float]) -> Floats:
    out = np.full(size, default)
    for element, value in values.items():
        out[element] = value
    return out


def _direct_elements(rows: Sequence[tuple[Cells, ...]], n_classes: int) -> Ints:
    out = np.full((len(rows), n_classes), -1, dtype=np.int64)
    for r, row in enumerate(rows):
        for k, cells in enumerate(row):
            if len(cells) == 1 and cells[0][0] == 1.0 and len(cells[0][1]) == 1:
                out[r, k] = cells[0][1][0]
    return out


def _starts(sizes: Sequence[int]) -> Ints:
    return np.concatenate([[0], np.cumsum(sizes, dtype=np.int64)]).astype(np.int64)


def _check_sums(table: Table) -> None:
    """Answers of an item must sum to 1 whatever the blocks hold: shown at one random point."""
    probability = response_probability(table, draw_elements(table, np.random.default_rng(0)))
    sums = np.add.reduceat(probability, table.item_start[:-1], axis=-1)
    if not np.allclose(sums, 1.0):
        group, latent_class, item = np.argwhere(~np.isclose(sums, 1.0))[0]
        msg = (
            f"the answers of item {item} do not sum to 1 in class {latent_class} of response "
            f"group {group}"
        )
        raise ModelError(msg)
