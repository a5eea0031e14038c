"""The tables of posterior predictive checks, from replicates."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats
from bayeslca.assess.fit.posterior_p import PosteriorP, posterior_p, two_sided_p
from bayeslca.assess.fit.replicates import Both, Replicates
from bayeslca.assess.fit.strata import Strata, stratum_sizes
from bayeslca.model.pair_measures import answer_scores
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.posterior.tables import OVERALL

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior

CHECKS: Mapping[str, str] = {
    "g2": "response patterns, G2",
    "x2": "response patterns, X2",
    "power_divergence": "response patterns, power divergence",
    "item_margins": "answers to single items",
    "item_pairs": "pairs of items",
    "sum_scores": "sum scores",
    "distinct_patterns": "number of distinct patterns",
}
"""The checks and what they are of, in words."""

PATTERN_DRAWS = 250
"""Draws over which the tail of a pattern's count is averaged."""


def checks_table(found: Replicates, interval: float) -> pd.DataFrame:
    """Return a row for each check (and group) with the data's and the replicates' discrepancy."""
    rows: list[dict[str, Any]] = []
    for check, both in _discrepancies(found).items():
        judge = two_sided_p if check == "distinct_patterns" else posterior_p
        judged = judge(both, found.shape)
        lower, upper = _interval(both.replicated, interval)
        for at, group in _groups(found.strata):
            rows.append(
                {
                    "check": check,
                    **group,
                    "observed": float(both.observed[:, at].mean()),
                    "expected": float(both.replicated[:, at].mean()),
                    "lower": float(lower[at]),
                    "upper": float(upper[at]),
                    **_judged(judged, at),
                }
            )
    return _frame(rows, interval)


def _discrepancies(found: Replicates) -> dict[str, Both]:
    """Return the discrepancy of each check, (D, G + 1)."""
    margins = Both(found.item_x2.observed.sum(axis=-1), found.item_x2.replicated.sum(axis=-1))
    out = {
        "g2": found.g2,
        "x2": found.x2,
        "power_divergence": found.power_divergence,
        "item_margins": margins,
    }
    if found.pairs is not None:
        observed, replicated = found.pair.observed, found.pair.replicated
        out["item_pairs"] = Both(np.abs(observed).max(axis=-1), np.abs(replicated).max(axis=-1))
    if has_sum_scores(found):
        expected = found.expected_scores
        out["sum_scores"] = Both(
            freeman_tukey(found.scores.observed, expected),
            freeman_tukey(found.scores.replicated, expected),
        )
    out["distinct_patterns"] = found.n_patterns
    return out


def freeman_tukey(counts: Floats, expected: Floats) -> Floats:
    """Return the distance of Freeman & Tukey (1950), 4 sum (sqrt O - sqrt E)^2.

    Unlike X2 it needs no count to be expected.
    """
    return np.asarray(4.0 * ((np.sqrt(counts) - np.sqrt(expected)) ** 2).sum(axis=-1))


def has_sum_scores(found: Replicates) -> bool:
    """Tell whether at least two items add to a sum score."""
    items = found.strata.items
    return sum(bool(answer_scores((item,)).any()) for item in items) > 1


def margins_table(found: Replicates, interval: float) -> pd.DataFrame:
    """Return a row for each answer (and group): cases observed and expected."""
    judged = posterior_p(_absolute(found.margin), found.shape)
    lower, upper = _interval(found.counts.replicated, interval)
    names = [(i.name, category) for i in found.strata.items for category in i.categories]
    rows = [
        {
            "item": item,
            "category": category,
            **group,
            "observed": int(found.counts.observed[0, at, a]),
            "expected": float(found.expected[:, at, a].mean()),
            "lower": float(lower[at, a]),
            "upper": float(upper[at, a]),
            "residual": float(found.margin.observed[:, at, a].mean()),
            **_judged(judged, at, a),
        }
        for a, (item, category) in enumerate(names)
        for at, group in _groups(found.strata)
    ]
    return _frame(rows, interval)


def pairs_table(found: Replicates, interval: float) -> pd.DataFrame:
    """Return a row for each pair of items (and group): odds ratio and pair residual."""
    rows: list[dict[str, Any]] = []
    pairs, items = found.pairs, found.strata.items
    if pairs is None:
        return _frame(rows, interval)
    judged = posterior_p(_absolute(found.pair), found.shape)
    both = _answered_both(found.strata)
    for p, (i, j) in enumerate(pairs.pairs):
        for at, group in _groups(found.strata):
            lower, median, upper = _odds(found.odds.replicated[:, at, p], interval)
            rows.append(
                {
                    "item_1": items[i].name,
                    "item_2": items[j].name,
                    **group,
                    "cases": int(both[at, p]),
                    "odds_ratio": float(found.odds.observed[0, at, p]),
                    "odds_ratio_expected": median,
                    "odds_ratio_lower": lower,
                    "odds_ratio_upper": upper,
                    "pair_residual": float(found.pair.observed[:, at, p].mean()),
                    **_judged(judged, at, p),
                }
            )
    return _frame(rows, interval)


