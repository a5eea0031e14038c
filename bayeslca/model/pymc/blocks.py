"""The blocks of a table as a few PyMC variables: Beta where binary, Dirichlet where not.

Blocks of one size become one variable. Where every item of that size has a block of its own in
each class the variable has dims (latent_class, item...), else it is a plain list of blocks.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.blocks import constrained_elements
from bayeslca.model.pymc.bounds import Coordinates, add_bounded, coordinates
from bayeslca.model.table import Table

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


@dataclass(frozen=True)
class Names:
    """What things are called in a PyMC model's coordinates.

    Attributes
    ----------
    latent_class, item, group : tuple of str
        ``group`` is empty when there are none.
    response : tuple of str
        Every answer: "fees=no", "fees=yes", ...
    yes : tuple of int
        The category of each item whose probability stands for the item when it is binary.
    block : tuple of str
        After the probabilities that a block holds; of a binary block, the last.
    """

    latent_class: tuple[str, ...]
    item: tuple[str, ...]
    response: tuple[str, ...]
    yes: tuple[int, ...]
    block: tuple[str, ...]
    group: tuple[str, ...] = ()

    @classmethod
    def of(cls, model: LatentClassModel) -> Names:
        """Return the names in a model."""
        from bayeslca.model.position_names import block_names

        items = model.items
        return cls(
            latent_class=model.class_names,
            item=tuple(item.name for item in items),
            response=tuple(f"{item.name}={c}" for item in items for c in item.categories),
            yes=tuple(item.categories.index(item.yes or item.categories[-1]) for item in items),
            block=block_names(model),
            group=model.groups.levels if model.groups else (),
        )


@dataclass(frozen=True, eq=False)
class BlockVariable:
    """Blocks of one size as one random variable.

    Attributes
    ----------
    name : str
    elements : ndarray of int64, shape (..., R)
        Elements of each block. Where R is 2, the variable is the probability of the first.
    dims : tuple of str
    coords : mapping of str to sequence of str
    bounded : Coordinates or None
        For blocks of two with bounds or orders.
    """

    name: str
    elements: Ints
    dims: tuple[str, ...]
    coords: Mapping[str, Sequence[Any]]
    bounded: Coordinates | None = None

    @property
    def is_binary(self) -> bool:
        """True for a Beta variable."""
        return bool(self.elements.shape[-1] == 2)

    def add(self, table: Table, **options: Any) -> Any:
        """Add the variable to the PyMC model in whose context this is called.

        Parameters
        ----------
        table : Table
        **options
            Handed to the distribution.
        """
        import pymc as pm

        if self.bounded is not None:
            return add_bounded(self.name, table, self.bounded, self.dims)
        a = table.element_prior[self.elements]
        if self.is_binary:
            return pm.Beta(self.name, a[..., 0], a[..., 1], dims=self.dims, **options)
        return pm.Dirichlet(self.name, a, dims=self.dims, **options)

    def value(self, elements: Floats) -> Floats:
        """Return the variable's value for some elements (..., E)."""
        chosen = elements[..., self.elements]
        return chosen[..., 0] if self.is_binary else chosen

    def put(self, value: Floats, elements: Floats) -> None:
        """Write the variable's value into elements (..., E), the last axis running over them."""
        if self.is_binary:
            elements[..., self.elements[..., 0]] = value
            elements[..., self.elements[..., 1]] = 1.0 - value
        else:
            elements[..., self.elements] = value


def block_variables(table: Table, names: Names) -> tuple[BlockVariable, ...]:
    """Return the variables that hold all blocks of a table with more than one element."""
    sizes = np.diff(table.block_start)
    out = []
    bounded = np.zeros(table.n_blocks, dtype=bool)
    bounded[table.element_block[constrained_elements(table)]] = True
    if bounded.any():
        out.append(_bounded_variable(table, names))
        sizes = np.where(bounded, 1, sizes)
    for size in sorted(set(sizes[sizes > 1].tolist())):
        blocks = np.flatnonzero(sizes == size)
        items = np.flatnonzero(np.diff(table.item_start) == size)
        grid = _grid(table, items, size, blocks.size, names)
        if grid is not None:
            out.append(_grid_variable(grid, items, table.item_start, size, names))
        else:
            out.append(_list_variable(table, blocks, size, names))
    return tuple(out)


