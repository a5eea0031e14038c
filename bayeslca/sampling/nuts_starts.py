"""Where the chains of NUTS start: in the modes that short Gibbs runs found, in one labelling.

NUTS does not move between labellings that the priors tell apart, so it must start in the most
probable one.
"""

from __future__ import annotations

import threading
from typing import TypeAlias

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import SamplingError
from bayeslca.model.prior_density import log_prior
from bayeslca.model.probabilities import draw_elements
from bayeslca.model.pymc.model import Parts
from bayeslca.model.symmetry import Symmetry, element_map
from bayeslca.sampling.chain import make_task
from bayeslca.sampling.starting_points import StartingPoints, find_starting_points

State: TypeAlias = tuple[Floats, Floats, Floats | None]
"""Elements (E,), prevalence (rows, K) and, of pooled units, concentration (K,)."""
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
    states: list[State]
    points = None
    try:
        task = make_task(table, parts.units, source, None)
    except SamplingError:
        rngs = [np.random.default_rng(child) for child in sequence.spawn(chains)]
        states = [(draw_elements(table, rng), source.simulate(rng), None) for rng in rngs]
    else:
        points, short = find_starting_points(
            task, sequence, chains=chains, threads=threads, stop=threading.Event()
        )
        states = [(chain.elements, chain.prevalence, chain.concentration) for chain in short]
    if labels is not None:
        states = [best_labelling(parts, labels, *state) for state in states]
    block = table.element_block
    out = []
    for elements, prevalence, concentration in states:
        inside = np.maximum(elements, EDGE)
        sums = np.bincount(block, weights=inside, minlength=table.n_blocks)[block]
        shares = np.maximum(prevalence, EDGE)
        shares = shares / shares.sum(axis=-1, keepdims=True)
        out.append(parts.values(inside / sums, shares, concentration))
    return points, out


def best_labelling(
    parts: Parts,
    labels: Symmetry,
    elements: Floats,
    prevalence: Floats,
    concentration: Floats | None = None,
) -> State:
    """Permute the labels, the likelihood unchanged, to where the prior density is highest.

    Goes uphill by the group's proposals, which are all transpositions or all members.
    """
    table, source = parts.table, parts.source
    best = float(log_prior(table, source, elements, prevalence, concentration))
    improved = labels.table_group.n_members > labels.prior_group.n_members
    while improved:
        improved = False
        for permutation in labels.table_group.proposals:
            moved = elements[element_map(table, permutation)]
            shares = np.take_along_axis(prevalence, permutation, axis=1)
            pooled = None if concentration is None else concentration[permutation[0]]
            density = float(log_prior(table, source, moved, shares, pooled))
            if density > best + 1e-9:
                elements, prevalence, concentration = moved, shares, pooled
                best, improved = density, True
    return elements, prevalence, concentration
