"""The compiled half of a joint sweep: classes and response probabilities.

Steps of the joint model's own (`bayeslca.sampling.steps`) follow in the same sweep, outside. Numba
code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounded_gibbs import draw_bounded_blocks
from bayeslca.sampling.bounds_layout import Bounded
from bayeslca.sampling.compiled import compiled
from bayeslca.sampling.gibbs import allocate, draw_blocks
from bayeslca.sampling.layout import Layout, Workspace


@compiled
def classes_only(
    layout: Layout,
    work: Workspace,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> float:
    """Draw classes, response probabilities held; see `bayeslca.sampling.gibbs.allocate`."""
    return allocate(layout, work, elements, prevalence, rng)


@compiled
def classes_and_blocks(
    layout: Layout,
    work: Workspace,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> float:
    """Draw classes, then response probabilities; return the log likelihood before them."""
    log_likelihood = allocate(layout, work, elements, prevalence, rng)
    if not math.isnan(log_likelihood):
        draw_blocks(layout, work, elements, rng)
    return log_likelihood


@compiled
def classes_and_bounded_blocks(
    layout: Layout,
    work: Workspace,
    bounds: Bounded,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> float:
    """Do the same where response probabilities are bounded or ordered."""
    log_likelihood = allocate(layout, work, elements, prevalence, rng)
    if not math.isnan(log_likelihood):
        draw_bounded_blocks(layout, work, bounds, elements, rng)
    return log_likelihood


@compiled
def renew_weights(
    unit: Ints,
    cases: Ints,
    weight_of_unit: Floats,
    log_weight: Floats,
    weight: Floats,
    shift: Floats,
) -> float:
    """Put new log weights (unit, K), in the order of the unit table, into a layout's arrays.

    Returns
    -------
    float
        Sum of cases times shift, owed to the log likelihood.
    """
    owed = 0.0
    for u in range(unit.shape[0]):
        highest = -math.inf
        for k in range(log_weight.shape[1]):
            log_weight[u, k] = weight_of_unit[unit[u], k]
            highest = max(highest, log_weight[u, k])
        shift[u] = highest if highest > -math.inf else 0.0
        for k in range(log_weight.shape[1]):
            weight[u, k] = math.exp(log_weight[u, k] - shift[u])
        owed += cases[u] * shift[u]
    return owed
