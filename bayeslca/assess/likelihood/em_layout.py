"""From a model and its units to what EM reads.

Prevalences are elements of blocks like response probabilities, so that known, equal, bounded and
ordered ones need no code of their own. Priors play no part.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.likelihood_model import likelihood_model
from bayeslca.assess.likelihood.order_chains import OrderChains, order_chains
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.position_names import element_names, prevalence_names
from bayeslca.model.simulate import Parameters
from bayeslca.model.table import UnitTable

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


class EmLayout(NamedTuple):
    """A model and its units as EM reads them.

    Sizes: U units, R rows, K classes, G prevalence rows, E elements of response blocks and then
    prevalence blocks, laid end to end.

    Attributes
    ----------
    unit_start : ndarray of int64, shape (U + 1,)
    unit_row : ndarray of int64
    cases : ndarray of float64, shape (U,)
    prevalence_row : ndarray of int64, shape (U,)
    log_weight : ndarray of float64, shape (U, K) or (0, K)
    direct_element : ndarray of int64, shape (R, K)
    general : ndarray of int64, shape (n, 2)
        Rows and classes that are not one element alone.
    cell_start, cell_constant, cell_element_start, cell_element : see `bayeslca.model.table.Table`
    block_start : ndarray of int64, shape (blocks + 1,)
    prevalence_element : ndarray of int64, shape (G, K)
        -1 where the prevalence is known.
    prevalence_share : ndarray of float64, shape (G, K)
        Share of its element; the prevalence itself where it is known.
    chain_start : ndarray of int64, shape (chains + 1,)
    chain_element, chain_block : ndarray of int64
        Constrained elements, within each chain from the lowest to the highest.
    chain_lower, chain_upper : ndarray of float64
        Their bounds; neither falls along a chain.
    """

    unit_start: Ints
    unit_row: Ints
    cases: Floats
    prevalence_row: Ints
    log_weight: Floats
    direct_element: Ints
    general: Ints
    cell_start: Ints
    cell_constant: Floats
    cell_element_start: Ints
    cell_element: Ints
    block_start: Ints
    prevalence_element: Ints
    prevalence_share: Floats
    chain_start: Ints
    chain_element: Ints
    chain_block: Ints
    chain_lower: Floats
    chain_upper: Floats


@dataclass(frozen=True, eq=False)
class AllBlocks:
    """Blocks of response probabilities and of prevalences of a model, laid end to end.

    Attributes
    ----------
    model : LatentClassModel
    blocks : BlockArrays
        With flat Dirichlet parameters, from which starting points are drawn.
    prevalence_element : ndarray of int64, shape (groups, K)
        -1 where the prevalence is known.
    prevalence_share : ndarray of float64, shape (groups, K)
    """

    model: LatentClassModel
    blocks: BlockArrays
    prevalence_element: Ints
    prevalence_share: Floats

    @classmethod
    def of(cls, model: LatentClassModel) -> AllBlocks:
        """Lay the blocks of a model end to end; see `likelihood_model` for its naming rules."""
        model = likelihood_model(model)
        table, source = model.table, model.prevalence_source
        if isinstance(source, ConstrainedPrevalence):
            second, element, share = source.blocks, source.element, source.share
        else:
            second = _free_rows(*source.concentration.shape)
            element = np.arange(source.concentration.size).reshape(source.concentration.shape)
            share = np.ones(element.shape)
        n = table.n_elements
        flat = np.ones(n + second.element_prior.size)
        blocks = BlockArrays(
            block_start=np.concatenate([table.block_start[:-1], n + second.block_start]),
            element_prior=flat,
            element_lower=np.concatenate([table.element_lower, second.element_lower]),
            element_upper=np.concatenate([table.element_upper, second.element_upper]),
            order_above=np.concatenate([table.order_above, n + second.order_above]),
            order_below=np.concatenate([table.order_below, n + second.order_below]),
        )
        return cls(model, blocks, np.where(element >= 0, element + n, -1), share)

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of all elements."""
        model = self.model
        out = [*element_names(model), *([""] * (self.n_elements - model.table.n_elements))]
        rows = prevalence_names(model)
        for g, k in reversed(list(np.ndindex(*self.prevalence_element.shape))):
            if self.prevalence_element[g, k] >= 0:
                out[int(self.prevalence_element[g, k])] = rows[g][k]
        return tuple(out)

    @cached_property
    def chains(self) -> OrderChains:
        """Bounds and orders as chains."""
        return order_chains(self.blocks, self.names)

    @property
    def n_elements(self) -> int:
        """Number of elements."""
        return int(self.blocks.element_prior.size)

    @cached_property
    def used(self) -> Ints:
        """Blocks that some row or prevalence uses."""
        elements = np.concatenate([self.model.table.cell_element, self.prevalence_element.ravel()])
        block = np.repeat(
            np.arange(self.blocks.block_start.size - 1), np.diff(self.blocks.block_start)
        )
        return np.unique(block[elements[elements >= 0]])

    @cached_property
    def n_free(self) -> int:
        """Number of free parameters: known ones left out, shared ones counted once."""
        return int((np.diff(self.blocks.block_start)[self.used] - 1).sum())

    def prevalence(self, elements: Floats) -> Floats:
        """Return the prevalences (..., groups, K) that elements (..., E) make."""
        with_one = np.concatenate([elements, np.ones((*elements.shape[:-1], 1))], axis=-1)
        return np.asarray(with_one[..., self.prevalence_element] * self.prevalence_share)

    def parameters(self, elements: Floats) -> Parameters:
        """Return the model's parameters that elements (E,) make."""
        return Parameters(elements[: self.model.table.n_elements], self.prevalence(elements))

    def elements(self, parameters: Parameters) -> Floats:
        """Return the elements (E,) that make the model's parameters."""
        out = np.full(self.n_elements, np.nan)
        out[: self.model.table.n_elements] = parameters.elements
        for g, k in np.ndindex(*self.prevalence_element.shape):
            if self.prevalence_element[g, k] >= 0:
                share = self.prevalence_share[g, k]
                out[self.prevalence_element[g, k]] = parameters.prevalence[g, k] / share
        return out

    def layout(self, units: UnitTable) -> EmLayout:
        """Arrange model and units for EM."""
        table, chains = self.model.table, self.chains
        general = np.argwhere(np.asarray(table.direct_element) < 0)
        return EmLayout(
            **_unit_arrays(units),
            direct_element=_integers(table.direct_element),
            general=_integers(general.reshape(-1, 2)),
            cell_start=_integers(table.cell_start),
            cell_constant=np.ascontiguousarray(table.cell_constant, dtype=np.float64),
            cell_element_start=_integers(table.cell_element_start),
            cell_element=_integers(table.cell_element),
            block_start=_integers(self.blocks.block_start),
            prevalence_element=_integers(self.prevalence_element),
            prevalence_share=np.ascontiguousarray(self.prevalence_share),
            chain_start=chains.start,
            chain_element=chains.element,
            chain_block=chains.block,
            chain_lower=chains.lower,
            chain_upper=chains.upper,
        )


def with_units(layout: EmLayout, units: UnitTable) -> EmLayout:
    """Return a layout of the same model with other units."""
    return layout._replace(**_unit_arrays(units))


def _unit_arrays(units: UnitTable) -> dict[str, np.ndarray]:
    return {
        "unit_start": _integers(units.row_start),
        "unit_row": _integers(units.row),
        "cases": np.ascontiguousarray(units.count, dtype=np.float64),
        "prevalence_row": _integers(units.prevalence_row),
        "log_weight": np.ascontiguousarray(units.log_weight, dtype=np.float64),
    }


def _free_rows(n_rows: int, n_classes: int) -> BlockArrays:
    size = n_rows * n_classes
    none = np.zeros(0, dtype=np.int64)
    return BlockArrays(
        block_start=np.arange(n_rows + 1, dtype=np.int64) * n_classes,
        element_prior=np.ones(size),
        element_lower=np.zeros(size),
        element_upper=np.ones(size),
        order_above=none,
        order_below=none,
    )


def _integers(values: Ints) -> Ints:
    return np.ascontiguousarray(values, dtype=np.int64)
