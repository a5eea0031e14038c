"""Where the chains of NUTS start: in the modes that short Gibbs runs found, in one labelling.

NUTS does not move between labellings that the priors tell apart, so it must start in the most
probable one.
"""

from __future__ import annotations

import threading

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import SamplingError
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import draw_elements
from bayeslca.model.pymc_model import Parts
from bayeslca.model.symmetry import Symmetry, element_map
from bayeslca.sampling.chain import make_task
from bayeslca.sampling.starting_points import StartingPoints, find_starting_points

EDGE = 1e-6
"""Chains start at least this far from 0 and 1, where the real line has no end."""


def starting_values(
    parts: Parts,
    labels: Symmetry | None,
    sequence: np.random.SeedSequence,
    *,
    chains: int,
    threads: int,
) -> tuple[StartingPoints | None, list[dict[str, Floats]]]:
    """Find where each chain starts, as values by variable name.

    Short Gibbs runs search; where there is no Gibbs sampler chains start from the prior. With
    ``labels``, each chain starts in its mode's most probable labelling.
    """
    table, source = parts.table, parts.source
    states: list[tuple[Floats, Floats]]
    points = None
    try:
        task = make_task(table, parts.units, source, None)
    except SamplingError:
        rngs = [np.random.default_rng(child) for child in sequence.spawn(chains)]
        states = [(draw_elements(table, rng), source.simulate(rng)) for rng in rngs]
    else:
        points, short = find_starting_points(
            task, sequence, chains=chains, threads=threads, stop=threading.Event()
        )
        states = [(chain.elements, chain.prevalence) for chain in short]
    if labels is not None:
        states = [best_labelling(parts, labels, *state) for state in states]
    block = table.element_block
    out = []
    for elements, prevalence in states:
        inside = np.maximum(elements, EDGE)
        sums = np.bincount(block, weights=inside, minlength=table.n_blocks)[block]
        shares = np.maximum(prevalence, EDGE)
        out.append(parts.values(inside / sums, shares / shares.sum(axis=-1, keepdims=True)))
    return points, out


def best_labelling(
    parts: Parts, labels: Symmetry, elements: Floats, prevalence: Floats
) -> tuple[Floats, Floats]:
    """Permute the labels, the likelihood unchanged, to where the prior density is highest.

    Goes uphill by the group's proposals, which are all transpositions or all members.
    """
    table, source = parts.table, parts.source
    best = float(log_prior(table, source, elements, prevalence))
    improved = labels.table_group.n_members > labels.prior_group.n_members
    while improved:
        improved = False
        for permutation in labels.table_group.proposals:
            moved = elements[element_map(table, permutation)]
            shares = np.take_along_axis(prevalence, permutation, axis=1)
            density = float(log_prior(table, source, moved, shares))
            if density > best + 1e-9:
                elements, prevalence, best, improved = moved, shares, density, True
    return elements, prevalence
