"""Labels of other draws of the same model: matched to memberships that are known already."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.symmetry import element_map
from bayeslca.model.table import UnitTable
from bayeslca.sampling.relabel import best_members, matching_costs

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def matched_prevalence(
    model: LatentClassModel,
    unit_table: UnitTable,
    elements: Floats,
    prevalence: Floats,
    reference: Floats,
) -> Floats:
    """Return prevalences with the labels of a relabelled posterior.

    Parameters
    ----------
    model : LatentClassModel
    unit_table : UnitTable
        The units that ``reference`` is about.
    elements : ndarray, shape (S, E)
        Draws from a posterior that is not far from the relabelled one: of the same answers but
        for some cases.
    prevalence : ndarray, shape (S, groups, K)
    reference : ndarray, shape (U, K)
        Mean P(class | answers) of each unit under the relabelled posterior.

    Returns
    -------
    ndarray, shape (S, groups, K)

    Notes
    -----
    As in `bayeslca.sampling.relabel`: naming rules first, then the permutation that comes
    closest to the reference by Stephens' criterion, within those that the model leaves open.
    """
    labels, table = model.symmetry, model.table
    if model.naming_rules:
        sizes = np.bincount(
            unit_table.prevalence_row,
            weights=unit_table.count,
            minlength=table.n_prevalence_rows,
        ).astype(np.float64)
        named = permutations_by_rules(
            table, elements, prevalence, model.naming_rules, labels.prior_group, sizes
        )
        prevalence = np.take_along_axis(prevalence, named, axis=-1)
        elements = np.stack(
            [one[element_map(table, by)] for one, by in zip(elements, named, strict=True)]
        )
    if labels.named_group.is_identity:
        return prevalence
    out = np.empty_like(prevalence)
    for piece, joint in log_joint(table, unit_table, elements, prevalence):
        costs = matching_costs(
            class_shares(joint), reference, unit_table, labels.named_group.n_groups
        )
        found = best_members(costs, labels.named_group)
        out[piece] = np.take_along_axis(prevalence[piece], found, axis=-1)
    return out
