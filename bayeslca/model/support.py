"""Which answers a model allows: patterns that no class can give are refused by case."""

from __future__ import annotations

import numpy as np
from scipy.sparse import csr_array

from bayeslca._typing import Ints
from bayeslca.model.table import Table, UnitTable


def impossible_units(table: Table, unit_table: UnitTable) -> Ints:
    """Return the units whose answers have probability 0 in every class.

    Probability 0 by the model itself (known zeros, verified classes), whatever the blocks hold.
    """
    has_cell = np.diff(table.cell_start).reshape(table.n_rows, table.n_classes) > 0
    holds = csr_array(
        (np.ones(unit_table.row.size), unit_table.row, unit_table.row_start),
        shape=(unit_table.n_units, table.n_rows),
    )
    possible = (holds @ (~has_cell).astype(np.float64)) == 0
    if unit_table.log_weight.size:
        possible &= unit_table.log_weight > -np.inf
    return np.flatnonzero(~possible.any(axis=1))
