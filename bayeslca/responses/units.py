"""Units: the distinct answers and how many cases gave them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Ints

MISSING = -1
"""Code of an answer that was not given."""


@dataclass(frozen=True)
class Units:
    """Distinct (group, response pattern) combinations with counts.

    Cases without a single answer belong to no unit: they say nothing about the classes.

    Attributes
    ----------
    pattern : ndarray of int16, shape (unit, item)
        Category codes 0..R-1, ``MISSING`` where there is no answer.
    group : ndarray of int32, shape (unit,)
        Index of the group; all 0 when there are no groups.
    count : ndarray of int64, shape (unit,)
        Number of cases, at least 1.
    unit_of_row : ndarray of int64, shape (row,)
        The unit of each row of the responses, -1 for rows set aside.
    """

    pattern: Ints
    group: Ints
    count: Ints
    unit_of_row: Ints

    @property
    def n_units(self) -> int:
        """Number of distinct units."""
        return int(self.count.size)

    @property
    def n_cases(self) -> int:
        """Number of cases with at least one answer."""
        return int(np.sum(self.count))


_DENSE = 1 << 22
"""Numbers of possible units up to which each gets a counter of its own."""
_RADIX_LIMIT = 1 << 62


def collapse(codes: Ints, group_codes: Ints, counts: Ints, n_categories: tuple[int, ...]) -> Units:
    """Count the distinct combinations of group and response pattern.

    Each row becomes one whole number whose digits are its group and its answers (in base number of
    categories + 1). Units stand in the order of group, then answers of the first item, and so on,
    missing first: whatever the order of the rows.

    Parameters
    ----------
    codes : ndarray of int16, shape (row, item)
    group_codes : ndarray of int32, shape (row,)
    counts : ndarray of int64, shape (row,)
    n_categories : tuple of int
        Number of categories of each item.
    """
    n_groups = int(group_codes.max(initial=0)) + 1
    n_patterns = math.prod(n + 1 for n in n_categories)
    if n_groups * n_patterns <= _DENSE:
        return _by_counters(codes, group_codes, counts, n_categories, n_groups, n_patterns)
    return _by_sorting(codes, group_codes, counts, n_categories, n_groups)


def _by_counters(
    codes: Ints,
    group_codes: Ints,
    counts: Ints,
    n_categories: tuple[int, ...],
    n_groups: int,
    n_patterns: int,
) -> Units:
    """Count with one counter per possible unit."""
    key = group_codes.astype(np.int32)
    for j, n in enumerate(n_categories):
        key *= n + 1
        key += codes[:, j]
        key += 1
    n_rows = np.bincount(key, minlength=n_groups * n_patterns)
    n_rows[::n_patterns] = 0  # nothing answered: every digit but the group's is nought
    found = np.flatnonzero(n_rows)
    unit_of_key = np.full(n_rows.size, -1, dtype=np.int64)
    unit_of_key[found] = np.arange(found.size)
    unit_of_row = unit_of_key[key]
    pattern = np.empty((found.size, len(n_categories)), dtype=np.int16)
    rest: Ints = found
    for j in reversed(range(len(n_categories))):
        rest, digit = np.divmod(rest, n_categories[j] + 1)
        pattern[:, j] = digit - 1
    count: Ints
    if _all_one(counts):
        count = n_rows[found].astype(np.int64)
    else:
        count = _sums(unit_of_row, counts, found.size)
    return Units(pattern, rest.astype(np.int32), count, unit_of_row)


def _by_sorting(
    codes: Ints,
    group_codes: Ints,
    counts: Ints,
    n_categories: tuple[int, ...],
    n_groups: int,
) -> Units:
    """Count by sorting; wide tables are folded into ranks when numbers would grow too large."""
    answered = np.flatnonzero((codes != MISSING).any(axis=1))
    key: Ints = group_codes[answered].astype(np.int64)
    size = n_groups
    for j, n in enumerate(n_categories):
        if size > _RADIX_LIMIT // (n + 1):
            distinct, key = np.unique(key, return_inverse=True)
            size = distinct.size
        key = key * (n + 1) + codes[answered, j] + 1
        size *= n + 1
    _, first, unit = np.unique(key, return_index=True, return_inverse=True)
    unit_of_row = np.full(len(codes), -1, dtype=np.int64)
    unit_of_row[answered] = unit
    rows = answered[first]
    return Units(
        np.ascontiguousarray(codes[rows], dtype=np.int16),
        group_codes[rows].astype(np.int32),
        _sums(unit_of_row, counts, first.size),
        unit_of_row,
    )


def _all_one(counts: Ints) -> bool:
    return bool(counts.size) and int(counts.min()) == int(counts.max()) == 1


def _sums(unit_of_row: Ints, counts: Ints, n_units: int) -> Ints:
    """Add up the counts of each unit's rows, in whole numbers: sums stay exact."""
    total = np.zeros(n_units + 1, dtype=np.int64)  # the last entry takes rows without a unit
    np.add.at(total, unit_of_row, counts)
    return total[:-1]
