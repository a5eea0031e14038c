"""The Gibbs sweep where units are pooled: mean and spread are drawn before the prevalences.

Classes and blocks are drawn as elsewhere. Numba code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounded_blocks import keeps_bounds
from bayeslca.sampling.bounded_gibbs import draw_bounded_blocks
from bayeslca.sampling.bounds_layout import Bounded
from bayeslca.sampling.compiled import compiled
from bayeslca.sampling.gibbs import allocate, draw_prevalence, keep_state
from bayeslca.sampling.label_move import swap_labels
from bayeslca.sampling.layout import Layout, Workspace
from bayeslca.sampling.pool_layout import Pool
from bayeslca.sampling.pooled_step import draw_pool


@compiled
def run_pooled_sweeps(
    layout: Layout,
    work: Workspace,
    bounds: Bounded,
    pool: Pool,
    old_elements: Floats,
    state: Floats,
    kept_concentration: Floats,
    permutations: Ints,
    element_maps: Ints,
    moves_every: int,
    first_sweep: int,
    thin: int,
    elements: Floats,
    prevalence: Floats,
    kept_elements: Floats,
    kept_prevalence: Floats,
    kept_log_likelihood: Floats,
    kept_swaps: Floats,
    rng: np.random.Generator,
) -> int:
    """Do ``thin`` sweeps for each place in the arrays of kept draws, and fill them.

    Parameters and result as of `bayeslca.sampling.gibbs.run_sweeps`, and:

    Parameters
    ----------
    bounds : Bounded
        Of the table's elements.
    pool : Pool
    old_elements : ndarray, shape (E,)
        Scratch.
    state : ndarray, shape (groups, K)
        Concentration times mean, the same in every row; replaced by the new draw.
    kept_concentration : ndarray, shape (draw, K)
    """
    done = first_sweep
    n_classes = prevalence.shape[1]
    for draw in range(kept_log_likelihood.shape[0]):
        swaps = 0
        for step in range(thin):
            done += 1
            if permutations.shape[0] and done % moves_every == 0:
                # The units' prevalences move with their mean, whose prior alone is weighed.
                old_elements[:] = elements
                for k in range(n_classes):
                    pool.mean[k] = state[0, k]
                total = pool.mean.sum()
                pool.mean[:] = pool.mean / total
                one = pool.mean.reshape((1, n_classes))
                move = swap_labels(
                    layout, work, pool.first_row, permutations, element_maps, elements, one, rng
                )
                if move and bounds.block.shape[0] and not keeps_bounds(bounds, elements):
                    elements[:] = old_elements
                elif move:
                    swaps += 1
                    for g in range(prevalence.shape[0]):
                        for k in range(n_classes):
                            old = permutations[move - 1, g, k]
                            work.swap_prevalence[g, k] = prevalence[g, old]
                            state[g, k] = total * one[0, k]
                    prevalence[:, :] = work.swap_prevalence
            if step == thin - 1:
                keep_state(elements, prevalence, kept_elements, kept_prevalence, draw)
                for k in range(n_classes):
                    kept_concentration[draw, k] = state[0, k]
            log_likelihood = allocate(layout, work, elements, prevalence, rng)
            if math.isnan(log_likelihood):
                return 1
            draw_bounded_blocks(layout, work, bounds, elements, rng)
            draw_pool(
                pool.mean_prior,
                pool.spread_prior,
                pool.at_least,
                pool.parameter,
                pool.mean,
                pool.start,
                work.class_count,
                state,
                rng,
            )
            draw_prevalence(layout, work, state, prevalence, rng)
        kept_log_likelihood[draw] = log_likelihood
        kept_swaps[draw] = swaps
    return 0
