"""What a table gives: probabilities of answers, of units, and of classes given answers.

Everything is vectorised over leading axes of draws and works through them in pieces, so that
memory stays bounded. Products over a unit's rows are sums of logs: a probability of exactly 0
gives a log of minus infinity, never a wrong number.
"""

from __future__ import annotations

from collections.abc import Iterator
from math import prod

import numpy as np
from scipy.sparse import csr_array

from bayeslca._typing import Floats
from bayeslca.model.table import Table, UnitTable

PIECE = 4_000_000
"""Numbers held at once per array (32 MB)."""


def draw_elements(table: Table, rng: np.random.Generator) -> Floats:
    """Draw all blocks (E,) from their Dirichlet priors, bounds aside."""
    gammas = rng.standard_gamma(table.element_prior)
    gammas = np.maximum(gammas, np.finfo(np.float64).tiny)
    if not table.n_blocks:
        return gammas
    sums = np.add.reduceat(gammas, table.block_start[:-1])
    return np.asarray(gammas / np.repeat(sums, np.diff(table.block_start)))


def row_probability(table: Table, elements: Floats) -> Floats:
    """Return p(row | class).

    Parameters
    ----------
    table : Table
    elements : ndarray, shape (..., E)

    Returns
    -------
    ndarray, shape (..., R, K)
    """
    direct = table.direct_element
    if table.is_direct:
        return np.asarray(elements[..., direct])
    shape = (*elements.shape[:-1], *direct.shape)
    out = np.zeros(shape)
    rows, classes = np.nonzero(direct >= 0)
    out[..., rows, classes] = elements[..., direct[rows, classes]]
    for r, k in np.argwhere(direct < 0):
        for constant, multiplied in table.cells(int(r), int(k)):
            at = np.asarray(multiplied, dtype=np.int64)
            out[..., r, k] += constant * np.prod(elements[..., at], axis=-1)
    return out


def response_probability(table: Table, elements: Floats) -> Floats:
    """Return P(answer | class) per response group.

    Parameters
    ----------
    table : Table
    elements : ndarray, shape (..., E)

    Returns
    -------
    ndarray, shape (..., G, K, A)
    """
    rows = row_probability(table, elements)[..., table.response_row, :]
    return np.asarray(np.swapaxes(rows, -1, -2))


def log_joint(
    table: Table, unit_table: UnitTable, elements: Floats, prevalence: Floats
) -> Iterator[tuple[slice, Floats]]:
    """Go through the draws in pieces, with log p(class, answers) of each unit.

    Parameters
    ----------
    table : Table
    unit_table : UnitTable
    elements : ndarray, shape (S, E)
    prevalence : ndarray, shape (S, prevalence rows, K)

    Yields
    ------
    slice
        Which draws.
    ndarray, shape (K, U, draws)
        Includes the units' extra log weight.
    """
    n_units, n_classes = unit_table.n_units, table.n_classes
    size = max(1, PIECE // max(1, n_classes * max(n_units, table.n_rows)))
    holds = csr_array(
        (np.ones(unit_table.row.size), unit_table.row, unit_table.row_start),
        shape=(n_units, table.n_rows),
    )
    for first in range(0, elements.shape[0], size):
        draws = slice(first, first + size)
        with np.errstate(divide="ignore"):
            log_rows = np.log(row_probability(table, elements[draws]))  # (s, R, K)
            log_prevalence = np.log(prevalence[draws])  # (s, rows, K)
        out = np.empty((n_classes, n_units, log_rows.shape[0]))
        for k in range(n_classes):
            out[k] = holds @ np.ascontiguousarray(log_rows[:, :, k].T)
            out[k] += log_prevalence[:, unit_table.prevalence_row, k].T
            if unit_table.log_weight.size:
                out[k] += unit_table.log_weight[:, k, None]
        yield draws, out


def log_unit_likelihood(
    table: Table, unit_table: UnitTable, elements: Floats, prevalence: Floats
) -> Floats:
    """Return log p(answers of a unit), the class summed out.

    Parameters
    ----------
    table : Table
    unit_table : UnitTable
    elements : ndarray, shape (..., E)
    prevalence : ndarray, shape (..., prevalence rows, K)

    Returns
    -------
    ndarray, shape (..., U)
        Of one case of each unit: multiply by ``unit_table.count`` for the data.
    """
    leading = elements.shape[:-1]
    flat_elements, flat_prevalence = _flat(elements, prevalence)
    out = np.empty((flat_elements.shape[0], unit_table.n_units))
    for draws, joint in log_joint(table, unit_table, flat_elements, flat_prevalence):
        out[draws] = _log_sum(joint).T
    return out.reshape(*leading, unit_table.n_units)


def membership(table: Table, unit_table: UnitTable, elements: Floats, prevalence: Floats) -> Floats:
    """Return P(class | answers) of each unit.

    Parameters
    ----------
    table : Table
    unit_table : UnitTable
    elements : ndarray, shape (..., E)
    prevalence : ndarray, shape (..., prevalence rows, K)

    Returns
    -------
    ndarray, shape (..., U, K)
        nan where a unit's answers have probability 0 in every class.
    """
    leading = elements.shape[:-1]
    flat_elements, flat_prevalence = _flat(elements, prevalence)
    out = np.empty((flat_elements.shape[0], unit_table.n_units, table.n_classes))
    for draws, joint in log_joint(table, unit_table, flat_elements, flat_prevalence):
        out[draws] = class_shares(joint).transpose(2, 1, 0)
    return out.reshape(*leading, unit_table.n_units, table.n_classes)


def class_shares(joint: Floats) -> Floats:
    """Turn log p(class, answers) (K, ...) into P(class | answers), nan where impossible."""
    highest = joint.max(axis=0)
    with np.errstate(invalid="ignore"):
        shares = np.exp(joint - highest)  # -inf - -inf: nan, as promised
    shares /= shares.sum(axis=0)
    return np.asarray(shares)


def _log_sum(joint: Floats) -> Floats:
    highest = joint.max(axis=0)
    safe = np.where(np.isfinite(highest), highest, 0.0)
    with np.errstate(divide="ignore"):
        return np.asarray(safe + np.log(np.exp(joint - safe).sum(axis=0)))


def _flat(elements: Floats, prevalence: Floats) -> tuple[Floats, Floats]:
    return (
        np.asarray(elements, dtype=np.float64).reshape(
            prod(elements.shape[:-1]),
            elements.shape[-1],  # there may be no elements at all
        ),
        np.asarray(prevalence, dtype=np.float64).reshape(-1, *prevalence.shape[-2:]),
    )
