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
