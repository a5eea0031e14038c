"""The permutation move: relabel a chain's state where priors tell labellings apart.

Nearly symmetric priors make a posterior of several copies with unequal masses, between which a
Gibbs chain hardly ever crosses by itself. Numba code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled_part
from bayeslca.sampling.layout import Layout, Workspace


@compiled_part
def swap_labels(
    layout: Layout,
    work: Workspace,
    concentration: Floats,
    permutations: Ints,
    element_maps: Ints,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> int:
    """Propose one permutation of the classes that leaves the likelihood unchanged.

    Accepted with the ratio of prior densities, so that chains are not trapped in a labelling
    that the priors like less (or more) than another. The list of moves holds each move's inverse
    too, so the proposal is symmetric.

    Parameters
    ----------
    layout, work, concentration, elements, prevalence, rng : see `sweep`
    permutations : ndarray of int64, shape (M, groups, K)
        permutations[m, g, k] is the old position that becomes class k.
    element_maps : ndarray of int64, shape (M, E)
        New element e takes the value of old element element_maps[m, e].

    Returns
    -------
    int
        The number of the accepted move, counted from 1; 0 when none was accepted.
    """
    move: int = min(int(rng.random() * permutations.shape[0]), permutations.shape[0] - 1)
    log_ratio = 0.0
    for e in range(elements.shape[0]):
        old = element_maps[move, e]
        work.swap_elements[e] = elements[old]
        if layout.element_prior[e] != layout.element_prior[old]:
            log_ratio += (layout.element_prior[e] - layout.element_prior[old]) * math.log(
                elements[old]
            )
    for g in range(prevalence.shape[0]):
        for k in range(prevalence.shape[1]):
            old = permutations[move, g, k]
            work.swap_prevalence[g, k] = prevalence[g, old]
            if concentration[g, k] != concentration[g, old]:
                log_ratio += (concentration[g, k] - concentration[g, old]) * math.log(
                    prevalence[g, old]
                )
    if math.log1p(-rng.random()) >= log_ratio:
        return 0
    for e in range(elements.shape[0]):
        elements[e] = work.swap_elements[e]
    for g in range(prevalence.shape[0]):
        for k in range(prevalence.shape[1]):
            prevalence[g, k] = work.swap_prevalence[g, k]
    return move + 1
