"""Replicates of the data, drawn case by case and counted on the way. Import inside functions."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba
import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import SETTINGS

Function = TypeVar("Function", bound=Callable[..., Any])


def _compiled(function: Function) -> Function:
    return cast(Function, numba.njit(cache=True, **SETTINGS)(function))


@_compiled
def replicate(
    size: Ints,
    group: Ints,
    prevalence_row: Ints,
    field_start: Ints,
    field: Ints,
    answer_start: Ints,
    answer_row: Ints,
    field_item: Ints,
    field_size: Ints,
    item_start: Ints,
    pair_start: Ints,
    points: Ints,
    mark: Any,
    power: float,
    row_probability: Floats,
    prevalence: Floats,
    rng: np.random.Generator,
    patterns: Floats,
    margins: Ints,
    pairs: Ints,
    scores: Ints,
    expected_scores: Floats,
) -> None:
    """Draw one replicate for each draw of the parameters, and count it.

    The first nine arrays are those of ``Strata`` and its ``Fields``.

    Parameters
    ----------
    item_start : ndarray, shape (J + 1,)
    pair_start : ndarray, shape (J, J)
        Where the joint answers of items i < j begin.
    points : ndarray, shape (answers of all fields,)
        What each adds to a case's sum score.
    mark : ndarray of uint64, shape (answers of all fields,)
        Random numbers whose sum stands for a pattern: two patterns of a replicate share one with
        a probability below cases squared / 2^65.
    power : float
        Of the power divergence.
    row_probability : ndarray, shape (D, R, K)
    prevalence : ndarray, shape (D, rows, K)
    rng : numpy.random.Generator
    patterns : ndarray, shape (D, groups, 4)
        Gets G2, X2, power divergence and number of distinct patterns; must be 0.
    margins, pairs, scores : ndarray, shape (D, groups, ...)
        Get counts of answers, joint answers and sum scores; must be 0.
    expected_scores : ndarray, shape (D, groups, scores)
        Gets the cases that the parameters expect at each sum score; must be 0.
    """
    n_draws, _, n_classes = row_probability.shape
    n_items = item_start.size - 1
    n_answers = answer_row.size
    largest = size.max()
    probability = np.empty((n_answers, n_classes))
    cumulated = np.empty((n_answers, n_classes))
    plain = np.empty((n_answers, n_classes))
    so_far, after = np.empty(scores.shape[2]), np.empty(scores.shape[2])
    log_class = np.empty(n_classes)
    answer = np.empty(n_items, dtype=np.int64)
    chosen = np.empty((largest, n_items), dtype=np.int64)
    key = np.empty(largest, dtype=np.uint64)
    cases = np.empty(largest, dtype=np.int64)
    capacity = 4
    while capacity < 2 * largest:
        capacity *= 2
    slots = np.empty(capacity, dtype=np.int64)  # open addressing: the first case of a pattern
    for d in range(n_draws):
        for f in range(answer_start.size - 1):
            for k in range(n_classes):
                total = 0.0
                for at in range(answer_start[f], answer_start[f + 1]):
                    p = row_probability[d, answer_row[at], k]
                    total += p
                    plain[at, k] = p
                    probability[at, k] = math.log(p) if p > 0.0 else -math.inf
                    cumulated[at, k] = total
        for s in range(size.size):
            g, n, of_group = group[s], size[s], prevalence_row[s]
            fields = field[field_start[s] : field_start[s + 1]]
            whole = 0.0
            for k in range(n_classes):
                whole += prevalence[d, of_group, k]
            for k in range(n_classes):
                so_far[:] = 0.0
                so_far[0] = prevalence[d, of_group, k] * n
                top = 0
                for place in range(fields.size):
                    f = fields[place]
                    after[:] = 0.0
                    most = 0
                    for at in range(answer_start[f], answer_start[f + 1]):
                        most = max(most, points[at])
                        for before in range(top + 1):
                            after[before + points[at]] += so_far[before] * plain[at, k]
                    top += most
                    so_far[:] = after
                expected_scores[d, g] += so_far
            room = 4
            while room < 2 * n:
                room *= 2
            slots[:room] = -1
            for case in range(n):
                u = rng.random() * whole
                k = 0
                below = prevalence[d, of_group, 0]
                while u >= below and k < n_classes - 1:
                    k += 1
                    below += prevalence[d, of_group, k]
                answer[:] = -1
                total_points = 0
                code = np.uint64(0)
                for place in range(fields.size):
                    f = fields[place]
                    last = answer_start[f + 1] - 1
                    u = rng.random() * cumulated[last, k]
                    at = answer_start[f]
                    while u >= cumulated[at, k] and at < last:
                        at += 1
                    chosen[case, place] = at
                    code += mark[at]
                    total_points += points[at]
                    category = at - answer_start[f]
                    for back in range(field_item.shape[1] - 1, -1, -1):
                        if field_item[f, back] >= 0:
                            answer[field_item[f, back]] = category % field_size[f, back]
                            category //= field_size[f, back]
                key[case] = code
                for i in range(n_items):
                    a = answer[i]
                    if a < 0:
                        continue
                    margins[d, g, item_start[i] + a] += 1
                    for j in range(i + 1, n_items):
                        b = answer[j]
                        if b >= 0:
                            width = item_start[j + 1] - item_start[j]
                            pairs[d, g, pair_start[i, j] + a * width + b] += 1
                scores[d, g, total_points] += 1
                slot = np.int64(code >> np.uint64(8)) & (room - 1)
                while slots[slot] >= 0 and key[slots[slot]] != code:
                    slot = (slot + 1) & (room - 1)
                if slots[slot] < 0:
                    slots[slot] = case
                    cases[case] = 1
                else:
                    cases[slots[slot]] += 1
                    cases[case] = 0
            for case in range(n):
                if cases[case] == 0:
                    continue
                observed = float(cases[case])
                highest = -math.inf
                for k in range(n_classes):
                    share = prevalence[d, of_group, k]
                    log_p = math.log(share) if share > 0.0 else -math.inf
                    for place in range(fields.size):
                        log_p += probability[chosen[case, place], k]
                    log_class[k] = log_p
                    highest = max(highest, log_p)
                total = 0.0
                for k in range(n_classes):
                    total += math.exp(log_class[k] - highest)
                log_ratio = math.log(observed / n) - highest - math.log(total)
                patterns[d, g, 0] += 2.0 * observed * log_ratio
                patterns[d, g, 1] += observed * math.expm1(log_ratio)
                patterns[d, g, 2] += (
                    2.0 / (power * (power + 1.0)) * observed * math.expm1(power * log_ratio)
                )
                patterns[d, g, 3] += 1.0
