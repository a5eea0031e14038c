"""The Gibbs sweep on units: classes given parameters, parameters given classes.

One sweep is `allocate` (rows from elements, each unit's cases split over the classes, counts
back to elements; the log likelihood of the parameters falls out on the way), `draw_blocks` and
`draw_prevalence`. Pure functions of arrays and an explicit generator. Numba code: import inside
functions.

A sweep costs less than twice its random numbers because units share parts (see
`bayeslca.sampling.layout`) and because weights are products, not sums of logs; a unit whose
product falls below 1e-280 is done again in logs.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled
from bayeslca.sampling.layout import Layout, Workspace
from bayeslca.sampling.split import draw_shares, pick, split_count

TOO_SMALL = 1e-280
"""Below it a product of probabilities may have lost digits to underflow."""

LOG_NOW = 1e-200
"""A running product of likelihoods is turned into a log when it falls below this."""


@compiled
def sweep(
    layout: Layout,
    work: Workspace,
    concentration: Floats,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> float:
    """Do one sweep of classes, blocks and Dirichlet prevalences, in place.

    Parameters
    ----------
    layout : Layout
    work : Workspace
        Of this chain alone.
    concentration : ndarray of float64, shape (groups, K)
    elements : ndarray of float64, shape (E,)
        Replaced by the new draw.
    prevalence : ndarray of float64, shape (groups, K)
        Replaced by the new draw.
    rng : numpy.random.Generator

    Returns
    -------
    float
        Log likelihood (class summed out) of the elements and prevalences as they came in; nan
        when a unit has probability 0 in every class, and nothing is drawn then.
    """
    log_likelihood = allocate(layout, work, elements, prevalence, rng)
    if math.isnan(log_likelihood):
        return log_likelihood
    draw_blocks(layout, work, elements, rng)
    draw_prevalence(concentration, work, prevalence, rng)
    return log_likelihood


@compiled
def allocate(
    layout: Layout,
    work: Workspace,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> float:
    """Split every unit's cases over the classes, and count what that gives.

    Leaves ``work.element_parameter`` (prior plus counts), ``work.class_count`` and, on request,
    ``work.unit_count`` and ``work.unit_log_probability``. Returns the log likelihood, nan when
    a unit is impossible.
    """
    _rows_from_elements(layout, work, elements)
    _parts_from_rows(layout, work)
    log_likelihood = _split_units(layout, work, prevalence, rng)
    _rows_from_parts(layout, work)
    _elements_from_rows(layout, work, elements, rng)
    return log_likelihood


@compiled
def draw_blocks(
    layout: Layout, work: Workspace, elements: Floats, rng: np.random.Generator
) -> None:
    """Draw every block from its Dirichlet given the counts that `allocate` left."""
    for b in range(layout.block_start.shape[0] - 1):
        draw_shares(
            work.element_parameter, layout.block_start[b], layout.block_start[b + 1], elements, rng
        )


@compiled
def draw_prevalence(
    concentration: Floats, work: Workspace, prevalence: Floats, rng: np.random.Generator
) -> None:
    """Draw each prevalence row from its Dirichlet given the counts that `allocate` left."""
    n_classes = prevalence.shape[1]
    for g in range(prevalence.shape[0]):
        for k in range(n_classes):
            work.weights[k] = concentration[g, k] + work.class_count[g, k]
        draw_shares(work.weights, 0, n_classes, prevalence[g], rng)


@compiled
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
        1 when accepted, 0 otherwise.
    """
    move = min(int(rng.random() * permutations.shape[0]), permutations.shape[0] - 1)
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
    elements[:] = work.swap_elements
    prevalence[:] = work.swap_prevalence
    return 1


