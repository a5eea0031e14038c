"""A sampler in which the number of classes is unknown: the telescoping sampler.

For mixtures of finite mixtures with a fixed Dirichlet parameter per class. A sweep splits the
cases over the classes, draws the parameters of the classes that hold cases, then the number of
classes given how the cases are split, and fills up with empty classes from the prior. It visits
every number of classes in turn, so that its frequencies are P(number of classes | answers): a
check on evidences that shares next to nothing with them. Numba code: import inside functions.

References
----------
Frühwirth-Schnatter, S., Malsiner-Walli, G. & Grün, B. (2021). Generalized mixtures of finite
mixtures and telescoping sampling. Bayesian Analysis 16, 1279-1307.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled, compiled_part
from bayeslca.sampling.split import draw_shares, split_count

PARTS = 5
"""Parts of a chain whose looks are averaged apart, so that their spread tells the error."""


@compiled
def telescope(
    block_start: Ints,
    block_prior: Floats,
    row_start: Ints,
    row: Ints,
    cases: Ints,
    group: Ints,
    concentration: float,
    log_prior_of_count: Floats,
    n_classes: int,
    warmup: int,
    draws: int,
    look_every: int,
    split_every: int,
    rng: np.random.Generator,
) -> tuple[Ints, Ints, Floats, Floats, Ints]:
    """Run one chain.

    Parameters
    ----------
    block_start : ndarray of int64, shape (B + 1,)
        Blocks of one class.
    block_prior : ndarray, shape (R,)
        Their Dirichlet parameters, the same for every class; element r is row r.
    row_start, row : ndarray of int64
        Rows of unit u are row[row_start[u]:row_start[u + 1]].
    cases, group : ndarray of int64, shape (U,)
        Cases of each unit, and its prevalence row.
    concentration : float
        Dirichlet parameter of every class's prevalence, whatever their number.
    log_prior_of_count : ndarray, shape (most,)
        Log prior probability of 1, 2, ... classes.
    n_classes : int
        The number of classes to begin with.
    warmup, draws : int
        Sweeps thrown away, and sweeps kept.
    look_every : int
        Kept sweeps from one look at who is in a class with whom to the next; 0 for none.
    split_every : int
        Looks from one partition that is kept to the next.
    rng : numpy.random.Generator

    Returns
    -------
    counts, filled : ndarray of int64, shape (draws,)
        Number of classes, and of those that hold cases.
    together : ndarray, shape (PARTS, U, U)
        Probability that two different cases are in one class: mean over the looks of each part of
        the kept sweeps.
    probability : ndarray, shape (looks, U)
        Of the answers of each unit.
    splits : ndarray of int64, shape (n, U, most)
        How many cases of each unit were in each class, at some looks.
    """
    most, n_rows, n_units = log_prior_of_count.size, block_prior.size, cases.size
    n_groups = int(group.max()) + 1
    group_cases = np.zeros(n_groups)
    for u in range(n_units):
        group_cases[group[u]] += cases[u]
    elements = np.zeros((most, n_rows))
    prevalence = np.zeros((n_groups, most))
    row_count = np.zeros((most, n_rows), dtype=np.int64)
    class_count = np.zeros((n_groups, most), dtype=np.int64)
    membership = np.zeros((n_units, most))
    counts = np.zeros(draws, dtype=np.int64)
    filled = np.zeros(draws, dtype=np.int64)
    size, n_looks, n_splits = 0, 0, 0
    if look_every > 0:
        size, n_looks = n_units, (draws - 1) // look_every + 1
        n_splits = (n_looks - 1) // split_every + 1
    together = np.zeros((PARTS, size, size))
    probability = np.zeros((n_looks, size))
    splits = np.zeros((n_splits, size, most), dtype=np.int64)
    numbers = np.zeros((n_units, most), dtype=np.int64)
    log_unit = np.zeros(n_units)
    looks = np.zeros(PARTS)
    _draw_classes(
        block_start, block_prior, concentration, row_count, class_count, n_classes,
        elements, prevalence, rng,
    )  # fmt: skip
    for sweep in range(warmup + draws):
        n_filled = _split_cases(
            row_start, row, cases, group, elements, prevalence, n_classes,
            row_count, class_count, membership, numbers, log_unit, rng,
        )  # fmt: skip
        kept = sweep - warmup
        if kept >= 0 and look_every > 0 and kept % look_every == 0:
            look, part = kept // look_every, kept * PARTS // draws
            looks[part] += 1
            _add_together(membership, n_classes, together[part])
            probability[look] = np.exp(log_unit)
            if look % split_every == 0:
                splits[look // split_every] = numbers
        n_classes = _draw_count(log_prior_of_count, concentration, group_cases, n_filled, rng)
        _draw_classes(
            block_start, block_prior, concentration, row_count, class_count, n_classes,
            elements, prevalence, rng,
        )  # fmt: skip
        if kept >= 0:
            counts[kept] = n_classes
            filled[kept] = n_filled
    for part in range(PARTS):
        together[part] /= max(looks[part], 1.0)
    return counts, filled, together, probability, splits


@compiled_part
def _split_cases(
    row_start: Ints,
    row: Ints,
    cases: Ints,
    group: Ints,
    elements: Floats,
    prevalence: Floats,
    n_classes: int,
    row_count: Ints,
    class_count: Ints,
    membership: Floats,
    numbers: Ints,
    log_unit: Floats,
    rng: np.random.Generator,
) -> int:
    """Split the cases over the classes; put classes that hold cases first; return their number.

    Written to are also each unit's membership and numbers in the classes as they were, and the
    log probability of its answers.
    """
    row_count[:] = 0
    class_count[:] = 0
    membership[:] = 0.0
    numbers[:] = 0
    weights = np.empty(n_classes)
    cumulative = np.empty(n_classes)
    for u in range(cases.size):
        highest = -math.inf
        for k in range(n_classes):
            weights[k] = math.log(prevalence[group[u], k])
            for i in range(row_start[u], row_start[u + 1]):
                weights[k] += math.log(elements[k, row[i]])
            highest = max(highest, weights[k])
        total = 0.0
        for k in range(n_classes):
            weights[k] = math.exp(weights[k] - highest)
            total += weights[k]
            cumulative[k] = total
        log_unit[u] = highest + math.log(total)
        split_count(cases[u], weights, cumulative, numbers[u, :n_classes], rng)
        for k in range(n_classes):
            membership[u, k] = weights[k] / total
            class_count[group[u], k] += numbers[u, k]
            for i in range(row_start[u], row_start[u + 1]):
                row_count[k, row[i]] += numbers[u, k]
    n_filled = 0
    for k in range(n_classes):
        if class_count[:, k].sum() > 0:
            if k > n_filled:
                row_count[n_filled] = row_count[k]
                class_count[:, n_filled] = class_count[:, k]
                row_count[k] = 0
                class_count[:, k] = 0
            n_filled += 1
    return n_filled


@compiled_part
def _draw_count(
    log_prior: Floats,
    concentration: float,
    group_cases: Floats,
    n_filled: int,
    rng: np.random.Generator,
) -> int:
    """Draw the number of classes given the number that hold cases."""
    weights = np.zeros(log_prior.size)
    highest = -math.inf
    for at in range(n_filled - 1, log_prior.size):
        n = at + 1
        weights[at] = log_prior[at] + math.lgamma(n + 1.0) - math.lgamma(n - n_filled + 1.0)
        for g in range(group_cases.size):
            a = n * concentration
            weights[at] += math.lgamma(a) - math.lgamma(a + group_cases[g])
        highest = max(highest, weights[at])
    total = 0.0
    for at in range(n_filled - 1, log_prior.size):
        total += math.exp(weights[at] - highest)
    left = rng.random() * total
    for at in range(n_filled - 1, log_prior.size):
        left -= math.exp(weights[at] - highest)
        if left < 0.0:
            return at + 1
    return int(log_prior.size)


@compiled_part
def _draw_classes(
    block_start: Ints,
    block_prior: Floats,
    concentration: float,
    row_count: Ints,
    class_count: Ints,
    n_classes: int,
    elements: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
) -> None:
    """Draw all parameters given counts; those of classes without cases from the prior."""
    for k in range(n_classes):
        draw_shares(block_start, block_prior + row_count[k], elements[k], rng)
    whole = np.array([0, n_classes])
    for g in range(prevalence.shape[0]):
        parameter: Floats = np.asarray(concentration + class_count[g, :n_classes])
        draw_shares(whole, parameter, prevalence[g, :n_classes], rng)


@compiled_part
def _add_together(membership: Floats, n_classes: int, together: Floats) -> None:
    for u in range(together.shape[0]):
        for v in range(u + 1):
            total = 0.0
            for k in range(n_classes):
                total += membership[u, k] * membership[v, k]
            together[u, v] += total
            if v < u:
                together[v, u] += total
