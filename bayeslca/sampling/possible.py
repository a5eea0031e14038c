"""Which answers a model allows at all, whatever its parameters."""

from __future__ import annotations

import numpy as np

from bayeslca._typing import Bools, Ints
from bayeslca.model.probabilities import row_probability
from bayeslca.model.table import Table, UnitTable


def impossible_units(table: Table, units: UnitTable) -> Ints:
    """Return the units that have probability 0 in every class.

    Impossible is a property of whole patterns: one class may forbid one answer, another class
    another, and a unit may have both.
    """
    allowed = row_probability(table, np.ones(table.n_elements)) > 0.0
    n_units = units.count.size
    forbids = ~allowed[units.row]
    unit_of_entry = np.repeat(np.arange(n_units), np.diff(units.row_start))
    may_be: Bools = np.ones((n_units, table.n_classes), dtype=np.bool_)
    for k in range(table.n_classes):
        may_be[unit_of_entry[forbids[:, k]], k] = False
    if units.log_weight.size:
        may_be &= units.log_weight > -np.inf
    return np.flatnonzero(~may_be.any(axis=1))
