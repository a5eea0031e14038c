"""Classes of a joint model that mean what they mean in the measurement model's posterior.

Covariates and outcomes can move classes a little; their names must not move with them. Naming
rules are applied to each draw as in the measurement model. What they leave open is settled by
matching each draw's memberships (given the answers alone) to the measurement posterior's mean
memberships, by the criterion of Stephens (2000).

References
----------
Stephens, M. (2000). Dealing with label switching in mixture models. Journal of the Royal
Statistical Society B 62, 795-809.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.permutations import compose, identity
from bayeslca.model.probabilities import class_shares, log_joint, membership
from bayeslca.model.symmetry import element_map
from bayeslca.posterior.posterior import Posterior
from bayeslca.sampling.joint_draws import JointDraws
from bayeslca.sampling.relabel import best_members, matching_costs

REFERENCE_DRAWS = 500


@dataclass(frozen=True, eq=False)
class SameClasses:
    """Draws whose classes are those of the measurement posterior.

    Attributes
    ----------
    draws : JointDraws
        Elements and prevalences relabelled; ``parameters`` as they were sampled.
    permutations : ndarray of int64, shape (chain, draw, K)
        ``permutations[c, d, k]`` is the sampled class that became class k.
    moved : float
        Share of the draws whose labels had to be changed.
    """

    draws: JointDraws
    permutations: Ints
    moved: float

    def parameter(self, name: str, axis: int = 0) -> Floats:
        """Return a parameter (chain, draw, ...) with its class axis relabelled.

        Parameters
        ----------
        name : str
        axis : int
            Which axis of the parameter itself counts the classes.
        """
        return relabelled(self.draws.parameters[name], self.permutations, axis)


def relabelled(values: Floats, permutations: Ints, axis: int = 0) -> Floats:
    """Return values (chain, draw, ...) with the class axis permuted (chain, draw, K)."""
    at = np.moveaxis(values, 2 + axis, 2)
    index = permutations.reshape(*permutations.shape, *(1,) * (at.ndim - 3))
    return np.moveaxis(np.take_along_axis(at, index, axis=2), 2, 2 + axis)


def refuse_classes_apart(posterior: Posterior) -> None:
    """Refuse models in which the classes of one group are not those of another.

    Raises
    ------
    ModelError
    """
    if len(posterior.model.symmetry.prior_group.group_sets) > 1:
        msg = (
            "nothing ties the classes of one group to those of another in this model (all items "
            "are free by group), so there is no class that covariates or outcomes of all cases "
            "could go with. Share some items between the groups, or fit each group by itself."
        )
        raise ModelError(msg)


def same_classes(posterior: Posterior, draws: JointDraws) -> SameClasses:
    """Give the draws of a joint model the classes of the measurement posterior.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model: no covariates, no outcomes.
    draws : JointDraws
        Of the same answers.

    Returns
    -------
    SameClasses
    """
    refuse_classes_apart(posterior)
    model, table, units = posterior.model, posterior.table, posterior.unit_table
    group = model.symmetry.named_group
    elements = draws.flat_elements
    prevalence = draws.flat_prevalence
    found = np.tile(identity(table.n_prevalence_rows, table.n_classes), (len(elements), 1, 1))
    if model.naming_rules:
        found = permutations_by_rules(
            table,
            elements,
            prevalence,
            model.naming_rules,
            model.symmetry.prior_group,
            posterior.group_cases,
        )
        elements, prevalence = _permuted(posterior, elements, prevalence, found)
    if not group.is_identity:
        reference = _reference(posterior)
        more = np.empty_like(found)
        for piece, joint in log_joint(table, units, elements, prevalence):
            costs = matching_costs(class_shares(joint), reference, units, table.n_prevalence_rows)
            more[piece] = best_members(costs, group)
        elements, prevalence = _permuted(posterior, elements, prevalence, more)
        found = compose(found, more)
    first = found[:, 0]
    named = replace(
        draws,
        elements=elements.reshape(draws.elements.shape),
        prevalence=prevalence.reshape(draws.prevalence.shape),
    )
    moved = float(np.mean(np.any(first != np.arange(table.n_classes), axis=1)))
    return SameClasses(named, first.reshape(draws.n_chains, draws.n_draws, table.n_classes), moved)


def _permuted(
    posterior: Posterior, elements: Floats, prevalence: Floats, permutations: Ints
) -> tuple[Floats, Floats]:
    out = elements.copy()
    distinct, which = np.unique(permutations, axis=0, return_inverse=True)
    for at, permutation in enumerate(distinct):
        mine = np.flatnonzero(which.reshape(-1) == at)
        out[mine] = elements[np.ix_(mine, element_map(posterior.table, permutation))]
    return out, np.take_along_axis(prevalence, permutations, axis=-1)


def _reference(posterior: Posterior) -> Floats:
    """Return the measurement posterior's mean memberships, shape (U, K)."""
    draws = posterior.draws
    step = max(1, draws.n_chains * draws.n_draws // REFERENCE_DRAWS)
    shares = membership(
        posterior.table,
        posterior.unit_table,
        draws.flat_elements[::step],
        draws.flat_prevalence[::step],
    )
    return np.asarray(shares.mean(axis=0))
