"""Statistics of fit of a maximum likelihood solution: functions of figures and arrays alone.

References
----------
Akaike (1974), IEEE Transactions on Automatic Control 19, 716-723 (AIC). Hurvich & Tsai (1989),
Biometrika 76, 297-307 (AICc). Schwarz (1978), Annals of Statistics 6, 461-464 (BIC). Sclove
(1987), Psychometrika 52, 333-343 (sample-size-adjusted BIC). Bozdogan (1987), Psychometrika 52,
345-370 (CAIC).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from math import log, nan
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np
from scipy.special import xlogy

from bayeslca._typing import Floats, Ints

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True)
class Criteria:
    """Information criteria; smaller is better.

    Attributes
    ----------
    aic, aicc : float
        Akaike's, and corrected for small samples (nan with fewer than two cases more than
        parameters).
    bic, bic_sclove : float
        Schwarz's, and Sclove's, with (N + 2) / 24 in place of N.
    caic : float
        Bozdogan's consistent AIC.
    """

    aic: float
    aicc: float
    bic: float
    bic_sclove: float
    caic: float


class HasCriteria(Protocol):
    """What can be put into a table of criteria."""

    @property
    def criteria(self) -> Criteria:
        """Its criteria."""
        ...


def information_criteria(log_likelihood: float, n_parameters: int, n_cases: int) -> Criteria:
    """Return all criteria.

    Parameters
    ----------
    log_likelihood : float
        Of the data, at the maximum.
    n_parameters : int
        Free parameters.
    n_cases : int
    """
    p, n, deviance = n_parameters, n_cases, -2.0 * log_likelihood
    aic = deviance + 2 * p
    return Criteria(
        aic=aic,
        aicc=aic + 2 * p * (p + 1) / (n - p - 1) if n > p + 1 else nan,
        bic=deviance + p * log(n),
        bic_sclove=deviance + p * log((n + 2) / 24),
        caic=deviance + p * (log(n) + 1),
    )


def criteria_table(fits: Mapping[Any, HasCriteria]) -> pd.DataFrame:
    """Return the criteria of several models of the same answers as a long table.

    Parameters
    ----------
    fits : mapping from name, or number of classes, to MaximumLikelihood

    Returns
    -------
    DataFrame
        Columns ``model``, ``criterion``, ``value`` and ``above_best``: how far the value lies
        above the smallest of that criterion among the models.
    """
    import pandas as pd

    names = [field.name for field in fields(Criteria)]
    rows = [
        {"model": model, "criterion": name, "value": getattr(fit.criteria, name)}
        for model, fit in fits.items()
        for name in names
    ]
    table = pd.DataFrame(rows, columns=["model", "criterion", "value"])
    table["above_best"] = table["value"] - table.groupby("criterion")["value"].transform("min")
    return table


def relative_entropy(membership: Floats, counts: Ints) -> float:
    """Return 1 less the entropy of the memberships over its largest possible value.

    Parameters
    ----------
    membership : ndarray, shape (U, K)
        P(class | answers).
    counts : ndarray of int, shape (U,)

    Returns
    -------
    float
        1 when every case is surely in one class, 0 when the answers say nothing; nan with one
        class, where there is nothing to separate.
    """
    n_classes = membership.shape[1]
    if n_classes == 1:
        return nan
    entropy = -float(counts @ xlogy(membership, membership).sum(axis=1))
    return 1.0 - entropy / (float(counts.sum()) * log(n_classes))


def pearson(counts: Ints, probability: Floats, stratum: Ints) -> float:
    """Return Pearson's X2 from the cells that were observed: sum of O^2 / E, less n.

    Cells without a case add their expected count, which this sum contains.

    Parameters
    ----------
    counts : ndarray of int, shape (cell,)
    probability : ndarray, shape (cell,)
        P(cell), among the cells of its stratum.
    stratum : ndarray of int, shape (cell,)
        Cells whose probabilities sum to 1 (with those not observed): a group.
    """
    cases = np.bincount(stratum, weights=counts)
    expected = cases[stratum] * probability
    return float(np.sum(counts**2 / expected) - cases.sum())
