"""Whether covariates separate the classes: a prediction without error, as the cases are placed.

References
----------
Albert, A. & Anderson, J. A. (1984). On the existence of maximum likelihood estimates in logistic
regression models. Biometrika 71, 1-10 (complete and quasi-complete separation).
Konis, K. (2007). Linear programming algorithms for detecting separated data in binary logistic
regression models. DPhil thesis, University of Oxford (the linear programme; from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.sparse import csr_array, hstack

from bayeslca._typing import Floats, Ints

CLEAR = 1e-6


@dataclass(frozen=True)
class Separation:
    """What separates which classes.

    Attributes
    ----------
    complete : bool
        True when the covariates predict the class of every case without error; False when they
        do for some cases, and tie for others.
    columns : tuple of str
        Columns of the design that do it.
    classes : tuple of int
        Classes that are told from some other class so.
    """

    complete: bool
    columns: tuple[str, ...]
    classes: tuple[int, ...]


def find_separation(
    design: Floats, placed: Ints, names: Sequence[str], n_classes: int
) -> Separation | None:
    """Look for coefficients that never favour a wrong class, and favour the right one at times.

    Parameters
    ----------
    design : ndarray, shape (n, P)
    placed : ndarray of int, shape (n,)
        The class of each case.
    names : sequence of str
        Of the P columns.
    n_classes : int

    Returns
    -------
    Separation or None
        None where maximum likelihood has a finite maximum.
    """
    present = np.unique(placed)
    if present.size < 2:
        return None
    lines, own, times = _distinct(design, placed)
    margins = _margins(lines, own, present, n_classes)
    weight = np.repeat(times, present.size - 1)
    found = _highest(margins, weight)
    if found is None:
        return None
    told = np.repeat(own, present.size - 1)[margins @ found > CLEAR]
    alone = [p for p in range(1, lines.shape[1]) if _separates(lines[:, [0, p]], own, n_classes)]
    moving = np.ptp(found.reshape(n_classes, -1)[present], axis=0) > CLEAR
    at = alone or [p for p in range(1, lines.shape[1]) if moving[p]]
    return Separation(
        complete=_least_margin(margins) > CLEAR,
        columns=tuple(names[p] for p in at),
        classes=tuple(sorted(set(told.tolist()))),
    )


def _distinct(design: Floats, placed: Ints) -> tuple[Floats, Ints, Floats]:
    """Return distinct lines (n, P), the class of each, and how many cases it stands for."""
    key, times = np.unique(np.column_stack([placed, design]), axis=0, return_counts=True)
    return key[:, 1:], key[:, 0].astype(np.int64), times.astype(np.float64)


def _margins(lines: Floats, own: Ints, present: Ints, n_classes: int) -> csr_array:
    """Return the matrix from coefficients (K * P,) to margins of the own class over others."""
    n_columns = lines.shape[1]
    line = np.repeat(np.arange(len(lines)), present.size - 1)
    other = np.concatenate([present[present != k] for k in own])
    row = np.repeat(np.arange(line.size), n_columns)
    column = np.arange(n_columns)
    plus = (own[line][:, None] * n_columns + column).ravel()
    minus = (other[:, None] * n_columns + column).ravel()
    values = lines[line].ravel()
    return csr_array(
        (
            np.concatenate([values, -values]),
            (np.concatenate([row, row]), np.concatenate([plus, minus])),
        ),
        shape=(line.size, n_classes * n_columns),
    )


def _highest(margins: csr_array, weight: Floats) -> Floats | None:
    """Return coefficients in [-1, 1] with the highest sum of margins, none negative."""
    from scipy.optimize import linprog

    found: Any = linprog(  # type: ignore[call-overload]
        np.asarray(-(margins.T @ weight)),
        A_ub=-margins,
        b_ub=np.zeros(margins.shape[0]),
        bounds=(-1.0, 1.0),
        method="highs",
    )
    if not found.success or -found.fun < CLEAR * weight.sum():
        return None
    return np.asarray(found.x)


def _separates(lines: Floats, own: Ints, n_classes: int) -> bool:
    margins = _margins(lines, own, np.unique(own), n_classes)
    return _highest(margins, np.ones(margins.shape[0])) is not None


def _least_margin(margins: csr_array) -> float:
    """Return the highest value that the smallest margin can have."""
    from scipy.optimize import linprog

    n, m = margins.shape
    cost = np.zeros(m + 1)
    cost[-1] = -1.0
    found: Any = linprog(  # type: ignore[call-overload]
        cost,
        A_ub=hstack([-margins, csr_array(np.ones((n, 1)))]),
        b_ub=np.zeros(n),
        bounds=[(-1.0, 1.0)] * m + [(0.0, None)],
        method="highs",
    )
    return -float(found.fun) if found.success else 0.0
