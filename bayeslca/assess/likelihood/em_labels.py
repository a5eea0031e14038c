"""Which class of a maximum likelihood solution gets which name.

The likelihood alone knows no names. Naming rules give them where there are some; classes that
were given as a number stand by falling prevalence; names that rest on priors alone go to the
labelling that the priors find most probable.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import permutations
from math import factorial

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.likelihood.likelihood_model import likelihood_model
from bayeslca.exceptions import ModelError
from bayeslca.model.blocks import inside_blocks
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.prior_density import log_prior
from bayeslca.model.simulate import Parameters
from bayeslca.model.symmetry import element_map

MOST_TRIED = 5040
"""Labellings that are compared by their prior density."""


def labelled(model: LatentClassModel, found: Parameters, group_cases: Floats) -> Parameters:
    """Return a solution with its classes in the order of the model's names.

    Parameters
    ----------
    model : LatentClassModel
    found : Parameters
    group_cases : ndarray, shape (groups,)
    """
    if model.naming_rules:
        free = likelihood_model(model)
        order = permutations_by_rules(
            free.table,
            found.elements[None],
            found.prevalence[None],
            model.naming_rules,
            free.symmetry.prior_group,
            group_cases,
        )[0]
        return _permuted(free, found, order) or found
    if model.exploratory:
        overall = group_cases @ found.prevalence
        return _permuted(model, found, np.argsort(-overall, kind="stable")) or found
    if factorial(model.n_classes) > MOST_TRIED:
        return found
    return max(_labellings(model, found), key=lambda one: _density(model, one))


def _labellings(model: LatentClassModel, found: Parameters) -> Iterator[Parameters]:
    yield found
    for order in permutations(range(model.n_classes)):
        moved = _permuted(model, found, np.asarray(order))
        if moved is not None and inside_blocks(model.table, moved.elements):
            yield moved


def _density(model: LatentClassModel, one: Parameters) -> float:
    with np.errstate(divide="ignore", invalid="ignore"):
        inside = np.clip(one.elements, 1e-6, 1.0)  # at a boundary a density may be 0 or infinite
        shares = np.clip(one.prevalence, 1e-6, 1.0)
        value = float(log_prior(model.table, model.prevalence_source, inside, shares))
    return value if np.isfinite(value) else -np.inf


def _permuted(model: LatentClassModel, found: Parameters, order: Ints) -> Parameters | None:
    """Return the solution with its classes in another order; None where the model has no such.

    The order is (K,), or (groups, K) where it is another one in each group.
    """
    permutation = np.broadcast_to(order, found.prevalence.shape)
    try:
        mapped = element_map(model.table, permutation)
    except ModelError:
        return None
    if not model.prevalence_source.keeps_ties(permutation):
        return None
    return Parameters(
        found.elements[mapped], np.take_along_axis(found.prevalence, permutation, axis=1)
    )
