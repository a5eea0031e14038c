"""Give the classes of a joint model the names that they have in the measurement model."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.permutations import compose, identity
from bayeslca.model.probabilities import class_shares, log_joint
from bayeslca.model.symmetry import element_map

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

MOST_REFERENCE = 1000
"""Draws of the measurement model over which the reference memberships are averaged."""


def refuse_unmatched_groups(posterior: Posterior) -> None:
    """Refuse a model whose classes are not the same from group to group.

    Raises
    ------
    ModelError
    """
    if len(posterior.model.symmetry.named_group.group_sets) > 1:
        msg = (
            "groups share no response probabilities, so a class of one group is not matched with a "
            "class of another, and nothing can follow from it in all groups. Let groups share some "
            "items (free_by_group), or name the classes by a rule."
        )
        raise ModelError(msg)


class LabelMatch:
    """Matches draws of a joint model to the measurement model's classes, draw by draw.

    Naming rules are applied first. What they leave open is matched to the memberships (from the
    answers alone) of the measurement model's posterior, by Stephens' (2000) criterion.

    Parameters
    ----------
    posterior : Posterior
        Of the measurement model, relabelled.
    """

    def __init__(self, posterior: Posterior) -> None:
        refuse_unmatched_groups(posterior)
        self.model = posterior.model
        self.table = posterior.table
        self.units = posterior.unit_table
        self.group_cases = posterior.group_cases
        self.group = posterior.model.symmetry.named_group
        self.is_needed = not self.group.is_identity or bool(self.model.naming_rules)
        self.reference = np.zeros((0, 0))
        if not self.group.is_identity:
            draws = posterior.draws
            elements = draws.elements.reshape(-1, self.table.n_elements)
            prevalence = draws.prevalence.reshape(-1, *draws.prevalence.shape[2:])
            step = max(1, len(elements) // MOST_REFERENCE)
            self.reference = self._memberships(elements[::step], prevalence[::step]).mean(axis=2).T

    def permutations(self, elements: Floats, prevalence: Floats) -> Ints:
        """Return which class of each draw becomes each class.

        Parameters
        ----------
        elements : ndarray, shape (S, E)
        prevalence : ndarray, shape (S, G, K)

        Returns
        -------
        ndarray of int64, shape (S, K)
        """
        from bayeslca.sampling.relabel import best_members, matching_costs

        n_groups, n_classes = self.table.n_prevalence_rows, self.table.n_classes
        found = np.tile(identity(n_groups, n_classes), (len(elements), 1, 1))
        if self.model.naming_rules:
            found = permutations_by_rules(
                self.table,
                elements,
                prevalence,
                self.model.naming_rules,
                self.model.symmetry.prior_group,
                self.group_cases,
            )
        if not self.group.is_identity:
            named, shares = self.applied(elements, prevalence, found[:, 0])
            shares = self._memberships(named, shares)
            costs = matching_costs(shares, self.reference, self.units, n_groups)
            found = compose(found, best_members(costs, self.group))
        return np.asarray(found[:, 0])

    def applied(
        self, elements: Floats, prevalence: Floats, permutations: Ints
    ) -> tuple[Floats, Floats]:
        """Return elements (S, E) and prevalences (S, G, K) with classes permuted (S, K)."""
        n_groups = self.table.n_prevalence_rows
        out = elements.copy()
        distinct, which = np.unique(permutations, axis=0, return_inverse=True)
        for at, permutation in enumerate(distinct):
            mine = np.flatnonzero(which.reshape(-1) == at)
            whole = np.tile(permutation, (n_groups, 1))
            out[mine] = elements[np.ix_(mine, element_map(self.table, whole))]
        return out, np.take_along_axis(prevalence, permutations[:, None, :], axis=-1)

    def _memberships(self, elements: Floats, prevalence: Floats) -> Floats:
        """Return P(class | answers), shape (K, U, S)."""
        pieces = log_joint(self.table, self.units, elements, prevalence)
        return np.concatenate([class_shares(joint) for _, joint in pieces], axis=2)
