"""Weighted counts of the distinct answers, and how each answer pulls at the parameters."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.em_layout import AllBlocks
from bayeslca.assess.likelihood.observed_information import Score
from bayeslca.exceptions import ModelError
from bayeslca.model.compile import compile_units
from bayeslca.model.table import UnitTable

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.responses.responses import Responses
    from bayeslca.responses.sample_design import SampleDesign

NO_INFORMATION = 1e-8
"""A direction with less than this share of the cases' information is left out."""


@dataclass(frozen=True, eq=False)
class WeightedUnits:
    """The distinct answers with the cases that they are worth under the weights.

    Attributes
    ----------
    design : SampleDesign
    unit_of_row : ndarray of int64, shape (row,)
        -1 for rows without an answer.
    row_weight : ndarray of float64, shape (row,)
        Weights scaled so that rows with an answer sum to their number; 0 for the others.
    table : UnitTable
        With weighted counts, which sum to the number of cases.
    cases : UnitTable
        The same units with the counts of cases.
    """

    design: SampleDesign
    unit_of_row: Ints
    row_weight: Floats
    table: UnitTable
    cases: UnitTable

    @classmethod
    def of(cls, model: LatentClassModel, responses: Responses) -> WeightedUnits:
        """Weigh the answers.

        Raises
        ------
        ModelError
            When the responses came without weights, clusters and strata.
        """
        design = responses.design
        if design is None:
            msg = (
                "these responses have no weights, clusters or strata, so there is nothing to "
                "undo: model.sample(responses) is the posterior. Read them with weight=, cluster= "
                "or stratum=."
            )
            raise ModelError(msg)
        units = model.units(responses)
        table = compile_units(model.table, units)
        used = units.unit_of_row >= 0
        if not used.any():
            msg = "no case gave an answer, so there is nothing to fit."
            raise ModelError(msg)
        weight = np.where(used, design.weight, 0.0)
        weight *= used.sum() / weight.sum()
        counts = np.bincount(units.unit_of_row[used], weight[used], minlength=units.n_units)
        weighted = replace(table, count=counts)  # whole numbers elsewhere: EM takes any
        return cls(design, units.unit_of_row, weight, weighted, table)

    @property
    def counts(self) -> Floats:
        """Weighted count of each unit, shape (unit,)."""
        return np.asarray(self.table.count, dtype=np.float64)

    def by_row(self, values: Floats) -> Floats:
        """Return weighted values (row, p) of values (unit, p); 0 for rows without an answer."""
        padded = np.concatenate([values, np.zeros((1, values.shape[1]))])
        return np.asarray(padded[self.unit_of_row] * self.row_weight[:, None])


def unit_scores(blocks: AllBlocks, units: WeightedUnits, elements: Floats) -> Floats:
    """Return how each unit's answers pull at the parameters, shape (unit, p).

    The derivative of log p(answers) along log elements, within blocks that keep their sum: what a
    unit is expected to add to an element's count, less the element's share of its block's. It
    stays bounded at probabilities of 0, where it is 0. Columns without information are left out,
    the others scaled to an information of one a case.
    """
    value, slope = Score.of(blocks, units.table).by_unit(elements)
    expected = slope * elements / value[:, None]
    start = blocks.blocks.block_start
    in_block = np.add.reduceat(expected, start[:-1], axis=1)
    score = expected - np.repeat(in_block, np.diff(start), axis=1) * elements
    kept = np.zeros(elements.size, dtype=bool)
    for b in blocks.used:
        kept[start[b] : start[b + 1]] = True
    return scaled(score[:, kept], units.counts)


def group_scores(units: WeightedUnits, n_groups: int) -> Floats:
    """Return which group a unit is of, less the groups' weighted shares, shape (unit, groups)."""
    member = np.eye(n_groups)[units.table.prevalence_row]
    return scaled(member, units.counts)


def scaled(scores: Floats, counts: Floats) -> Floats:
    """Centre scores (unit, p), drop columns that do not vary, and scale the rest."""
    centred = scores - counts @ scores / counts.sum()
    size = np.sqrt(counts @ centred**2 / counts.sum())
    moves = size > np.sqrt(NO_INFORMATION)
    return np.asarray(centred[:, moves] / size[moves])
