"""Steps between a model and a hypothesis that its posterior hardly touches.

Where draws under the model and draws under the hypothesis have next to nothing in common, models
between them are sampled too: the fitted model with more and more imagined answers, as many as
would lead it to what the hypothesis leads to. Imagined answers are Dirichlet parameters, so each
step is drawn as exactly as the model itself. Neighbouring steps are bridged; their log ratios add
up, and steps are put in where a bridge is weak.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields, replace
from functools import cached_property
from math import hypot
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.hypothesis.allocated import Allocated, draw_allocated, thinned
from bayeslca.assess.hypothesis.bridge import LogRatio, bridge_ratio
from bayeslca.assess.hypothesis.collapsed import Collapsed, collapse
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.priors import PriorTable
from bayeslca.posterior.fit import fit

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses

GOOD_ENOUGH = 0.08
"""With a larger error of the whole, steps are put in."""
GOOD_BRIDGE = 0.03
"""Largest error of one bridge that is taken without putting in a step."""
MOST_STEPS = 7
MOST_DRAWS = 1_600
"""Draws of the classes that a step keeps: their evidence is worked out many times."""
CHAINS, DRAWS, ESS, MOST_SWEEPS = 4, 400, 400.0, 20_000


@dataclass(frozen=True, repr=False)
class TiltedModel(LatentClassModel):
    """A model with imagined answers added to its priors.

    Attributes
    ----------
    tilt : tuple
        ``tilt[g][j][k]`` is added to the parameters (category,) of an item in a class.
    prevalence_tilt : tuple
        ``prevalence_tilt[g]`` is added to those (K,) of the prevalences.
    """

    tilt: tuple[tuple[tuple[tuple[float, ...], ...], ...], ...] = ()
    prevalence_tilt: tuple[tuple[float, ...], ...] = ()

    @cached_property
    def priors(self) -> PriorTable:
        """The Dirichlet parameters with the imagined answers."""
        found = super().priors
        return replace(
            found,
            prevalence=found.prevalence + np.asarray(self.prevalence_tilt),
            response=tuple(
                tuple(
                    tuple(a + np.asarray(t) for a, t in zip(of_item, tilts, strict=True))
                    for of_item, tilts in zip(of_group, self.tilt[g], strict=True)
                )
                for g, of_group in enumerate(found.response)
            ),
        )


@dataclass(frozen=True, eq=False)
class Step:
    """A model of the ladder, with its classes drawn.

    Attributes
    ----------
    collapsed : Collapsed
    allocated : Allocated
    labellings : tuple of tuple of int
        Orders of the classes that the model does not tell apart: draws stand for all of them.
    """

    collapsed: Collapsed
    allocated: Allocated
    labellings: tuple[tuple[int, ...], ...] = ()

    @cached_property
    def own(self) -> Floats:
        """Log p(answers, classes) (chain, draw, 1) at this model's own draws."""
        found = self.collapsed.log_evidence(self.allocated)
        return found.reshape(self.allocated.chains, -1, 1)

    def log_evidence(self, other: Step) -> Floats:
        """Return log p(answers, classes) (chain, draw, label) of this model at another's draws."""
        at = [other.allocated.relabelled(order) for order in other.labellings]
        found = [self.collapsed.log_evidence(one) for one in at or [other.allocated]]
        return np.stack(found, axis=-1).reshape(other.allocated.chains, -1, len(found))


def bridged(low: Step, high: Step) -> LogRatio:
    """Return the log ratio of the evidence of the higher step to that of the lower."""
    return bridge_ratio(
        high.log_evidence(low) - low.own,
        (high.own - low.log_evidence(high))[:, :, 0],
    )


