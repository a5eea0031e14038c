"""Draws of all parameters from the prior, constraints kept, classes named as in the posterior."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.evaluate import ParameterDraws
from bayeslca.model.naming import permutations_by_rules
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.symmetry import element_map
from bayeslca.model.table import Table
from bayeslca.model.truncated_prior import draw_inside

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def draw_prior(
    model: LatentClassModel, n: int, rng: np.random.Generator, group_share: Floats | None = None
) -> ParameterDraws:
    """Draw parameters from the prior, bounds kept, named by the model's rules.

    Parameters
    ----------
    model : LatentClassModel
    n : int
    rng : numpy Generator
    group_share : ndarray, shape (groups,), optional
        Share of the cases in each group, for rules and for "overall"; equal when left out.
    """
    table = model.table
    elements = draw_inside(table, n, rng)
    prevalence = _prevalences(model.prevalence_source, n, rng)
    share = np.full(model.n_groups, 1.0 / model.n_groups) if group_share is None else group_share
    if model.naming_rules:
        permutations = permutations_by_rules(
            table, elements, prevalence, model.naming_rules, model.symmetry.prior_group, share
        )
        elements, prevalence = permuted(table, elements, prevalence, permutations)
    return ParameterDraws(table, elements, prevalence, share)


def permuted(
    table: Table, elements: Floats, prevalence: Floats, permutations: Ints
) -> tuple[Floats, Floats]:
    """Apply a permutation (S, groups, K) of its own to each draw (S, ...)."""
    out = elements.copy()
    distinct, which = np.unique(permutations, axis=0, return_inverse=True)
    for at, permutation in enumerate(distinct):
        mine = np.flatnonzero(which.reshape(-1) == at)
        out[mine] = elements[np.ix_(mine, element_map(table, permutation))]
    return out, np.take_along_axis(prevalence, permutations, axis=-1)


def _prevalences(
    source: DirichletPrevalence | ConstrainedPrevalence | PooledPrevalence,
    n: int,
    rng: np.random.Generator,
) -> Floats:
    if isinstance(source, PooledPrevalence):
        return source.simulate_many(rng, n)[0]
    if isinstance(source, ConstrainedPrevalence):
        return source.prevalence(draw_inside(source.blocks, n, rng))
    return np.stack([rng.dirichlet(a, size=n) for a in source.concentration], axis=1)