@compiled
def run_sweeps(
    layout: Layout,
    work: Workspace,
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

    A kept draw is the state *before* the last of its sweeps, because that sweep computes the
    log likelihood of the state it starts from.

    Parameters
    ----------
    layout, work, concentration, elements, prevalence, rng : see `sweep`
    permutations, element_maps : see `swap_labels`; empty when there is no move
    moves_every : int
        Sweeps between two permutation moves.
    first_sweep : int
        How many sweeps this chain has done: decides when the moves fall.
    thin : int
    kept_elements : ndarray, shape (draw, E)
    kept_prevalence : ndarray, shape (draw, groups, K)
    kept_log_likelihood : ndarray, shape (draw,)
    kept_swaps : ndarray, shape (draw,)
        Permutation moves accepted since the draw before.

    Returns
    -------
    int
        0, or 1 when a unit had probability 0 in every class.
    """
    done = first_sweep
    for draw in range(kept_log_likelihood.shape[0]):
        swaps = 0
        for step in range(thin):
            done += 1
            if permutations.shape[0] and done % moves_every == 0:
                swaps += swap_labels(
                    layout,
                    work,
                    concentration,
                    permutations,
                    element_maps,
                    elements,
                    prevalence,
                    rng,
                )
            if step == thin - 1:
                kept_elements[draw] = elements
                kept_prevalence[draw] = prevalence
            log_likelihood = sweep(layout, work, concentration, elements, prevalence, rng)
            if math.isnan(log_likelihood):
                return 1
        kept_log_likelihood[draw] = log_likelihood
        kept_swaps[draw] = swaps
    return 0


@compiled
def _rows_from_elements(layout: Layout, work: Workspace, elements: Floats) -> None:
    direct = layout.direct_element
    out = work.row_probability
    for r in range(direct.shape[0]):
        for k in range(direct.shape[1]):
            out[r, k] = elements[max(direct[r, k], 0)] if direct[r, k] >= 0 else 0.0
    for i in range(layout.general.shape[0]):
        r, k = layout.general[i, 0], layout.general[i, 1]
        cells = layout.cell_start[r * direct.shape[1] + k : r * direct.shape[1] + k + 2]
        for c in range(cells[0], cells[1]):
            out[r, k] += _cell_probability(layout, c, elements)


@compiled
def _cell_probability(layout: Layout, cell: int, elements: Floats) -> float:
    product = layout.cell_constant[cell]
    for i in range(layout.cell_element_start[cell], layout.cell_element_start[cell + 1]):
        product *= elements[layout.cell_element[i]]
    return float(product)


@compiled
def _parts_from_rows(layout: Layout, work: Workspace) -> None:
    n_classes = work.row_probability.shape[1]
    for s in range(work.part_probability.shape[0]):
        for k in range(n_classes):
            work.part_probability[s, k] = 1.0
            work.part_count[s, k] = 0
        for i in range(layout.part_start[s], layout.part_start[s + 1]):
            r = layout.part_row[i]
            for k in range(n_classes):
                work.part_probability[s, k] *= work.row_probability[r, k]


@compiled
def _split_units(
    layout: Layout, work: Workspace, prevalence: Floats, rng: np.random.Generator
) -> float:
    """Split all units; return the log likelihood, nan when a unit is impossible."""
    n_classes = prevalence.shape[1]
    n_chunks = layout.unit_part.shape[1]
    weights, numbers = work.weights, work.numbers
    weighted = layout.weight.shape[0] > 0
    keep = work.unit_count.shape[0] > 0
    log_likelihood = layout.log_shift
    running = 1.0
    work.class_count[:] = 0
    for u in range(layout.cases.shape[0]):
        g = layout.prevalence_row[u]
        for k in range(n_classes):
            weights[k] = prevalence[g, k]
        for h in range(n_chunks):
            s = layout.unit_part[u, h]
            for k in range(n_classes):
                weights[k] *= work.part_probability[s, k]
        if weighted:
            for k in range(n_classes):
                weights[k] *= layout.weight[u, k]
        total = 0.0
        for k in range(n_classes):
            total += weights[k]
        rescued = 0.0
        if total < TOO_SMALL:
            rescued = _weights_in_logs(layout, work, prevalence, u)
            if rescued == -math.inf:
                return math.nan
            total = 0.0
            for k in range(n_classes):
                total += weights[k]
        count = layout.cases[u]
        if keep:
            work.unit_log_probability[u] = math.log(total) + rescued
            if weighted:
                work.unit_log_probability[u] += layout.shift[u]
        if count == 1 and not keep:
            running *= total
            log_likelihood += rescued
            if running < LOG_NOW or running > 1.0 / LOG_NOW:
                log_likelihood += math.log(running)
                running = 1.0
            k = pick(weights, total, rng)
            work.class_count[g, k] += 1
            for h in range(n_chunks):
                work.part_count[layout.unit_part[u, h], k] += 1
            continue
        log_likelihood += count * (math.log(total) + rescued)
        split_count(count, weights, total, numbers, rng)
        for k in range(n_classes):
            work.class_count[g, k] += numbers[k]
            if keep:
                work.unit_count[u, k] = numbers[k]
        for h in range(n_chunks):
            s = layout.unit_part[u, h]
            for k in range(n_classes):
                work.part_count[s, k] += numbers[k]
    return log_likelihood + math.log(running)


@compiled
def _weights_in_logs(layout: Layout, work: Workspace, prevalence: Floats, u: int) -> float:
    """Set the weights of a unit whose products underflow, the largest to 1; return its log."""
    n_classes = prevalence.shape[1]
    highest = -math.inf
    for k in range(n_classes):
        log_weight = math.log(prevalence[layout.prevalence_row[u], k])
        if layout.log_weight.shape[0]:
            log_weight += layout.log_weight[u, k] - layout.shift[u]
        for h in range(layout.unit_part.shape[1]):
            s = layout.unit_part[u, h]
            for i in range(layout.part_start[s], layout.part_start[s + 1]):
                log_weight += math.log(work.row_probability[layout.part_row[i], k])
        work.weights[k] = log_weight
        highest = max(highest, log_weight)
    if highest == -math.inf:
        return highest
    for k in range(n_classes):
        work.weights[k] = math.exp(work.weights[k] - highest)
    return highest


@compiled
def _rows_from_parts(layout: Layout, work: Workspace) -> None:
    work.row_count[:] = 0
    for s in range(work.part_count.shape[0]):
        for i in range(layout.part_start[s], layout.part_start[s + 1]):
            r = layout.part_row[i]
            for k in range(work.part_count.shape[1]):
                work.row_count[r, k] += work.part_count[s, k]


@compiled
def _elements_from_rows(
    layout: Layout, work: Workspace, elements: Floats, rng: np.random.Generator
) -> None:
    """Add the rows' counts to the elements; a row of several cells is split over them first."""
    direct = layout.direct_element
    n_classes = direct.shape[1]
    parameter = work.element_parameter
    parameter[:] = layout.element_prior
    for r in range(direct.shape[0]):
        for k in range(n_classes):
            if direct[r, k] >= 0:
                parameter[direct[r, k]] += work.row_count[r, k]
    for i in range(layout.general.shape[0]):
        r, k = layout.general[i, 0], layout.general[i, 1]
        count = work.row_count[r, k]
        if count:
            first = layout.cell_start[r * n_classes + k]
            n_cells = layout.cell_start[r * n_classes + k + 1] - first
            _count_cells(layout, work, elements, first, n_cells, count, rng)


@compiled
def _count_cells(
    layout: Layout,
    work: Workspace,
    elements: Floats,
    first: int,
    n_cells: int,
    count: int,
    rng: np.random.Generator,
) -> None:
    total = 0.0
    for c in range(n_cells):
        work.cells[c] = _cell_probability(layout, first + c, elements)
        total += work.cells[c]
    left = count
    for c in range(n_cells):
        taken = left
        if c < n_cells - 1 and left > 0:
            share = work.cells[c] / total if total > 0.0 else 0.0
            taken = left if share >= 1.0 else rng.binomial(left, max(share, 0.0))
            total -= work.cells[c]
        left -= taken
        for i in range(
            layout.cell_element_start[first + c], layout.cell_element_start[first + c + 1]
        ):
            work.element_parameter[layout.cell_element[i]] += taken
