"""The Gibbs sweep where probabilities are bounded or ordered, or prevalences constrained.

Classes are drawn as in `bayeslca.sampling.gibbs`; only what follows differs. A sweep of its own,
because what bounds need would cost every unbounded sweep a quarter of its time. Numba code:
import inside functions.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.bounded_blocks import draw_bounded, elements_of_shares, keeps_bounds
from bayeslca.sampling.bounds_layout import Bounded, Shares
from bayeslca.sampling.compiled import compiled, compiled_inline
from bayeslca.sampling.gibbs import allocate, draw_prevalence, keep_state
from bayeslca.sampling.label_move import swap_labels
from bayeslca.sampling.layout import Layout, Workspace
from bayeslca.sampling.split import draw_shares_of


class Scratch(NamedTuple):
    """Scratch arrays of one chain: elements of prevalences and a state to go back to."""

    elements: Floats
    parameter: Floats
    old_elements: Floats
    old_prevalence: Floats


def scratch(layout: Layout, shares: Shares) -> Scratch:
    """Return the scratch arrays of one chain."""
    n_classes = layout.direct_element.shape[1]
    return Scratch(
        np.zeros(shares.prior.size),
        np.zeros(shares.prior.size),
        np.zeros(layout.element_prior.size),
        np.zeros((layout.groups, n_classes)),
    )


@compiled_inline
def draw_bounded_blocks(
    layout: Layout, work: Workspace, bounds: Bounded, elements: Floats, rng: np.random.Generator
) -> None:
    """Draw every block given the counts that `allocate` left; all lie inside the bounds before."""
    draw_shares_of(bounds.free_block, layout.block_start, work.element_parameter, elements, rng)
    draw_bounded(
        bounds.block,
        bounds.member,
        bounds.lower,
        bounds.upper,
        bounds.over_start,
        bounds.over,
        bounds.under_start,
        bounds.under,
        work.element_parameter,
        elements,
        rng,
    )


@compiled_inline
def draw_constrained_prevalence(
    shares: Shares,
    room: Scratch,
    class_count: Ints,
    prevalence: Floats,
    rng: np.random.Generator,
) -> None:
    """Redraw constrained prevalences in place, given the cases in each class (groups, K)."""
    bounds = shares.bounds
    elements_of_shares(shares.first, shares.share, prevalence, room.elements)
    for e in range(shares.prior.shape[0]):
        room.parameter[e] = shares.prior[e]
    for g in range(prevalence.shape[0]):
        for k in range(prevalence.shape[1]):
            if shares.element[g, k] >= 0:
                room.parameter[shares.element[g, k]] += class_count[g, k]
    draw_shares_of(bounds.free_block, shares.block_start, room.parameter, room.elements, rng)
    draw_bounded(
        bounds.block,
        bounds.member,
        bounds.lower,
        bounds.upper,
        bounds.over_start,
        bounds.over,
        bounds.under_start,
        bounds.under,
        room.parameter,
        room.elements,
        rng,
    )
    for g in range(prevalence.shape[0]):
        for k in range(prevalence.shape[1]):
            prevalence[g, k] = shares.share[g, k]
            if shares.element[g, k] >= 0:
                prevalence[g, k] *= room.elements[shares.element[g, k]]


@compiled
def run_bounded_sweeps(
    layout: Layout,
    work: Workspace,
    bounds: Bounded,
    shares: Shares,
    room: Scratch,
    concentration: Floats,
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
    shares : Shares
        Constrained prevalences; of none where they are not.
    room : Scratch
    """
    done = first_sweep
    for draw in range(kept_log_likelihood.shape[0]):
        swaps = 0
        for step in range(thin):
            done += 1
            if permutations.shape[0] and done % moves_every == 0:
                room.old_elements[:] = elements
                room.old_prevalence[:, :] = prevalence
                moved = swap_labels(
                    layout,
                    work,
                    concentration,
                    permutations,
                    element_maps,
                    elements,
                    prevalence,
                    rng,
                )
                if moved:
                    elements_of_shares(shares.first, shares.share, prevalence, room.elements)
                    if keeps_bounds(bounds, elements) and keeps_bounds(
                        shares.bounds, room.elements
                    ):
                        swaps += 1
                    else:
                        elements[:] = room.old_elements
                        prevalence[:, :] = room.old_prevalence
            if step == thin - 1:
                keep_state(elements, prevalence, kept_elements, kept_prevalence, draw)
            log_likelihood = allocate(layout, work, elements, prevalence, rng)
            if math.isnan(log_likelihood):
                return 1
            draw_bounded_blocks(layout, work, bounds, elements, rng)
            if shares.element.shape[0]:
                draw_constrained_prevalence(shares, room, work.class_count, prevalence, rng)
            else:
                draw_prevalence(layout, work, concentration, prevalence, rng)
        kept_log_likelihood[draw] = log_likelihood
        kept_swaps[draw] = swaps
    return 0
