"""From what a model assumes to blocks: vectors with their priors, tied and bounded as stated."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from typing import TYPE_CHECKING

import numpy as np

from bayeslca.exceptions import ModelError
from bayeslca.model.blocks import BlockArrays
from bayeslca.model.bounds import Bounds, bounded_blocks, element_bounds
from bayeslca.model.constrained_prevalence import ConstrainedPrevalence
from bayeslca.model.contradictions import refuse_contradictions
from bayeslca.model.places import (
    ConditionalVector,
    Link,
    Place,
    PrevalenceVector,
    ResponseVector,
    Vector,
)
from bayeslca.model.pooled_prevalence import PooledPrevalence
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.priors import DEFAULT
from bayeslca.model.statements.resolved import PrevalencePrior
from bayeslca.model.ties import Tied, VectorPrior, tie

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


@dataclass(frozen=True)
class Assumptions:
    """Vectors tied and bounded: what response probabilities or prevalences are made of.

    Attributes
    ----------
    tied : Tied
    bounds : Bounds
    """

    tied: Tied
    bounds: Bounds

    @property
    def blocks(self) -> BlockArrays:
        """The blocks with their bounds, as arrays."""
        return bounded_blocks(self.tied.blocks, self.bounds)


def response_assumptions(model: LatentClassModel) -> Assumptions:
    """Return what the response probabilities of a model are made of.

    Raises
    ------
    ModelError
        Where statements contradict each other, or no exact sampler is written for them.
    """
    priors: dict[Vector, VectorPrior] = {}
    sums = {(j, k) for one in model.item_sets for j in one.others for k in one.classes}
    for g in range(model.n_response_groups):
        for j in range(len(model.items)):
            if g and j not in model.free_items:
                continue
            for k in range(model.n_classes):
                if (j, k) in sums:
                    continue
                origin = model.priors.response_origin[g][j][k]
                priors[ResponseVector(g, j, k)] = VectorPrior(
                    tuple(model.priors.response[g][j][k].tolist()),
                    None if origin == DEFAULT else origin,
                )
    for s, one in enumerate(model.item_sets):
        for g in range(model.n_response_groups if one.first in model.free_items else 1):
            for k, a in product(sorted(one.classes), range(one.sizes[0])):
                priors[ConditionalVector(g, s, k, a)] = VectorPrior(one.given(k, a))
    return _assumed(priors, [link for link in model.links if not link.on_prevalences])


def prevalence_source(
    model: LatentClassModel,
) -> DirichletPrevalence | ConstrainedPrevalence | PooledPrevalence:
    """Return the prior of a model's prevalences.

    Raises
    ------
    ModelError
        As `response_assumptions`.
    """
    links = [link for link in model.links if link.on_prevalences]
    concentration = model.priors.prevalence
    if model.pooled:
        return _pooled(model, links)
    if not links:
        return DirichletPrevalence(concentration)
    priors: dict[Vector, VectorPrior] = {}
    for g, a in enumerate(concentration):
        origin = model.priors.prevalence_origin[g]
        stated = None if origin == DEFAULT else origin
        priors[PrevalenceVector(g)] = VectorPrior(tuple(a.tolist()), stated)
    assumed = _assumed(priors, links)
    element = np.full(concentration.shape, -1, dtype=np.int64)
    share = np.empty(concentration.shape)
    for g, k in np.ndindex(*concentration.shape):
        form = assumed.tied.forms[Place(PrevalenceVector(g), k)]
        if len(form.elements) > 1:
            msg = (
                "single prevalences of several groups are equal while others differ "
                f"({'; '.join(dict.fromkeys(link.text for link in links if link.sign == '='))}): "
                "no exact sampler is written for that. Make all prevalences of these groups "
                "equal, or none."
            )
            raise ModelError(msg)
        share[g, k] = form.constant
        if form.elements:
            element[g, k] = form.elements[0]
    return ConstrainedPrevalence(concentration, element, share, assumed.blocks)


def _pooled(model: LatentClassModel, links: Sequence[Link]) -> PooledPrevalence:
    """Return the common prior of pooled units; what is about single units is refused."""
    name = model.groups.name if model.groups else "group"
    stated = {prior.text for prior in model.stated.priors if isinstance(prior, PrevalencePrior)}
    of_one = [
        p for p in model.stated.priors if isinstance(p, PrevalencePrior) and p.group is not None
    ]
    if of_one or len(stated) > 1:
        text = of_one[0].text if of_one else sorted(stated)[0]
        msg = (
            f"'{text}' gives one {name} a prior of its own, and pooled units have one prior "
            "together. State it of all classes without a group: it is then the prior of their "
            "mean. Or leave out pooled=True."
        )
        raise ModelError(msg)
    if links:
        msg = (
            f"'{links[0].text}' holds prevalences to be known, equal, bounded or ordered, and no "
            "sampler is written for that where units are pooled. Test it as a hypothesis on the "
            "posterior instead, or leave out pooled=True."
        )
        raise ModelError(msg)
    return PooledPrevalence(model.n_groups, model.priors.prevalence[0], model.spread_prior)


def _assumed(priors: Mapping[Vector, VectorPrior], links: Sequence[Link]) -> Assumptions:
    refuse_contradictions(links, {vector: len(p.concentration) for vector, p in priors.items()})
    tied = tie(priors, links)
    return Assumptions(tied, element_bounds(tied, links))
