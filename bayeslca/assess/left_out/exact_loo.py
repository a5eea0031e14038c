"""Leave-one-out where importance sampling will not do: refits without one case.

Cases with the same answers (and group) share their leave-one-out figure, so that there is one
refit at most for each distinct pattern, without one of its cases.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Ints
from bayeslca.assess.comparison.information_criteria import (
    PointwiseElpd,
    mcse_of_mean,
    psis_loo,
    relative_efficiency,
    with_refits,
)
from bayeslca.assess.left_out.refits import Refit, Summarise, Without, refit_without, why_no_refit
from bayeslca.exceptions import SamplingError
from bayeslca.sampling.progress import Show

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

FEW = 12
"""Refits that are done unasked; with more, those with the highest Pareto k."""
ONE_CASE = 1
"""First number of the keys of refits without one case."""


@dataclass(frozen=True, eq=False, repr=False)
class LeaveOneOut:
    """How well a model predicts each case from all the others.

    Attributes
    ----------
    loo : PointwiseElpd
        By distinct answers, as the model sees them: refits where there are any, importance
        sampling elsewhere.
    psis : PointwiseElpd
        By importance sampling throughout.
    table : DataFrame
        A row per distinct pattern: its ``group``, where the model has groups; the items' answers;
        ``count``; ``log_density``, the log predictive density of one of its cases given all the
        others; ``log_density_mcse``, its Monte Carlo error (nan by importance sampling, where only
        the sum has one);
        ``pareto_k``; ``refitted``; ``reliable``.
    refits : mapping of int to Refit
        By the pattern's row.
    no_refit : str
        Why patterns that should have been refitted were not; empty where none is missing.
    """

    loo: PointwiseElpd
    psis: PointwiseElpd
    table: pd.DataFrame
    refits: Mapping[int, Refit]
    no_refit: str

    @property
    def verdict(self) -> str:
        """What was found and how, in words."""
        n, total = self.loo.n_refitted, self.loo.counts.size
        text = (
            f"Leave-one-out accuracy (elpd) {self.loo.elpd:.1f} ± {self.loo.se:.1f}, simulation "
            f"error {self.loo.mcse:.2f}. "
        )
        text += self.no_refit if self.no_refit and not n else f"{refitted_in_words(n, total)}."
        if self.loo.n_unreliable:
            cases = "case's figure is" if self.loo.n_unreliable == 1 else "cases' figures are"
            text += f" {self.loo.n_unreliable} {cases} not reliable."
        return text + (f" {self.no_refit}" if self.no_refit and n else "")

    def __repr__(self) -> str:
        from textwrap import fill

        return fill(self.verdict, 79)


def refitted_in_words(n: int, total: int) -> str:
    """Return how many patterns were refitted: ``3 of 57 patterns were refitted ...``."""
    if n == 0:
        return "No pattern was refitted"
    if n == total:
        return f"All {total} patterns were refitted without one of their cases"
    was = "pattern was" if n == 1 else "patterns were"
    its = "its" if n == 1 else "their"
    return f"{n} {was} refitted without one of {its} cases"


def leave_one_out(
    posterior: Posterior,
    *,
    exact: bool | None = None,
    seed: int | None = None,
    threads: int | None = None,
    progress: bool | Show = True,
) -> LeaveOneOut:
    """Find how well a model predicts each case from all the others.

    Parameters
    ----------
    posterior : Posterior
    exact : bool, optional
        True: every distinct pattern is refitted without one of its cases. False: none is; all
        figures are by Pareto-smoothed importance sampling. Left out: patterns whose importance
        weights are poor (Pareto k above 0.7, or few effective draws) are refitted, at most 12.
    seed : int, optional
        Of the refits; that of the posterior when left out.
    threads : int, optional
    progress : bool or callable
        Of the refits; see `Posterior` and `bayeslca.sampling.progress`.

    Raises
    ------
    SamplingError
        When ``exact`` is True and a part of the model has no exact Gibbs step.
    KeyboardInterrupt
        On Ctrl-C, when all refits have stopped.

    Notes
    -----
    log p(y_i | the other cases) is the log of the mean of p(y_i | parameters) over the posterior
    without case i. Importance sampling reweighs the posterior of all cases to that (Vehtari,
    Gelman & Gabry 2017, Statistics and Computing 27, 1413-1432). A refit samples the posterior
    without the case, and a bridge between both posteriors gives the mean: see
    `bayeslca.assess.left_out.one_case_bridge`.
    """
    return left_out(posterior, exact, seed, threads, progress, None)


def left_out(
    posterior: Posterior,
    exact: bool | None,
    seed: int | None,
    threads: int | None,
    progress: bool | Show,
    summarise: Summarise | None,
) -> LeaveOneOut:
    """Do what `leave_one_out` does, with a summary of each refit besides."""
    values, counts = posterior.log_likelihood_draws, posterior.unit_table.count
    efficiency = relative_efficiency(
        posterior.prevalence_draws, posterior.response_probability_draws
    )
    psis = psis_loo(values, counts, relative_efficiency=efficiency)
    which, missing = _to_refit(posterior, psis, exact)
    refits = refit_without(
        posterior,
        [_without_one(posterior, u) for u in which.tolist()],
        seed=seed,
        threads=threads,
        progress=progress,
        summarise=summarise,
    )
    loo = psis
    if refits:
        loo = with_refits(
            psis,
            values,
            which,
            refits,
            relative_efficiency=efficiency,
        )
    by_unit = dict(zip(which.tolist(), refits, strict=True))
    return LeaveOneOut(loo, psis, _table(posterior, loo, by_unit), by_unit, missing)


def _without_one(posterior: Posterior, unit: int) -> Without:
    counts = np.array(posterior.unit_table.count, dtype=np.int64)
    weight = counts[[unit]]
    counts[unit] -= 1
    given = np.ascontiguousarray(posterior.log_likelihood_draws[:, :, unit])
    return Without(counts, np.array([unit]), weight, (ONE_CASE, unit), given)


def _to_refit(posterior: Posterior, psis: PointwiseElpd, exact: bool | None) -> tuple[Ints, str]:
    """Return the units to refit, and why others that need it are not."""
    poor = np.flatnonzero(psis.poorly_weighted)
    if exact is False or (exact is None and not poor.size):
        return np.zeros(0, dtype=np.int64), ""
    reason = why_no_refit(posterior)
    if reason and exact:
        msg = f"exact leave-one-out cannot be done here: {reason}. Leave exact out."
        raise SamplingError(msg)
    if exact:
        return np.arange(psis.counts.size), ""
    if reason or psis.n_cases < 2:
        return np.zeros(0, dtype=np.int64), f"No pattern was refitted: {reason or 'one case'}."
    if poor.size <= FEW:
        return poor, ""
    assert psis.pareto_k is not None
    worst = poor[np.argsort(-psis.pareto_k[poor], kind="stable")[:FEW]]
    words = (
        f"{poor.size} patterns have poor importance weights; the worst {FEW} were refitted "
        "(exact=True refits all)."
    )
    return np.sort(worst), words


def _table(posterior: Posterior, loo: PointwiseElpd, refits: Mapping[int, Refit]) -> pd.DataFrame:
    from bayeslca.posterior.membership import pattern_keys

    mcse = np.full(loo.counts.size, np.nan)
    for u, one in refits.items():
        assert one.given is not None
        mcse[u] = math.hypot(one.mcse[0], mcse_of_mean(one.given))
    return pattern_keys(posterior.model, posterior.units).assign(
        log_density=loo.pointwise,
        log_density_mcse=mcse,
        pareto_k=loo.pareto_k,
        refitted=np.isin(np.arange(loo.counts.size), list(refits)),
        reliable=~loo.unreliable,
    )