def _bounded_variable(table: Table, names: Names) -> BlockVariable:
    found = coordinates(table)
    labels = [names.block[b] for b in table.element_block[found.elements[:, 0]]]
    return BlockVariable(
        "bounded_probability",
        found.elements,
        ("bounded_block",),
        {"bounded_block": labels},
        found,
    )


def element_tensor(table: Table, variables: Sequence[tuple[BlockVariable, Any]]) -> Any:
    """Put variables together to the elements (E,) of a table; symbolic."""
    import pytensor.tensor as pt

    parts: list[Any] = []
    order: list[Ints] = []
    for variable, value in variables:
        elements = variable.elements
        if variable.is_binary:
            parts += [value.flatten(), 1.0 - value.flatten()]
            order += [elements[..., 0].ravel(), elements[..., 1].ravel()]
        else:
            parts.append(value.flatten())
            order.append(elements.ravel())
    lone = np.setdiff1d(np.arange(table.n_elements), np.concatenate([[], *order]))
    parts.append(pt.ones(lone.size))  # a block of one element
    order.append(lone)
    return pt.concatenate(parts)[np.argsort(np.concatenate(order))]


def row_tensor(table: Table, elements: Any) -> Any:
    """Return p(row | class), shape (R, K), from elements (E,); symbolic."""
    import pytensor.tensor as pt

    if table.is_direct:
        return elements[table.direct_element]
    with_one = pt.concatenate([elements, [1.0]])
    multiplied = _padded(table.cell_element_start, table.cell_element, table.n_elements)
    cells: Any = pt.as_tensor(table.cell_constant)
    for column in multiplied.T:
        cells = cells * with_one[column]
    n_cells = table.cell_constant.size
    with_zero = pt.concatenate([cells, [0.0]])
    added = _padded(table.cell_start, np.arange(n_cells), n_cells)
    return with_zero[added].sum(axis=1).reshape((table.n_rows, table.n_classes))


def _padded(start: Ints, values: Ints, filling: int) -> Ints:
    """Turn CSR lists into an array (lists, longest)."""
    lengths = np.diff(start)
    out = np.full((lengths.size, max(1, int(lengths.max(initial=0)))), filling, dtype=np.int64)
    out[np.arange(out.shape[1]) < lengths[:, None]] = values
    return out


def _grid(table: Table, items: Ints, size: int, n_blocks: int, names: Names) -> Ints | None:
    """Return the elements (K, items, size) when each item has its own block in each class."""
    if table.n_response_groups > 1 or n_blocks != items.size * table.n_classes:
        return None
    columns = table.item_start[items][:, None] + np.arange(size)
    elements = table.direct_element[table.response_row[0][columns]]  # (items, size, K)
    if (elements < 0).any() or np.unique(elements).size != elements.size:
        return None
    block = table.element_block[elements]
    if (block != block[:, :1]).any():
        return None
    if size == 2:
        yes = np.asarray(names.yes)[items]
        order = np.stack([yes, 1 - yes], axis=1)[:, :, None]
        elements = np.take_along_axis(elements, order, axis=1)
    return np.ascontiguousarray(elements.transpose(2, 0, 1))


def _grid_variable(grid: Ints, items: Ints, first: Ints, size: int, names: Names) -> BlockVariable:
    if size == 2:
        labels = [names.response[first[j] + names.yes[j]] for j in items]
        dims, coords = ("latent_class", "binary_response"), {"binary_response": labels}
        return BlockVariable("binary_probability", grid, dims, coords)
    return BlockVariable(
        f"probability_of_{size}",
        grid,
        ("latent_class", f"item_of_{size}", f"category_of_{size}"),
        {
            f"item_of_{size}": [names.item[j] for j in items],
            f"category_of_{size}": np.arange(1, size + 1).tolist(),
        },
    )


def _list_variable(table: Table, blocks: Ints, size: int, names: Names) -> BlockVariable:
    elements = table.block_start[blocks][:, None] + np.arange(size)
    labels = [names.block[b] for b in blocks]
    if size == 2:
        coords = {"binary_block": labels}
        return BlockVariable("binary_probability", elements[:, ::-1], ("binary_block",), coords)
    return BlockVariable(
        f"probability_of_{size}",
        elements,
        (f"block_of_{size}", f"category_of_{size}"),
        {f"block_of_{size}": labels, f"category_of_{size}": np.arange(1, size + 1).tolist()},
    )
