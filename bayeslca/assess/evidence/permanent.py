"""Permanents of non-negative matrices, in logs: sums over all ways to match classes with classes.

By a sum over subsets of columns, 2^K K / 2 products each: exact, all terms positive, no
cancellation. Numba code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats
from bayeslca.sampling.compiled import compiled, compiled_part

NEGLIGIBLE = 40.0
"""A term whose upper bound is so many nats below one that was found adds nothing to a sum."""
UNDERFLOW = 1e-250
"""A scaled permanent below this is found again in logs."""


@compiled
def log_permanents(log_entries: Floats) -> Floats:
    """Return the log permanents (n, S) of exp(log_entries[:, i, s, :]).

    Parameters
    ----------
    log_entries : ndarray, shape (K, n, S, K)
        Row of the matrix, number, second number, column of the matrix.
    """
    size, n, n_second = log_entries.shape[0], log_entries.shape[1], log_entries.shape[2]
    out = np.empty((n, n_second))
    sums = np.empty(1 << size)
    scaled = np.empty((size, size))
    for i in range(n):
        for s in range(n_second):
            out[i, s] = _log_permanent(log_entries, i, s, scaled, sums)
    return out


@compiled
def log_sum_of_permanents(base: Floats, log_entries: Floats) -> Floats:
    """Return ln sum_s exp(base[i, s]) permanent(exp(log_entries[:, i, s, :])), shape (n,).

    A permanent is passed over only when an upper bound of its term lies 40 nats below a term that
    was found.

    Parameters
    ----------
    base : ndarray, shape (n, S)
    log_entries : ndarray, shape (K, n, S, K)
        As in `log_permanents`. Bounds are closer when columns are scaled so that a matrix's
        largest entries are near 0.
    """
    size, n, n_second = log_entries.shape[0], log_entries.shape[1], log_entries.shape[2]
    out = np.empty(n)
    sums = np.empty(1 << size)
    scaled = np.empty((size, size))
    bound = np.empty(n_second)
    ways = 0.0
    for k in range(2, size + 1):
        ways += math.log(k)
    for i in range(n):
        first = 0
        for s in range(n_second):
            bound[s] = base[i, s] + ways
            for k in range(size):
                highest = -math.inf
                for column in range(size):
                    highest = max(highest, log_entries[k, i, s, column])
                bound[s] += highest
            if bound[s] > bound[first]:
                first = s
        best = base[i, first] + _log_permanent(log_entries, i, first, scaled, sums)
        total = 1.0
        for s in range(n_second):
            if s == first or bound[s] < best - NEGLIGIBLE:
                continue
            term = base[i, s] + _log_permanent(log_entries, i, s, scaled, sums)
            if term > best:
                total = total * math.exp(best - term) + 1.0
                best = term
            elif term > -math.inf:
                total += math.exp(term - best)
        out[i] = best + math.log(total)
    return out


@compiled_part
def _log_permanent(log_entries: Floats, i: int, s: int, scaled: Floats, sums: Floats) -> float:
    size = scaled.shape[0]
    shift = 0.0
    for k in range(size):
        highest = -math.inf
        for column in range(size):
            highest = max(highest, log_entries[k, i, s, column])
        if highest == -math.inf:
            return -math.inf
        shift += highest
        for column in range(size):
            scaled[k, column] = math.exp(log_entries[k, i, s, column] - highest)
    _sums_over_subsets(scaled, sums)
    found = sums[sums.shape[0] - 1]
    if found > UNDERFLOW:
        return shift + math.log(found)
    for k in range(size):
        for column in range(size):
            scaled[k, column] = log_entries[k, i, s, column]
    _log_sums_over_subsets(scaled, sums)
    return float(sums[sums.shape[0] - 1])


@compiled_part
def _sums_over_subsets(entries: Floats, sums: Floats) -> None:
    """Set sums[c] to the permanent of the first rows and the columns in the set c."""
    size = entries.shape[0]
    sums[:] = 0.0
    sums[0] = 1.0
    for taken in range(sums.shape[0] - 1):
        row = 0
        for column in range(size):
            row += (taken >> column) & 1
        for column in range(size):
            if not (taken >> column) & 1:
                sums[taken | (1 << column)] += sums[taken] * entries[row, column]


@compiled_part
def _log_sums_over_subsets(entries: Floats, sums: Floats) -> None:
    """Do the same in logs, where products underflow."""
    size = entries.shape[0]
    sums[:] = -math.inf
    sums[0] = 0.0
    for taken in range(sums.shape[0] - 1):
        row = 0
        for column in range(size):
            row += (taken >> column) & 1
        for column in range(size):
            if not (taken >> column) & 1:
                at = taken | (1 << column)
                term = sums[taken] + entries[row, column]
                highest = max(sums[at], term)
                if highest > -math.inf:
                    low = min(sums[at], term)
                    sums[at] = highest + math.log1p(math.exp(low - highest))
