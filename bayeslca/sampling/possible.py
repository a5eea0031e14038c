"""Answers that cannot be sampled from: none at all, or some that no class allows."""

from __future__ import annotations

import numpy as np

from bayeslca.exceptions import ModelError
from bayeslca.model.support import impossible_units
from bayeslca.model.table import Table, UnitTable
from bayeslca.responses.responses import Responses

MOST_NAMED = 5


def refuse_impossible(table: Table, units: UnitTable, responses: Responses | UnitTable) -> None:
    """Refuse empty data, and name the cases whose answers no class allows.

    Raises
    ------
    ModelError
    """
    if not units.count.size or int(units.count.sum()) == 0:
        msg = "there are no answers to sample from: no case answered a single item."
        raise ModelError(msg)
    offenders = impossible_units(table, units)
    if not offenders.size:
        return
    names = [f"unit {u + 1}" for u in offenders]
    if isinstance(responses, Responses):
        rows = np.flatnonzero(np.isin(responses.units.unit_of_row, offenders))
        names = [f"'{responses.row_names[r]}'" for r in rows]
    more = ", ..." if len(names) > MOST_NAMED else ""
    n_cases = int(units.count[offenders].sum())
    msg = (
        f"{n_cases} {'case' if n_cases == 1 else 'cases'} gave answers that no class allows: "
        f"{', '.join(names[:MOST_NAMED])}{more}. Check these answers, or loosen the "
        "probabilities that are fixed at 0 or 1."
    )
    raise ModelError(msg)
