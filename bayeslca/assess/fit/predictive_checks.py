"""Posterior predictive checks: does the model reproduce the answers that it was fitted to."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

from bayeslca.assess.fit import predictive_words as words
from bayeslca.assess.fit.predictive_tables import (
    checks_table,
    margins_table,
    pairs_table,
    patterns_table,
    scores_table,
)
from bayeslca.assess.fit.replicates import replicates as drawn_replicates
from bayeslca.exceptions import ModelError
from bayeslca.findings import Finding
from bayeslca.posterior.summary import check_interval
from bayeslca.responses.test_results import look_like_tests

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

MOST = 1000
"""Replicates when their number is not given (fewer where fewer draws were kept)."""


@dataclass(frozen=True, eq=False, repr=False)
class PredictiveChecks:
    """Whether a model reproduces the answers that it was fitted to.

    A replicate keeps each case's group and which items it answered; its class is drawn anew from
    the prevalences, and its answers given the class. Discrepancies are taken at the same draw of
    the parameters on both sides. ``p`` is the share of replicates that miss by as much as the
    data or more: a small one is a misfit. As the data were used to fit, it lies nearer to 0.5
    than a p-value that is uniform under a true model, unless it was calibrated.

    Tables have a row for all cases together (group "overall") and one for each group, where the
    responses have groups; ``lower`` and ``upper`` are of the replicates, and their level stands in
    ``frame.attrs["interval"]``; ``p_mcse`` is the Monte Carlo error of ``p``.

    Attributes
    ----------
    overall : DataFrame
        A row per ``check``: ``g2``, ``x2`` and ``power_divergence`` of the response patterns
        within groups and missing patterns; ``item_margins`` (X2 of all answers);
        ``item_pairs`` (the largest pair residual); ``sum_scores`` (Freeman-Tukey distance);
        ``distinct_patterns`` (two-sided). Columns ``observed, expected, lower, upper, p, p_mcse``
        (means of the discrepancy), and ``p_calibrated, p_calibrated_mcse`` where asked for.
    margins : DataFrame
        A row per answer: cases ``observed`` and ``expected``, ``residual`` in standard errors.
    pairs : DataFrame
        A row per pair of items: ``cases`` that answered both, ``odds_ratio`` and what replicates
        have (``odds_ratio_expected``, ``odds_ratio_lower``, ``odds_ratio_upper``), and
        ``pair_residual``; see :mod:`bayeslca.assess.fit.item_pairs`.
    sum_scores : DataFrame
        A row per sum score (yes answers, and places of ordered answers from 0).
    patterns : DataFrame
        A row per observed pattern, the furthest off first; ``p`` is of as many cases or more.
    findings : tuple of Finding
    verdict : str
    reproduces : bool
        False when a check of all cases has p (calibrated, where asked for) below 0.01.
    replicates, seed : int
    calibrated_in : int
        Simulated studies behind the calibrated p-values; 0 when not asked for.
    """

    overall: pd.DataFrame
    margins: pd.DataFrame
    pairs: pd.DataFrame
    sum_scores: pd.DataFrame
    patterns: pd.DataFrame
    findings: tuple[Finding, ...]
    verdict: str
    reproduces: bool
    replicates: int
    seed: int
    calibrated_in: int = 0

    def __repr__(self) -> str:
        return words.checks_text(self._tables, self.verdict, self.replicates, self.findings)

    def _repr_html_(self) -> str:
        return words.checks_html(self._tables, self.verdict, self.replicates)

    @property
    def _tables(self) -> words.Tables:
        return words.Tables(self.overall, self.margins, self.pairs, self.sum_scores, self.patterns)


def predictive_checks(
    posterior: Posterior,
    *,
    replicates: int = MOST,
    seed: int = 0,
    interval: float = 0.95,
    calibrate: int = 0,
    calibrate_from: Literal["posterior", "prior"] = "posterior",
    progress: bool | Callable[[int, int], None] = True,
) -> PredictiveChecks:
    """Check whether a model reproduces the answers that it was fitted to.

    Parameters
    ----------
    posterior : Posterior
    replicates : int
        Replicates of the data, one for each of as many draws; at most the draws that were kept.
    seed : int
    interval : float
        Level of the replicates' intervals.
    calibrate : int
        Number of simulated studies, each fitted and checked like this one, among whose p-values
        those of the data are ranked (Hjort, Dahl & Steinbakk 2006). 0: not calibrated.
    calibrate_from : {"posterior", "prior"}
        Where the parameters of simulated studies come from. The prior is what the paper has, and
        says little where it is vague; the posterior stays near the data.
    progress : bool or callable
        Of the calibration: called with studies done and studies to do.

    Returns
    -------
    PredictiveChecks
    """
    _check_options(replicates, calibrate, calibrate_from)
    check_interval(interval)
    found = drawn_replicates(posterior, replicates, seed)
    tables = words.Tables(
        overall=checks_table(found, interval),
        margins=margins_table(found, interval),
        pairs=pairs_table(found, interval),
        sum_scores=scores_table(found, interval),
        patterns=patterns_table(posterior, found.strata),
        are_tests=look_like_tests(posterior.model.items),
        together=tuple(frozenset(one.items) for one in posterior.model.answered_together),
    )
    if calibrate:
        from bayeslca.assess.fit.calibrated_p import calibrated

        tables = replace(
            tables,
            overall=calibrated(
                posterior, tables.overall, calibrate, calibrate_from, found.n, seed, progress
            ),
        )
    units = found.strata.units
    n_missing = int(((units.pattern < 0).sum(axis=1) * units.count).sum())
    judged = [words.judged_p(row) for row in words.records(words.overall_rows(tables.overall))]
    return PredictiveChecks(
        overall=tables.overall,
        margins=tables.margins,
        pairs=tables.pairs,
        sum_scores=tables.sum_scores,
        patterns=tables.patterns,
        findings=words.predictive_findings(tables, found.n, n_missing),
        verdict=words.verdict_in_words(tables, found.n),
        reproduces=min(judged) >= words.MISSED,
        replicates=found.n,
        seed=seed,
        calibrated_in=calibrate,
    )


def _check_options(replicates: int, calibrate: int, calibrate_from: str) -> None:
    if replicates < 1 or calibrate < 0:
        msg = (
            f"replicates={replicates!r}, calibrate={calibrate!r}: give at least 1 replicate, and "
            "0 or more simulated studies."
        )
        raise ModelError(msg)
    if calibrate_from not in ("posterior", "prior"):
        msg = f"calibrate_from={calibrate_from!r}: it is 'posterior' or 'prior'."
        raise ModelError(msg)