def climb(
    base: LatentClassModel,
    bottoms: Sequence[Step],
    under: LatentClassModel,
    responses: Responses,
    seed: int,
) -> LogRatio:
    """Return the log ratio of the evidence under a hypothesis to that of the model.

    Parameters
    ----------
    base : LatentClassModel
    bottoms : sequence of Step
        Draws of it, last as named; before, where there is one, with all labels left open.
    under : LatentClassModel
    responses : Responses
    seed : int
    """
    seeds = iter(np.random.SeedSequence(seed).generate_state(4 * MOST_STEPS).tolist())
    sampled, top = _step(under, responses, seeds)
    bottoms = [replace(one, allocated=thinned(one.allocated, MOST_DRAWS)) for one in bottoms]
    direct = bridged(bottoms[0], top)
    bottom = bottoms[-1]
    if direct.mcse <= GOOD_ENOUGH:
        return direct
    full = _tilts(base, sampled, top.allocated)

    def at(share: float) -> Step:
        return _step(_tilted(base, full, share), responses, seeds)[1]

    ladder = [(0.0, bottom), (1.0, at(1.0))]
    last = bridged(ladder[-1][1], top)
    bridges = [bridged(ladder[0][1], ladder[1][1])]
    while len(ladder) < MOST_STEPS:
        weakest = max(range(len(bridges)), key=lambda i: bridges[i].mcse)
        if bridges[weakest].mcse <= GOOD_BRIDGE:
            break
        (low, below), (high, above) = ladder[weakest], ladder[weakest + 1]
        between = at(0.5 * (low + high))
        ladder.insert(weakest + 1, (0.5 * (low + high), between))
        bridges[weakest : weakest + 1] = [bridged(below, between), bridged(between, above)]
    every = [*bridges, last]
    found = LogRatio(sum(b.value for b in every), hypot(*(b.mcse for b in every)))
    return found if found.mcse < direct.mcse else direct


def _step(
    model: LatentClassModel, responses: Responses, seeds: Iterator[int]
) -> tuple[Posterior, Step]:
    posterior = fit(
        model,
        responses,
        seed=next(seeds),
        chains=CHAINS,
        draws=DRAWS,
        ess=ESS,
        max_sweeps=MOST_SWEEPS,
        progress=False,
    )
    collapsed = collapse(model)
    assert collapsed is not None  # the hypothesis was collapsed before, and tilts bind nothing
    return posterior, Step(collapsed, draw_allocated(posterior, next(seeds)))


@dataclass(frozen=True, eq=False)
class _Tilts:
    response: tuple[tuple[tuple[Floats, ...], ...], ...]
    prevalence: tuple[Floats, ...]


def _tilts(base: LatentClassModel, sampled: Posterior, allocated: Allocated) -> _Tilts:
    """Return the imagined answers that lead the model to what the hypothesis leads to."""
    start, group_of = base.table.item_start, base.table.response_group
    means = sampled.response_probability_draws.mean(axis=(0, 1))  # (G, K, A)
    every_class = sampled.response_probability_draws.shape[3]
    counts = allocated.answers.mean(axis=0)  # (groups, K, A)
    shared = np.stack(
        [counts[group_of == g].sum(axis=0) for g in range(base.table.n_response_groups)]
    )
    response = []
    for g, of_group in enumerate(base.priors.response):
        at = min(g, means.shape[0] - 1)
        by_item = []
        for j, of_item in enumerate(of_group):
            columns = slice(start[j], start[j + 1])
            found = [
                _imagined(of_item[k] + shared[g, k, columns], means[at, k, columns])
                for k in range(every_class)
            ]
            by_item.append(_alike(found) if base.exploratory else tuple(found))
        response.append(tuple(by_item))
    prevalence = sampled.prevalence_draws.mean(axis=(0, 1))
    cases = allocated.cases.mean(axis=0)
    shares = [
        _imagined(a + n, mean)
        for a, n, mean in zip(base.priors.prevalence, cases, prevalence, strict=True)
    ]
    if base.exploratory or base.pooled:  # pooled: one prior, and nothing is stated on it
        shares = [np.zeros_like(share) for share in shares]
    return _Tilts(tuple(response), tuple(shares))


def _imagined(parameter: Floats, mean: Floats) -> Floats:
    """Return what must be added to Dirichlet parameters for a given mean; the least there is."""
    target = np.clip(mean, 1e-3, None)
    target = target / target.sum()
    added = np.max(parameter / target) * target - parameter
    # What sampling noise alone asks for is left out: it would only make the ladder longer.
    return np.where(added.sum() < 0.05 * parameter.sum(), 0.0, np.maximum(added, 0.0))


def _alike(found: list[Floats]) -> tuple[Floats, ...]:
    """Give exchangeable classes the same imagined answers."""
    mean = np.mean(found, axis=0)
    return tuple(mean for _ in found)


def _tilted(base: LatentClassModel, full: _Tilts, share: float) -> TiltedModel:
    same = {field.name: getattr(base, field.name) for field in fields(LatentClassModel)}
    tilt = tuple(
        tuple(tuple(tuple((share * t).tolist()) for t in of_item) for of_item in of_group)
        for of_group in full.response
    )
    return TiltedModel(
        **same,
        tilt=tilt,
        prevalence_tilt=tuple(tuple((share * t).tolist()) for t in full.prevalence),
    )
