"""When to stop: effective sample size and R-hat of quantities that do not depend on labels.

Labels may switch at any time, so the rule looks at the log likelihood, the sorted prevalences
and the probabilities of some patterns, and at whatever the caller wants watched besides.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.model.pooled_prevalence import spread_of
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.table import Table, UnitTable

COMMONEST = 5
"""How many of the commonest patterns are watched; a few rarer ones come on top."""

TAIL = (0.05, 0.95)

FEW_UNITS, SOME_UNITS = 4, 30
"""Pooled units whose sorted prevalences, and whose reported ones, are watched."""


@dataclass(frozen=True, slots=True)
class StoppingRule:
    """What is asked of every watched quantity.

    Attributes
    ----------
    ess : float
        Least bulk and tail effective sample size.
    r_hat : float
        Highest R-hat.
    """

    ess: float = 1000.0
    r_hat: float = 1.01


@dataclass(frozen=True, slots=True)
class Convergence:
    """The worst of the watched quantities.

    Attributes
    ----------
    ess : float
        Smallest bulk or tail effective sample size; infinite when all are constant.
    ess_of : str
        The quantity that it belongs to.
    r_hat : float
        Largest R-hat; 1 when all are constant.
    r_hat_of : str
    """

    ess: float
    ess_of: str
    r_hat: float
    r_hat_of: str

    def meets(self, rule: StoppingRule) -> bool:
        """Whether the rule is met."""
        return self.ess >= rule.ess and self.r_hat <= rule.r_hat


def judge(quantities: Mapping[str, Floats]) -> Convergence:
    """Find the worst effective sample size and R-hat; constants are skipped.

    Parameters
    ----------
    quantities : mapping of str to ndarray, shape (chain, draw)

    Returns
    -------
    Convergence
        R-hat is rank-normalised and split (Vehtari et al. 2021).
    """
    from arviz_stats.base import array_stats

    worst_ess, ess_of = math.inf, ""
    worst_r_hat, r_hat_of = 1.0, ""
    for name, values in quantities.items():
        if not np.ptp(values) > 0.0:
            continue
        with np.errstate(invalid="ignore", divide="ignore"):  # chains that never move: nan
            bulk = float(array_stats.ess(values, method="bulk"))
            tail = float(array_stats.ess(values, method="tail", prob=TAIL))
            # A single chain has no R-hat; the diagnostics say so, and it must not run for ever.
        r_hat = float(array_stats.rhat(values)) if len(values) > 1 else 1.0
        ess = min(bulk, tail) if math.isfinite(bulk) and math.isfinite(tail) else 0.0
        if ess < worst_ess:
            worst_ess, ess_of = ess, name
        if not r_hat <= worst_r_hat:  # nan counts as worst: a chain that never moves
            worst_r_hat, r_hat_of = r_hat if math.isfinite(r_hat) else math.inf, name
    return Convergence(worst_ess, ess_of, worst_r_hat, r_hat_of)


def label_free(
    table: Table,
    watched: UnitTable,
    elements: Floats,
    prevalence: Floats,
    log_likelihood: Floats,
    concentration: Floats | None = None,
) -> dict[str, Floats]:
    """Return the quantities that do not depend on labels.

    Parameters
    ----------
    table : Table
    watched : UnitTable
        Some units; see `watched_units`.
    elements : ndarray, shape (chain, draw, E)
    prevalence : ndarray, shape (chain, draw, groups, K)
    log_likelihood : ndarray, shape (chain, draw)
    concentration : ndarray, shape (chain, draw, K), optional
        Of pooled units.
    """
    quantities = {"log likelihood": log_likelihood}
    ranked = np.sort(prevalence, axis=-1)[..., ::-1]
    # Pooled units may be many, and are of one kind: their mean and spread are watched, and some.
    every = range(ranked.shape[2])
    for g in every if concentration is None else some_rows(ranked.shape[2], FEW_UNITS):
        for k in range(ranked.shape[3]):
            quantities[f"prevalence of rank {k + 1} in group {g + 1}"] = ranked[:, :, g, k]
    if concentration is not None:
        quantities["spread between units"] = spread_of(concentration)
        means = np.sort(concentration / concentration.sum(axis=-1, keepdims=True), axis=-1)
        for k in range(means.shape[2]):
            quantities[f"mean prevalence of rank {k + 1}"] = means[:, :, -1 - k]
    patterns = log_unit_likelihood(table, watched, elements, prevalence)
    for u in range(patterns.shape[-1]):
        quantities[f"probability of watched pattern {u + 1}"] = patterns[..., u]
    return quantities


def some_rows(n: int, most: int) -> list[int]:
    """Return all rows, or some that are spread evenly over them."""
    return sorted(set(np.linspace(0, n - 1, min(n, most)).astype(int).tolist()))


def watched_units(units: UnitTable, most: int = COMMONEST) -> UnitTable:
    """Choose the commonest units, and as many again spread over the rest."""
    order = np.argsort(-np.asarray(units.count), kind="stable")
    rest = order[most:]
    spread = rest[np.linspace(0, rest.size - 1, min(most, rest.size)).astype(int)]
    return some_units(units, np.concatenate([order[:most], np.unique(spread)]))


def some_units(units: UnitTable, which: Ints) -> UnitTable:
    """Return the table of some of the units."""
    rows = [units.row[units.row_start[u] : units.row_start[u + 1]] for u in which]
    lengths = [row.size for row in rows]
    return UnitTable(
        row_start=np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64),
        row=np.concatenate([np.zeros(0, dtype=np.int64), *rows]),
        count=units.count[which],
        prevalence_row=units.prevalence_row[which],
        log_weight=units.log_weight[which] if units.log_weight.size else units.log_weight,
    )