def scores_table(found: Replicates, interval: float) -> pd.DataFrame:
    """Return a row for each sum score (and group): cases observed and expected."""
    rows: list[dict[str, Any]] = []
    if not has_sum_scores(found):
        return _frame(rows, interval)
    expected = found.expected_scores
    gaps = Both(found.scores.observed - expected, found.scores.replicated - expected)
    judged = posterior_p(_absolute(gaps), found.shape)
    lower, upper = _interval(found.scores.replicated, interval)
    for score in range(found.scores.replicated.shape[-1]):
        for at, group in _groups(found.strata):
            rows.append(
                {
                    "score": score,
                    **group,
                    "observed": int(found.scores.observed[0, at, score]),
                    "expected": float(expected[:, at, score].mean()),
                    "lower": float(lower[at, score]),
                    "upper": float(upper[at, score]),
                    **_judged(judged, at, score),
                }
            )
    return _frame(rows, interval)


def patterns_table(posterior: Posterior, strata: Strata) -> pd.DataFrame:
    """Return a row for each observed pattern (within group): cases observed and expected.

    The tail of a pattern's count is binomial given the parameters, so nothing is simulated here.
    """
    import pandas as pd
    from scipy.stats import binom

    draws = posterior.draws
    at = np.linspace(0, draws.n_draws - 1, -(-PATTERN_DRAWS // draws.n_chains)).round().astype(int)
    p = np.exp(
        log_unit_likelihood(
            posterior.table, strata.unit_table, draws.elements[:, at], draws.prevalence[:, at]
        )
    ).reshape(-1, strata.units.n_units)
    count, size = strata.units.count, stratum_sizes(strata)
    expected, variance = size * p, size * p * (1.0 - p)
    varies = variance > 1e-12
    residual = np.where(varies, (count - expected) / np.sqrt(np.where(varies, variance, 1)), 0.0)
    columns: dict[str, Any] = {}
    if strata.group_names != ("",):
        columns["group"] = np.array(strata.group_names, dtype=object)[strata.units.group]
    for item, codes in zip(strata.items, strata.units.pattern.T, strict=True):
        columns[item.name] = np.array([*item.categories, None], dtype=object)[codes]
    columns["observed"] = count
    columns["expected"] = expected.mean(axis=0)
    columns["residual"] = residual.mean(axis=0)
    columns["p"] = np.mean(binom.sf(count - 1, size, np.minimum(p, 1.0)), axis=0)
    frame = pd.DataFrame(columns)
    order = np.argsort(-frame["residual"].to_numpy(), kind="stable")
    return frame.iloc[order].reset_index(drop=True)


def _groups(strata: Strata) -> Iterator[tuple[int, dict[str, str]]]:
    """Go through the groups, then all together: their place and key column."""
    if strata.group_names == ("",):
        yield strata.n_groups, {}
        return
    for at, name in enumerate((*strata.group_names, OVERALL)):
        yield at, {"group": name}


def _answered_both(strata: Strata) -> Floats:
    units = strata.units
    answered = units.pattern >= 0
    first, second = np.triu_indices(len(strata.items), 1)
    both = (answered[:, first] & answered[:, second]) * units.count[:, None]
    out = np.zeros((strata.n_groups + 1, first.size))
    np.add.at(out, units.group, both)
    out[-1] = out[:-1].sum(axis=0)
    return out


def _absolute(both: Both) -> Both:
    return Both(np.abs(both.observed), np.abs(both.replicated))


def _judged(judged: PosteriorP, *at: int) -> dict[str, float]:
    return {"p": float(judged.p[at]), "p_mcse": float(judged.mcse[at])}


def _interval(values: Floats, interval: float) -> tuple[Floats, Floats]:
    tail = (1.0 - interval) / 2.0
    lower, upper = np.quantile(values, [tail, 1.0 - tail], axis=0)
    return lower, upper


def _odds(values: Floats, interval: float) -> tuple[float, float, float]:
    """Return the interval's ends and median of odds ratios, infinite ones among them."""
    tail = (1.0 - interval) / 2.0
    there = values[~np.isnan(values)]
    if not there.size:
        return (float("nan"),) * 3
    found = np.quantile(there, [tail, 0.5, 1.0 - tail], method="inverted_cdf")
    return float(found[0]), float(found[1]), float(found[2])


def _frame(rows: list[dict[str, Any]], interval: float) -> pd.DataFrame:
    import pandas as pd

    frame = pd.DataFrame(rows)
    frame.attrs["interval"] = interval
    return frame
