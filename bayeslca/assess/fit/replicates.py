"""Replicates beside the data: every discrepancy of both, at the same draws of the parameters."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.assess.fit.item_pairs import ItemPairs, with_sum
from bayeslca.assess.fit.strata import Strata, strata_of, stratum_sizes
from bayeslca.model.pair_measures import answer_scores
from bayeslca.model.probabilities import PIECE, log_unit_likelihood, row_probability
from bayeslca.model.table import Table

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

POWER = 2 / 3
"""Of the power divergence: what Cressie & Read (1984) recommend. G2 is power 0, X2 is power 1."""


@dataclass(frozen=True, eq=False)
class Both:
    """A quantity of the data and of the replicates, draw by draw.

    Attributes
    ----------
    observed, replicated : ndarray, shape (D, ...)
        ``observed`` has D = 1 where it does not depend on the parameters.
    """

    observed: Floats
    replicated: Floats


@dataclass(frozen=True, eq=False)
class Replicates:
    """What the draws of a posterior give on the data and on replicates of it.

    Of D draws, G groups (then all together: G + 1), A answers, P pairs.

    Attributes
    ----------
    strata : Strata
    pairs : ItemPairs or None
        None with a single item.
    shape : tuple of int
        The draws as (chain, draw).
    g2, x2, power_divergence, n_patterns : Both, shape (D, G + 1)
    counts : Both, shape (D, G + 1, A)
        Cases that gave each answer.
    expected : ndarray, shape (D, G + 1, A)
        The same, as the parameters have it.
    margin : Both, shape (D, G + 1, A)
        Counts less expected, in standard errors.
    item_x2 : Both, shape (D, G + 1, J)
    pair : Both, shape (D, G + 1, P)
        Pair residuals.
    odds : Both, shape (D, G + 1, P)
        Odds ratios.
    scores : Both, shape (D, G + 1, points)
        Cases with each sum score.
    expected_scores : ndarray, shape (D, G + 1, points)
        The same, as the parameters have it.
    """

    strata: Strata
    pairs: ItemPairs | None
    shape: tuple[int, int]
    g2: Both
    x2: Both
    power_divergence: Both
    n_patterns: Both
    counts: Both
    expected: Floats
    margin: Both
    item_x2: Both
    pair: Both
    odds: Both
    scores: Both
    expected_scores: Floats

    @property
    def n(self) -> int:
        """Number of replicates."""
        return self.shape[0] * self.shape[1]


def spread_draws(n_draws: int, n_chains: int, wanted: int) -> Ints:
    """Return which draws of each chain are used: evenly spread, ``wanted`` in all chains."""
    each = min(n_draws, max(1, -(-wanted // n_chains)))
    return np.linspace(0, n_draws - 1, each).round().astype(np.int64)


def replicates(posterior: Posterior, wanted: int, seed: int) -> Replicates:
    """Draw a replicate of the data for each of some draws, and measure both.

    Each case keeps its group and which items it answered; its class is drawn anew from the
    prevalences.

    Parameters
    ----------
    posterior : Posterior
    wanted : int
        Number of replicates.
    seed : int
    """
    table, strata = posterior.table, strata_of(posterior.model, posterior.responses)
    draws = posterior.draws
    at = spread_draws(draws.n_draws, draws.n_chains, wanted)
    elements = np.concatenate(draws.elements[:, at])
    prevalence = np.concatenate(draws.prevalence[:, at])
    measure = _Measure(table, strata, ItemPairs(strata.items) if table.n_items > 1 else None)
    size = measure.piece
    pieces = [slice(first, first + size) for first in range(0, len(elements), size)]
    seeds = np.random.SeedSequence(seed).spawn(len(pieces))
    found = [
        measure(elements[piece], prevalence[piece], np.random.default_rng(one))
        for piece, one in zip(pieces, seeds, strict=True)
    ]
    joined = {name: np.concatenate([one[name] for one in found]) for name in found[0]}
    observed = measure.observed
    return Replicates(
        strata=strata,
        pairs=measure.pairs,
        shape=(draws.n_chains, at.size),
        g2=_both(joined, "g2"),
        x2=_both(joined, "x2"),
        power_divergence=_both(joined, "power_divergence"),
        n_patterns=Both(observed.n_patterns[None], joined["replicated n_patterns"]),
        counts=Both(with_sum(observed.counts)[None], joined["replicated counts"]),
        expected=joined["expected"],
        margin=_both(joined, "margin"),
        item_x2=_both(joined, "item_x2"),
        pair=_both(joined, "pair"),
        odds=Both(observed.odds[None], joined["replicated odds"]),
        scores=Both(with_sum(observed.scores)[None], joined["replicated scores"]),
        expected_scores=joined["expected scores"],
    )


def _both(joined: dict[str, Floats], name: str) -> Both:
    return Both(joined[f"observed {name}"], joined[f"replicated {name}"])


@dataclass(frozen=True, eq=False)
class _Observed:
    """What the data have, whatever the parameters."""

    counts: Floats  # (G, A)
    pair_counts: Floats  # (G, joint answers)
    n_both: Floats  # (G, P)
    scores: Floats  # (G, points)
    n_patterns: Floats  # (G + 1,)
    odds: Floats  # (G + 1, P)


class _Measure:
    """Measures the data and a replicate at draws of the parameters.

    Parameters
    ----------
    table : Table
    strata : Strata
    pairs : ItemPairs or None
    """

    def __init__(self, table: Table, strata: Strata, pairs: ItemPairs | None) -> None:
        self.table, self.strata, self.pairs = table, strata, pairs
        self.score = answer_scores(strata.items)
        self.observed = self._observe()
        n_cells = pairs.n_cells if pairs is not None else 0
        widest = max(
            strata.n_groups * max(n_cells, self.score.size),
            table.n_rows * table.n_classes,
            strata.units.n_units,
        )
        self.piece = max(1, PIECE // widest)

    def __call__(
        self, elements: Floats, prevalence: Floats, rng: np.random.Generator
    ) -> dict[str, Floats]:
        """Return everything at some draws, by name."""
        strata, table = self.strata, self.table
        rows = row_probability(table, elements)
        by_group = prevalence[:, strata.group_row]
        response_group = table.response_group[strata.group_row].tolist()
        answers = np.stack(
            [
                np.einsum("dk,dak->da", by_group[:, g], rows[:, table.response_row[at]])
                for g, at in enumerate(response_group)
            ],
            axis=1,
        )
        patterns, counts, pair_counts, scores, expected = self._replicate(rows, prevalence, rng)
        out = {
            "replicated n_patterns": patterns[..., 3],
            "replicated counts": with_sum(counts),
            "replicated scores": with_sum(scores),
            "expected scores": with_sum(expected),
            "expected": with_sum(self._asked * answers),
        }
        seen = self._divergences(elements, prevalence)
        for at, name in enumerate(("g2", "x2", "power_divergence")):
            out[f"observed {name}"], out[f"replicated {name}"] = seen[..., at], patterns[..., at]
        for what, these in (("observed", self.observed.counts), ("replicated", counts)):
            out[f"{what} margin"], out[f"{what} item_x2"] = self._margins(these, answers)
        if self.pairs is None:
            empty = np.zeros((len(elements), strata.n_groups + 1, 0))
            names = ("observed pair", "replicated pair", "replicated odds")
            return out | dict.fromkeys(names, empty)
        joint = self.pairs.probability(table, rows, by_group, response_group)
        n_both = self.observed.n_both
        out["observed pair"] = self.pairs.residuals(self.observed.pair_counts, joint, n_both)
        out["replicated pair"] = self.pairs.residuals(pair_counts, joint, n_both)
        out["replicated odds"] = self.pairs.odds_ratio(with_sum(pair_counts))
        return out

    @property
    def _asked(self) -> Floats:
        """Cases that answered each answer's item, shape (G, A)."""
        return np.repeat(self.strata.answered, np.diff(self.table.item_start), axis=1).astype(
            np.float64
        )

    @property
    def _points(self) -> Ints:
        """What each answer of each field adds to a sum score."""
        fields, start = self.strata.fields, self.table.item_start
        field = np.repeat(np.arange(len(fields.item)), np.diff(fields.start))
        place = np.arange(fields.row.size) - fields.start[field]
        out = np.zeros(place.size, dtype=np.int64)
        for item, size in zip(fields.item.T[::-1], fields.size.T[::-1], strict=True):
            place, category = np.divmod(place, size[field])
            there = item[field] >= 0
            out[there] += self.score[start[item[field[there]]] + category[there]]
        return out

    def _observe(self) -> _Observed:
        units = self.strata.units
        start, n_groups = self.table.item_start, self.strata.n_groups
        counts = np.zeros((n_groups, int(start[-1])))
        points = np.zeros(units.n_units, dtype=np.int64)
        for j in range(self.table.n_items):
            at = np.flatnonzero(units.pattern[:, j] >= 0)
            column = start[j] + units.pattern[at, j].astype(np.int64)
            np.add.at(counts, (units.group[at], column), units.count[at])
            points[at] += self.score[column]
        scores = np.zeros((n_groups, highest_score(self.score, start) + 1))
        np.add.at(scores, (units.group, points), units.count)
        patterns = np.bincount(units.group, minlength=n_groups).astype(np.float64)
        pair_counts, n_both, odds = self._observe_pairs()
        return _Observed(
            counts, pair_counts, n_both, scores, with_sum(patterns[:, None])[:, 0], odds
        )

    def _observe_pairs(self) -> tuple[Floats, Floats, Floats]:
        pairs, units, n_groups = self.pairs, self.strata.units, self.strata.n_groups
        if pairs is None:
            return np.zeros((n_groups, 0)), np.zeros((n_groups, 0)), np.zeros((n_groups + 1, 0))
        out = np.zeros((n_groups, pairs.n_cells))
        for p, (i, j) in enumerate(pairs.pairs):
            at = np.flatnonzero((units.pattern[:, i] >= 0) & (units.pattern[:, j] >= 0))
            one, two = units.pattern[at, i].astype(np.int64), units.pattern[at, j]
            cell = pairs.start[p] + one * pairs.items[j].n_categories + two
            np.add.at(out, (units.group[at], cell), units.count[at])
        return out, pairs.summed(out), pairs.odds_ratio(with_sum(out))

    def _divergences(self, elements: Floats, prevalence: Floats) -> Floats:
        """Return G2, X2 and power divergence of the data, (D, G + 1, 3)."""
        strata = self.strata
        log_p = log_unit_likelihood(self.table, strata.unit_table, elements, prevalence)
        observed = strata.units.count.astype(np.float64)
        each = divergences(observed, stratum_sizes(strata), log_p)
        out = np.zeros((len(elements), strata.n_groups, 3))
        for g in range(strata.n_groups):
            out[:, g] = each[:, strata.units.group == g].sum(axis=1)
        return with_sum(out)

    def _margins(self, counts: Floats, answers: Floats) -> tuple[Floats, Floats]:
        """Return counts less expected in standard errors, and X2 of each item; + all groups."""
        start = self.table.item_start[:-1]
        expected, variance = self._asked * answers, self._asked * answers * (1.0 - answers)
        gap, variance = with_sum(counts - expected), with_sum(variance)
        varies = variance > 1e-12
        errors = np.where(varies, gap / np.sqrt(np.where(varies, variance, 1.0)), 0.0)
        may = expected > 0
        x2 = np.where(may, (counts - expected) ** 2 / np.where(may, expected, 1.0), 0.0)
        return errors, with_sum(np.add.reduceat(x2, start, axis=-1))

    def _replicate(
        self, rows: Floats, prevalence: Floats, rng: np.random.Generator
    ) -> tuple[Floats, Floats, Floats, Floats, Floats]:
        from bayeslca.assess.fit.replicate_kernel import replicate

        strata, fields, start = self.strata, self.strata.fields, self.table.item_start
        n_draws, n_groups = len(rows), strata.n_groups
        pair_start = np.zeros((self.table.n_items, self.table.n_items), dtype=np.int64)
        if self.pairs is not None:
            pair_start[tuple(np.array(self.pairs.pairs).T)] = self.pairs.start[:-1]
        n_cells = self.pairs.n_cells if self.pairs is not None else 0
        patterns = np.zeros((n_draws, n_groups, 4))
        counts = np.zeros((n_draws, n_groups, int(start[-1])), dtype=np.int32)
        pairs = np.zeros((n_draws, n_groups, n_cells), dtype=np.int32)
        scores = np.zeros((n_draws, n_groups, highest_score(self.score, start) + 1), dtype=np.int32)
        expected = np.zeros(scores.shape)
        replicate(
            strata.size, strata.group, strata.prevalence_row, strata.field_start, strata.field,
            fields.start, fields.row, fields.item, fields.size, start,
            pair_start, self._points,
            rng.integers(1 << 63, size=fields.row.size, dtype=np.uint64) * np.uint64(2),
            POWER, np.ascontiguousarray(rows), np.ascontiguousarray(prevalence), rng,
            patterns, counts, pairs, scores, expected,
        )  # fmt: skip
        return (
            with_sum(patterns),
            counts.astype(np.float64),
            pairs.astype(np.float64),
            scores.astype(np.float64),
            expected,
        )


def divergences(observed: Floats, size: Floats, log_probability: Floats) -> Floats:
    """Return what each observed cell adds to G2, X2 and power divergence.

    Cells without a case add nothing to the sums, which is why none is enumerated: X2, the sum of
    (O - E)^2 / E over all cells, is the sum of O^2 / E over observed ones less the cases, and so
    for every power, as O and E have the same total.

    Parameters
    ----------
    observed : ndarray, shape (U,)
        Cases of each observed cell.
    size : ndarray, shape (U,)
        Cases of the table that each cell belongs to.
    log_probability : ndarray, shape (..., U)
        Log of each cell's probability in its table.

    Returns
    -------
    ndarray, shape (..., U, 3)
    """
    log_ratio = np.log(observed) - np.log(size) - log_probability
    scale = 2.0 / (POWER * (POWER + 1.0))
    return np.stack(
        [
            2.0 * observed * log_ratio,
            observed * np.expm1(log_ratio),
            scale * observed * np.expm1(POWER * log_ratio),
        ],
        axis=-1,
    )


def highest_score(score: Ints, item_start: Ints) -> int:
    """Return the highest sum score that can be reached."""
    return int(np.maximum.reduceat(score, item_start[:-1]).sum())
