"""Measurement models whose posterior is one point: response probabilities that are known."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

import bayeslca as lca
from bayeslca.model.simulate import Parameters, parameters_from
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled

CLASSES = ("high", "low")


def known_posterior(
    n: int, yes: tuple[float, float], shares: tuple[float, float], seed: int, items: int = 5
) -> tuple[lca.Posterior, np.ndarray]:
    """Return a posterior at the true parameters, and the true class of each case."""
    model = lca.LatentClassModel(
        [lca.Item(f"i{j}", ("no", "yes"), yes="yes") for j in range(items)],
        list(CLASSES),
        statements=["P(i0=yes | high) > P(i0=yes | low)"],
    )
    probability = {item.name: dict(zip(CLASSES, yes, strict=True)) for item in model.items}
    truth: Parameters = parameters_from(model, shares, probability)
    drawn = model.simulate(n, seed=seed, parameters=truth)
    shape = (4, 100)
    draws = Draws(
        elements=np.tile(truth.elements, (*shape, 1)),
        prevalence=np.tile(truth.prevalence, (*shape, 1, 1)),
        log_likelihood=np.zeros(shape),
        log_prior=np.zeros(shape),
    )
    permutations = np.tile(np.arange(2), (*shape, 1, 1))
    responses = replace(drawn.responses, case_ids=tuple(map(str, range(n))), case_name="case")
    return lca.Posterior(model, responses, Relabelled(draws, permutations)), drawn.latent_class
