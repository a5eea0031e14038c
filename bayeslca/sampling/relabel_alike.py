"""Relabelling to another fit: classes mean what they mean there."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.symmetry import element_map
from bayeslca.model.table import Table, UnitTable
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import best_members, matching_costs

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def relabel_alike(
    model: LatentClassModel, unit_table: UnitTable, draws: Draws, reference: Floats
) -> Draws:
    """Relabel draws so that classes mean what they do in another fit of the same model.

    Naming rules are applied first, draw by draw; what they leave open is matched to the other
    fit by Stephens' criterion (see `bayeslca.sampling.relabel`).

    Parameters
    ----------
    model : LatentClassModel
    unit_table : UnitTable
    draws : Draws
        As they were sampled.
    reference : ndarray, shape (U, K)
        P(class | answers) of the units in the other fit.
    """
    table = model.table
    elements = draws.flat_elements.copy()
    prevalence = draws.flat_prevalence.copy()
    if model.naming_rules:
        n_groups = table.n_prevalence_rows
        sizes = np.bincount(unit_table.prevalence_row, unit_table.count, minlength=n_groups)
        named = permutations_by_rules(
            table,
            elements,
            prevalence,
            model.naming_rules,
            model.symmetry.prior_group,
            np.asarray(sizes, dtype=np.float64),
        )
        elements, prevalence = _permuted(table, elements, prevalence, named)
    group = model.symmetry.named_group
    if not group.is_identity:
        for piece, joint in log_joint(table, unit_table, elements, prevalence):
            costs = matching_costs(class_shares(joint), reference, unit_table, group.n_groups)
            elements[piece], prevalence[piece] = _permuted(
                table, elements[piece], prevalence[piece], best_members(costs, group)
            )
    return replace(
        draws,
        elements=elements.reshape(draws.elements.shape),
        prevalence=prevalence.reshape(draws.prevalence.shape),
    )


def _permuted(
    table: Table, elements: Floats, prevalence: Floats, permutations: Ints
) -> tuple[Floats, Floats]:
    """Apply a permutation (S, group, K) of its own to each draw."""
    out = elements.copy()
    distinct, which = np.unique(permutations, axis=0, return_inverse=True)
    for at, permutation in enumerate(distinct):
        mine = np.flatnonzero(which.reshape(-1) == at)
        out[mine] = elements[np.ix_(mine, element_map(table, permutation))]
    return out, np.take_along_axis(prevalence, permutations, axis=-1)
