"""The probability of answers and classes together, all parameters integrated out.

Given the classes of all cases, blocks are independent Dirichlet-multinomials, and bounds add the
ratio of their probability after and before the answers. Two models of the same data can then be
weighed draw by draw: p(answers, classes | one) / p(answers, classes | other).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import gammaln

from bayeslca._typing import Floats, Ints
from bayeslca.assess.hypothesis.allocated import Allocated
from bayeslca.assess.hypothesis.order_probability import Forest, forest, log_probability
from bayeslca.model.blocks import BlockArrays, Blocks
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.table import Table

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


@dataclass(frozen=True, eq=False)
class _Part:
    """Blocks, and which of the counts each element takes; constants aside.

    Attributes
    ----------
    blocks : BlockArrays
    takes : ndarray, shape (counts, E)
        Times that an element stands in the product of each counted thing.
    log_constant : ndarray, shape (counts,)
    orders : Forest or None
        None where nothing is bounded.
    """

    blocks: BlockArrays
    takes: Floats
    log_constant: Floats
    orders: Forest | None

    def log_bounds(self) -> float:
        """Return the log prior probability of the bounds."""
        if self.orders is None:
            return 0.0
        return float(log_probability(self.orders, self.blocks.element_prior[None])[0])

    def log_evidence(self, counts: Floats) -> Floats:
        """Return the log probability (S,) of counts (S, counts)."""
        after = self.blocks.element_prior + counts @ self.takes
        impossible = np.isneginf(self.log_constant)
        out = counts[:, ~impossible] @ self.log_constant[~impossible]
        out += _log_normaliser(self.blocks, after) - _log_normaliser(
            self.blocks, self.blocks.element_prior[None]
        )
        if self.orders is not None:
            out += log_probability(self.orders, after) - self.log_bounds()
        return np.where((counts[:, impossible] > 0).any(axis=1), -np.inf, out)


def _log_normaliser(blocks: Blocks, parameter: Floats) -> Floats:
    """Return the sum over blocks of the log normaliser (S,) of Dirichlets (S, E)."""
    if blocks.block_start.size <= 1:
        return np.zeros(parameter.shape[0])
    starts = blocks.block_start[:-1]
    sums = np.add.reduceat(parameter, starts, axis=1)
    return np.asarray(gammaln(parameter).sum(axis=1) - gammaln(sums).sum(axis=1))


@dataclass(frozen=True, eq=False)
class Collapsed:
    """A model with its parameters integrated out; made by `collapse`."""

    responses: _Part
    prevalences: _Part

    def log_bounds(self) -> float:
        """Return the log prior probability of all bounds and orders."""
        return self.responses.log_bounds() + self.prevalences.log_bounds()

    def log_evidence(self, allocated: Allocated) -> Floats:
        """Return log p(answers, classes) (S,), up to what all models of the data share."""
        n = allocated.cases.shape[0]
        return np.asarray(
            self.responses.log_evidence(allocated.answers.reshape(n, -1))
            + self.prevalences.log_evidence(allocated.cases.reshape(n, -1))
        )


def collapse(model: LatentClassModel) -> Collapsed | None:
    """Integrate the parameters out; None where that has no closed form here.

    That is where a probability is a sum of products, where items depend on each other, and where
    orders form rings or bind several answers of one item.
    """
    table, source = model.table, model.prevalence_source
    if table.joint_set.size:
        return None
    takes = _takes(table)
    response_orders = forest(table) if table.is_bounded else None
    if takes is None or (table.is_bounded and response_orders is None):
        return None
    responses = _Part(BlockArrays.of(table), *takes, response_orders)
    if isinstance(source, ConstrainedPrevalence):
        blocks, element, share = source.blocks, source.element.reshape(-1), source.share.reshape(-1)
        bounded = bool(
            blocks.order_above.size
            or np.any(blocks.element_lower > 0)
            or np.any(blocks.element_upper < 1)
        )
        orders = forest(blocks) if bounded else None
        if bounded and orders is None:
            return None
    elif isinstance(source, PooledPrevalence):
        # Nothing may be stated on pooled prevalences, so that what they give to the probability
        # of the classes is the same in all models that are weighed: it is left out.
        blocks = _plain_blocks(np.zeros((0, 1)))
        element = np.full(source.concentration.size, -1, dtype=np.int64)
        share, orders = np.ones(element.size), None
    else:
        a = source.concentration
        blocks = _plain_blocks(a)
        element, share, orders = np.arange(a.size), np.ones(a.size), None
    known = element < 0
    one_hot = np.zeros((element.size, blocks.element_prior.size))
    one_hot[np.flatnonzero(~known), element[~known]] = 1.0
    with np.errstate(divide="ignore"):
        prevalences = _Part(blocks, one_hot, np.log(share), orders)
    return Collapsed(responses, prevalences)


def _plain_blocks(concentration: Floats) -> BlockArrays:
    n, k = concentration.shape
    none: Ints = np.zeros(0, dtype=np.int64)
    return BlockArrays(
        np.arange(n + 1) * k,
        concentration.reshape(-1),
        np.zeros(n * k),
        np.ones(n * k),
        none,
        none,
    )


def _takes(table: Table) -> tuple[Floats, Floats] | None:
    """Return which elements (groups x K x A, E) each answer is made of, and the constants."""
    shape = (table.n_prevalence_rows, table.n_classes, int(table.item_start[-1]))
    takes = np.zeros((*shape, table.n_elements))
    log_constant = np.zeros(shape)
    for g, k, a in np.ndindex(*shape):
        cells = table.cells(int(table.response_row[table.response_group[g], a]), k)
        if len(cells) > 1:
            return None
        if not cells or cells[0][0] == 0.0:
            log_constant[g, k, a] = -np.inf
            continue
        log_constant[g, k, a] = np.log(cells[0][0])
        for element in cells[0][1]:
            takes[g, k, a, element] += 1.0
    return takes.reshape(log_constant.size, table.n_elements), log_constant.reshape(-1)
