"""The Gibbs sweep on units: classes given parameters, parameters given classes.

One sweep is `allocate` (rows from elements, each unit's cases split over the classes, counts
back to elements; the log likelihood of the parameters falls out on the way), `draw_blocks` and
`draw_prevalence`. Pure functions of arrays and an explicit generator. Numba code: import inside
functions.

A sweep costs about twice its random numbers because units share parts (see
`bayeslca.sampling.layout`) and because weights are products, not sums of logs; a unit whose
product falls below 1e-100 is done again in logs.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.cells import count_general_rows, general_rows
from bayeslca.sampling.compiled import compiled, compiled_inline, compiled_part
from bayeslca.sampling.label_move import swap_labels
from bayeslca.sampling.layout import Layout, Workspace
from bayeslca.sampling.split import CASE_BY_CASE, draw_shares, pick, split_count

TOO_SMALL = 1e-100
"""A unit whose product of probabilities is below this is done again in logs."""

LOG_NOW = 1e-200
"""A running product of likelihoods is turned into a log when it falls below this."""


@compiled_inline
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
    draw_prevalence(layout, work, concentration, prevalence, rng)
    return log_likelihood


@compiled_inline
def allocate(
    layout: Layout,
    work: Workspace,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> float:
    """Split every unit's cases over the classes, and count what that gives.

    Leaves ``work.element_parameter`` (prior plus counts), ``work.class_count`` and, on request,
    ``work.unit_count`` and ``unit_log_probability``. Returns the log likelihood, nan when
    a unit is impossible.
    """
    _rows_from_elements(layout.direct_element, elements, work.row_probability)
    if layout.general.shape[0]:
        general_rows(layout, work, elements)
    _parts_from_rows(
        layout.part_start, layout.part_row, work.row_probability, work.part_probability
    )
    log_likelihood = layout.log_shift + _split_units(
        layout.unit_part,
        layout.cases,
        layout.prevalence_row,
        layout.weight,
        layout.log_weight,
        layout.shift,
        layout.part_start,
        layout.part_row,
        work.row_probability,
        work.part_probability,
        prevalence,
        work.weights,
        work.cumulative,
        work.numbers,
        work.part_count,
        work.class_count,
        work.unit_count,
        work.unit_log_probability,
        rng,
    )
    _rows_from_parts(layout.part_start, layout.part_row, work.part_count, work.row_count)
    _elements_from_rows(
        layout.direct_element, layout.element_prior, work.row_count, work.element_parameter
    )
    if layout.general.shape[0]:
        count_general_rows(layout, work, elements, rng)
    return log_likelihood


@compiled_inline
def draw_blocks(
    layout: Layout, work: Workspace, elements: Floats, rng: np.random.Generator
) -> None:
    """Draw every block from its Dirichlet given the counts that `allocate` left."""
    draw_shares(layout.block_start, work.element_parameter, elements, rng)


@compiled_inline
def draw_prevalence(
    layout: Layout,
    work: Workspace,
    concentration: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> None:
    """Draw each prevalence row from its Dirichlet given the counts that `allocate` left."""
    n_classes = prevalence.shape[1]
    for g in range(prevalence.shape[0]):
        for k in range(n_classes):
            work.class_parameter[g * n_classes + k] = concentration[g, k] + work.class_count[g, k]
    draw_shares(layout.class_start, work.class_parameter, work.class_share, rng)
    for g in range(prevalence.shape[0]):
        for k in range(n_classes):
            prevalence[g, k] = work.class_share[g * n_classes + k]


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
                swaps += moved > 0
            if step == thin - 1:
                keep_state(elements, prevalence, kept_elements, kept_prevalence, draw)
            log_likelihood = sweep(layout, work, concentration, elements, prevalence, rng)
            if math.isnan(log_likelihood):
                return 1
        kept_log_likelihood[draw] = log_likelihood
        kept_swaps[draw] = swaps
    return 0


@compiled_part
def keep_state(
    elements: Floats,
    prevalence: Floats,
    kept_elements: Floats,
    kept_prevalence: Floats,
    draw: int,
) -> None:
    """Copy a state to a place in the arrays of kept draws."""
    for e in range(elements.shape[0]):
        kept_elements[draw, e] = elements[e]
    for g in range(prevalence.shape[0]):
        for k in range(prevalence.shape[1]):
            kept_prevalence[draw, g, k] = prevalence[g, k]


@compiled_part
def _rows_from_elements(direct: Ints, elements: Floats, row_probability: Floats) -> None:
    for r in range(direct.shape[0]):
        for k in range(direct.shape[1]):
            row_probability[r, k] = elements[max(direct[r, k], 0)]


@compiled_part
def _parts_from_rows(
    part_start: Ints, part_row: Ints, row_probability: Floats, part_probability: Floats
) -> None:
    for s in range(part_probability.shape[0]):
        part_probability[s] = 1.0
        for i in range(part_start[s], part_start[s + 1]):
            r = part_row[i]
            for k in range(part_probability.shape[1]):
                part_probability[s, k] *= row_probability[r, k]


@compiled_part
def _split_units(
    unit_part: Ints,
    all_cases: Ints,
    prevalence_row: Ints,
    extra: Floats,
    log_extra: Floats,
    shift: Floats,
    part_start: Ints,
    part_row: Ints,
    row_probability: Floats,
    part_probability: Floats,
    prevalence: Floats,
    weights: Floats,
    cumulative: Floats,
    numbers: Ints,
    part_count: Ints,
    class_count: Ints,
    unit_count: Ints,
    unit_log_probability: Floats,
    rng: np.random.Generator,
) -> float:
    """Split all units; return the log likelihood, nan when a unit is impossible.

    Takes single arrays: handing over the tuples costs as much as two dozen random numbers.
    """
    n_classes = prevalence.shape[1]
    n_chunks = unit_part.shape[1]
    weighted = extra.shape[0] > 0
    keep = unit_count.shape[0] > 0
    case_by_case = 0 if keep else CASE_BY_CASE
    log_likelihood = 0.0
    running = 1.0
    class_count[:] = 0
    part_count[:] = 0
    for u in range(all_cases.shape[0]):
        g = prevalence_row[u]
        for k in range(n_classes):
            weights[k] = prevalence[g, k]
        for h in range(n_chunks):
            s = unit_part[u, h]
            for k in range(n_classes):
                weights[k] *= part_probability[s, k]
        if weighted:
            for k in range(n_classes):
                weights[k] *= extra[u, k]
        total = _accumulate(weights, cumulative)
        rescued = 0.0
        if total < TOO_SMALL:
            for k in range(n_classes):
                weights[k] = math.log(prevalence[g, k])
                if weighted:
                    weights[k] += log_extra[u, k] - shift[u]
            for h in range(n_chunks):
                s = unit_part[u, h]
                _add_logs(part_row, part_start[s], part_start[s + 1], row_probability, weights)
            rescued = _out_of_logs(weights)
            if rescued == -math.inf:
                return math.nan
            total = _accumulate(weights, cumulative)
        cases = all_cases[u]
        if cases <= case_by_case:
            log_likelihood += cases * rescued
            for _ in range(cases):
                running *= total
                if running < LOG_NOW:
                    log_likelihood += math.log(running)
                    running = 1.0
                k = pick(cumulative, rng)
                class_count[g, k] += 1
                for h in range(n_chunks):
                    part_count[unit_part[u, h], k] += 1
            continue
        log_probability = math.log(total) + rescued
        log_likelihood += cases * log_probability
        split_count(cases, weights, cumulative, numbers, rng)
        for k in range(n_classes):
            class_count[g, k] += numbers[k]
        for h in range(n_chunks):
            s = unit_part[u, h]
            for k in range(n_classes):
                part_count[s, k] += numbers[k]
        if keep:
            unit_log_probability[u] = log_probability + (shift[u] if weighted else 0.0)
            for k in range(n_classes):
                unit_count[u, k] = numbers[k]
    return log_likelihood + math.log(running)


@compiled_part
def _accumulate(weights: Floats, cumulative: Floats) -> float:
    """Set the cumulative sums of the weights; return the last."""
    total = 0.0
    for k in range(weights.shape[0]):
        total += weights[k]
        cumulative[k] = total
    return total


@compiled_part
def _add_logs(
    part_row: Ints, first: int, last: int, row_probability: Floats, weights: Floats
) -> None:
    for i in range(first, last):
        for k in range(weights.shape[0]):
            weights[k] += math.log(row_probability[part_row[i], k])


@compiled_part
def _out_of_logs(weights: Floats) -> float:
    """Turn log weights into weights, the largest 1; return its log (-inf when all are 0)."""
    highest = -math.inf
    for k in range(weights.shape[0]):
        highest = max(highest, weights[k])
    if highest > -math.inf:
        for k in range(weights.shape[0]):
            weights[k] = math.exp(weights[k] - highest)
    return highest


@compiled_part
def _rows_from_parts(part_start: Ints, part_row: Ints, part_count: Ints, row_count: Ints) -> None:
    row_count[:] = 0
    for s in range(part_count.shape[0]):
        for i in range(part_start[s], part_start[s + 1]):
            r = part_row[i]
            for k in range(part_count.shape[1]):
                row_count[r, k] += part_count[s, k]


@compiled_part
def _elements_from_rows(
    direct: Ints, prior: Floats, row_count: Ints, element_parameter: Floats
) -> None:
    for e in range(prior.shape[0]):
        element_parameter[e] = prior[e]
    for r in range(direct.shape[0]):
        for k in range(direct.shape[1]):
            if direct[r, k] >= 0:
                element_parameter[direct[r, k]] += row_count[r, k]
