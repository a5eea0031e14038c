"""Units of single cases: answers, prevalence row and outcome of each, for joint models."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Bools, Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.model.agreement import check_agreement
from bayeslca.model.compile import compile_units
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.table import UnitTable
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import Units


@dataclass(frozen=True, eq=False)
class CaseUnits:
    """Distinct combinations of answers and prevalence row (and whatever else), with counts.

    Attributes
    ----------
    units : UnitTable
    unit_of_case : ndarray of int64, shape (N,)
        Unit of each row of the responses, -1 for rows that were left out.
    group_of_unit : ndarray of int64, shape (U,)
        The model's group.
    pattern : ndarray of int16, shape (U, item)
        The answers.
    """

    units: UnitTable
    unit_of_case: Ints
    group_of_unit: Ints
    pattern: Ints


def case_units(
    model: LatentClassModel,
    responses: Responses,
    prevalence_row: Ints,
    *,
    apart: Floats | None = None,
    keep: Bools | None = None,
) -> CaseUnits:
    """Collapse cases to units for a joint model.

    Cases without an answer are kept: covariates and outcomes speak of them too.

    Parameters
    ----------
    model : LatentClassModel
    responses : Responses
    prevalence_row : ndarray of int, shape (N,)
        Prevalence row of each row of the responses.
    apart : ndarray, shape (N,) or (N, n), optional
        Cases that differ here (outcomes, say) are units of their own.
    keep : ndarray of bool, shape (N,), optional
        Rows to use; all when left out.

    Raises
    ------
    ModelError
        When the responses are not the model's, or no row is left.
    """
    check_agreement(model, responses)
    group = responses.group_codes if model.groups is not None else np.zeros(responses.n_rows)
    kept = np.arange(responses.n_rows) if keep is None else np.flatnonzero(keep)
    if not kept.size:
        msg = "no case is left: each misses a value that the regression needs."
        raise ModelError(msg)
    columns = [np.asarray(prevalence_row, dtype=np.float64)[:, None], np.asarray(group)[:, None]]
    if apart is not None:
        columns.append(np.asarray(apart, dtype=np.float64).reshape(responses.n_rows, -1))
    key = np.concatenate([*columns, responses.codes], axis=1)[kept]
    _, first, unit = np.unique(key, axis=0, return_index=True, return_inverse=True)
    unit = unit.reshape(-1)
    count = np.zeros(first.size, dtype=np.int64)
    np.add.at(count, unit, responses.counts[kept])
    unit_of_case = np.full(responses.n_rows, -1, dtype=np.int64)
    unit_of_case[kept] = unit
    rows = kept[first]
    group_of_unit = np.asarray(group, dtype=np.int64)[rows]
    compiled = compile_units(
        model.table,
        Units(
            pattern=responses.codes[rows],
            group=group_of_unit.astype(np.int32),
            count=count,
            unit_of_row=unit_of_case,
        ),
    )
    units = UnitTable(
        row_start=compiled.row_start,
        row=compiled.row,
        count=compiled.count,
        prevalence_row=np.asarray(prevalence_row, dtype=np.int64)[rows],
        log_weight=compiled.log_weight,
    )
    return CaseUnits(units, unit_of_case, group_of_unit, responses.codes[rows])
