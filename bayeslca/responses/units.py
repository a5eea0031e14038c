"""Units: the distinct answers and how many cases gave them."""

from __future__ import annotations

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
"""Numbers of possible patterns up to which each gets a counter of its own."""
_RADIX_LIMIT = 1 << 62


def collapse(codes: Ints, group_codes: Ints, counts: Ints, n_categories: tuple[int, ...]) -> Units:
    """Count the distinct combinations of group and response pattern.

    Each row becomes one whole number whose digits are its group and its answers (in base number of
    categories + 1); wide tables are folded into ranks whenever the number would grow too large.
    Units stand in the order of group, then answers of the first item, and so on, missing first:
    whatever the order of the rows.

    Parameters
    ----------
    codes : ndarray of int16, shape (row, item)
    group_codes : ndarray of int32, shape (row,)
    counts : ndarray of int64, shape (row,)
    n_categories : tuple of int
        Number of categories of each item.
    """
    n_rows = codes.shape[0]
    key = group_codes.astype(np.int64)
    size = int(group_codes.max(initial=0)) + 1
    for j, n in enumerate(n_categories):
        if size > _RADIX_LIMIT // (n + 1):
            distinct, key = np.unique(key, return_inverse=True)
            size = distinct.size
        key *= n + 1
        key += codes[:, j]
        key += 1
        size *= n + 1
    answered = (codes != MISSING).any(axis=1) if (codes == MISSING).any() else None
    unit_of_key: Ints
    if size <= max(_DENSE, n_rows):
        unit_of_key = np.full(size, -1, dtype=np.int64)
        seen = np.zeros(size, dtype=np.bool_)
        seen[key if answered is None else key[answered]] = True
        n_units = int(np.count_nonzero(seen))
        unit_of_key[seen] = np.arange(n_units)
        unit_of_row = unit_of_key[key]
    else:
        _, unit_of_row = np.unique(key if answered is None else key[answered], return_inverse=True)
        n_units = int(unit_of_row.max(initial=-1)) + 1
        if answered is not None:
            among_answered, unit_of_row = unit_of_row, np.full(n_rows, -1, dtype=np.int64)
            unit_of_row[answered] = among_answered
    inside = unit_of_row >= 0
    everyone = bool(inside.all())
    units = unit_of_row if everyone else unit_of_row[inside]
    first = np.empty(n_units, dtype=np.int64)
    first[units] = np.arange(n_rows) if everyone else np.flatnonzero(inside)
    return Units(
        pattern=np.ascontiguousarray(codes[first], dtype=np.int16),
        group=group_codes[first].astype(np.int32),
        count=_count(units, counts if everyone else counts[inside], n_units),
        unit_of_row=unit_of_row,
    )


def _count(units: Ints, counts: Ints, n_units: int) -> Ints:
    if counts.size and counts.min() == counts.max() == 1:
        return np.bincount(units, minlength=n_units).astype(np.int64)
    total = np.zeros(n_units, dtype=np.int64)  # whole numbers throughout: sums stay exact
    np.add.at(total, units, counts)
    return total
