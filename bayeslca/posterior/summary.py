"""Summaries of draws: the columns that every table of the posterior has."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import BayesLCAError

if TYPE_CHECKING:
    import pandas as pd

SUMMARY_COLUMNS = (
    "median",
    "mean",
    "sd",
    "lower",
    "upper",
    "mcse",
    "ess_bulk",
    "ess_tail",
    "r_hat",
)
"""Columns of every table of quantities.

``lower`` and ``upper`` are the ends of the equal-tailed interval whose level stands in
``frame.attrs["interval"]``; ``mcse`` is the Monte Carlo standard error of the mean; ``ess_bulk``
and ``ess_tail`` are effective sample sizes and ``r_hat`` is the rank-normalised split R-hat
(Vehtari, Gelman, Simpson, Carpenter & Bürkner 2021). The last four are nan for constants.
"""

TAIL = (0.05, 0.95)
"""The quantiles whose effective sample size is the tail one."""


MIRROR = 1e-12
"""Two probabilities that sum to 1 within this are the two answers of one item."""


@dataclass(frozen=True, eq=False)
class Quantities:
    """Draws of some quantities, with what does not depend on the interval kept.

    Attributes
    ----------
    draws : ndarray, shape (chain, draw, quantity)
    """

    draws: Floats
    _kept: dict[str, Floats] = field(default_factory=dict, init=False, repr=False)

    def summary(self, interval: float = 0.95) -> dict[str, Floats]:
        """Return the summary columns, each of shape (quantity,), in order."""
        check_interval(interval)
        flat = self.draws.reshape(-1, self.draws.shape[-1])
        tail = (1.0 - interval) / 2.0
        lower, median, upper = np.quantile(flat, [tail, 0.5, 1.0 - tail], axis=0)
        columns = {
            "median": median,
            "mean": flat.mean(axis=0),
            "sd": flat.std(axis=0, ddof=1),
            "lower": lower,
            "upper": upper,
            **self.monte_carlo(),
        }
        return {name: np.asarray(columns[name], dtype=np.float64) for name in SUMMARY_COLUMNS}

    def monte_carlo(self) -> dict[str, Floats]:
        """Return mcse, ess_bulk, ess_tail and r_hat, each of shape (quantity,)."""
        if not self._kept:
            self._kept.update(_monte_carlo(self.draws))
        return dict(self._kept)


def summary_frame(
    keys: pd.DataFrame, quantities: Quantities, interval: float = 0.95
) -> pd.DataFrame:
    """Return key columns with the summary of one quantity a row.

    Parameters
    ----------
    keys : DataFrame
        A row for each quantity.
    quantities : Quantities
    interval : float
    """
    frame = keys.assign(**quantities.summary(interval))
    frame.attrs["interval"] = interval
    return frame


def check_interval(interval: float) -> None:
    """Refuse a level that is not between 0 and 1."""
    if not 0.0 < interval < 1.0:
        msg = f"interval={interval!r}: the level is a share between 0 and 1, such as 0.95."
        raise BayesLCAError(msg)


def _monte_carlo(draws: Floats) -> dict[str, Floats]:
    from arviz_stats.base import array_stats

    n = draws.shape[-1]
    out = {name: np.full(n, np.nan) for name in ("mcse", "ess_bulk", "ess_tail", "r_hat")}
    moving = np.flatnonzero(np.ptp(draws, axis=(0, 1)) > 0.0)
    for q in moving.tolist():
        if _mirrors_the_one_before(draws, q):  # "yes" after "no": the same figures
            for column in out.values():
                column[q] = column[q - 1]
            continue
        values = np.ascontiguousarray(draws[:, :, q])
        with np.errstate(invalid="ignore", divide="ignore"):  # chains that never move: nan
            out["mcse"][q] = array_stats.mcse(values, method="mean")
            out["ess_bulk"][q] = array_stats.ess(values, method="bulk")
            out["ess_tail"][q] = array_stats.ess(values, method="tail", prob=TAIL)
            out["r_hat"][q] = array_stats.rhat(values)
    return out


def _mirrors_the_one_before(draws: Floats, q: int) -> bool:
    """Whether a quantity is one minus the quantity before it, in every draw."""
    return q > 0 and bool(np.all(np.abs(draws[:, :, q] + draws[:, :, q - 1] - 1.0) < MIRROR))
