"""Hypotheses that can be constraints of the model: weighed by their evidence."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import permutations
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.assess.hypothesis.allocated import draw_allocated
from bayeslca.assess.hypothesis.bridge import LogRatio, ess, mean_ratio
from bayeslca.assess.hypothesis.collapsed import Collapsed, collapse
from bayeslca.assess.hypothesis.conditional_model import conditional
from bayeslca.assess.hypothesis.ladder import Step, climb
from bayeslca.assess.hypothesis.named_base import without_names, without_rules
from bayeslca.exceptions import BayesLCAError, ModelError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.places import ConditionalVector, Link, Place, PrevalenceVector

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

GOOD_ENOUGH = 0.03
"""With a larger error, draws under the hypothesis are made too."""
MOST_RELABELLED = 4
"""Up to so many classes, all labellings of a draw are looked at."""
IMPLIED = 1e-9
"""A log prior probability this near to 0 is 0: the model implies the hypothesis."""


@dataclass(frozen=True, slots=True)
class Weighed:
    """A hypothesis against the model.

    Attributes
    ----------
    ratio : LogRatio
        Log Bayes factor against the model.
    log_prior : float or None
        Log prior probability; None for an equality.
    left, left_mcse : float
        Posterior probability that the hypothesis does not hold, found by itself.
    """

    ratio: LogRatio
    log_prior: float | None
    left: float
    left_mcse: float


class NotWeighed(Exception):
    """Why statements cannot be weighed, in words."""


def weigh(posterior: Posterior, statements: Sequence[str], seed: int) -> Weighed:
    """Weigh statements against the model.

    Raises
    ------
    NotWeighed
        When they can be no constraint, or have no closed form given the classes.
    ModelError
        When the prior density is 0 or infinite at an equality.
    """
    base = without_rules(posterior.model)
    if base is None:
        msg = "the naming rules cannot be written as orders"
        raise NotWeighed(msg)
    try:
        under = conditional(base, statements)
    except BayesLCAError as refused:
        raise NotWeighed(str(refused)) from None
    equal = _new_equalities(base, under)
    _refuse_at_the_edge(base, equal)
    plain, constrained = collapse(base), collapse(under)
    if plain is None or constrained is None:
        msg = "its probability has no closed form given the classes"
        raise NotWeighed(msg)
    log_prior = None if equal else constrained.log_bounds() - plain.log_bounds()
    if log_prior is not None and log_prior > -IMPLIED:
        return Weighed(LogRatio(0.0, 0.0), 0.0, 0.0, 0.0)

    bottoms = _bottoms(posterior, base, plain, seed)
    log_w = Step(constrained, bottoms[0].allocated).log_evidence(bottoms[0]) - bottoms[0].own
    ratio = mean_ratio(log_w)
    if ratio.mcse > GOOD_ENOUGH:
        ratio = climb(base, bottoms, under, posterior.responses, seed)
    if log_prior is None:
        return Weighed(ratio, None, math.nan, math.nan)
    left = np.maximum(1.0 - np.exp(log_w + log_prior).mean(axis=-1), 0.0)
    error = float(left.std(ddof=1) / np.sqrt(ess(left)))
    return Weighed(ratio, log_prior, float(left.mean()), error)


def _bottoms(
    posterior: Posterior, base: LatentClassModel, plain: Collapsed, seed: int
) -> tuple[Step, ...]:
    """Return draws of the model: with all labels open first, where only rules tell classes."""
    allocated = draw_allocated(posterior, seed)
    named = Step(plain, allocated)
    n_classes = posterior.model.n_classes
    if base is posterior.model or n_classes > MOST_RELABELLED:
        return (named,)
    unnamed = collapse(without_names(posterior.model))
    assert unnamed is not None  # it has fewer bounds than the one with orders
    return (Step(unnamed, allocated, tuple(permutations(range(n_classes)))), named)


def _new_equalities(base: LatentClassModel, under: LatentClassModel) -> tuple[Link, ...]:
    return tuple(link for link in under.links if link.sign == "=" and link not in base.links)


def _refuse_at_the_edge(base: LatentClassModel, equal: Sequence[Link]) -> None:
    """Refuse an equality with 0 or 1 where the prior density is 0 or infinite there (rule 9)."""
    for link in equal:
        for side, other in ((link.left, link.right), (link.right, link.left)):
            if not isinstance(side, Place) or other not in (0.0, 1.0):
                continue
            a, rest = _margin(base, side)
            at = a if other == 0.0 else rest
            if at != 1.0:
                size = "0" if at > 1.0 else "infinite"
                msg = (
                    f"'{link.text}' cannot be tested: the prior density at {other:g} is {size} "
                    f"under Beta({a:g}, {rest:g}). Test a small value instead, such as "
                    f"{'< 0.02' if other == 0.0 else '> 0.98'}."
                )
                raise ModelError(msg)


def _margin(model: LatentClassModel, place: Place) -> tuple[float, float]:
    """Return the Beta parameters of one probability."""
    vector = place.vector
    if isinstance(vector, PrevalenceVector):
        every = model.priors.prevalence[vector.group]
    elif isinstance(vector, ConditionalVector):
        one = model.item_sets[vector.item_set]
        every = np.asarray(one.given(vector.latent_class, vector.given))
    else:
        by_item = model.priors.response[vector.response_group]
        every = by_item[vector.item][vector.latent_class]
    a = float(every[place.category])
    return a, float(every.sum()) - a
