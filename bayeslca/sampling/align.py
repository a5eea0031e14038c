"""One fit's classes called as another's: refits under other priors beside the original.

Two fits of the same answers need not number their classes alike. Where the model of the refit
leaves labels open, each of its draws is permuted to the memberships that the original found, by
the criterion of `bayeslca.sampling.relabel` with the reference given. Where the model itself tells
the classes apart, nothing is permuted: then a class means the same in both by what was stated.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.permutations import compose
from bayeslca.model.prior_draws import permuted
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.table import UnitTable
from bayeslca.sampling.relabel import Relabelled, best_members, matching_costs


def align(
    model: LatentClassModel, unit_table: UnitTable, found: Relabelled, reference: Floats
) -> Relabelled:
    """Name the classes of draws as in a reference, as far as the model leaves names open.

    Parameters
    ----------
    model : LatentClassModel
        Of the draws.
    unit_table : UnitTable
    found : Relabelled
        The draws, relabelled on their own.
    reference : ndarray, shape (U, K)
        P(class | answers) of each unit, as the other fit has it.

    Returns
    -------
    Relabelled
    """
    group = model.symmetry.named_group
    if group.is_identity:
        return found
    draws = found.draws
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    best = np.empty((elements.shape[0], group.n_groups, group.n_classes), dtype=np.int64)
    for piece, joint in log_joint(model.table, unit_table, elements, prevalence):
        costs = matching_costs(class_shares(joint), reference, unit_table, group.n_groups)
        best[piece] = best_members(costs, group)
    elements, prevalence = permuted(model.table, elements, prevalence, best)
    moved = compose(found.permutations.reshape(best.shape), best)
    return replace(
        found,
        draws=replace(
            draws,
            elements=elements.reshape(draws.elements.shape),
            prevalence=prevalence.reshape(draws.prevalence.shape),
        ),
        permutations=moved.reshape(found.permutations.shape),
    )
