"""Exact posteriors of tiny tables, by summing over everything that was not observed.

No source but arithmetic: every case's class (and, where a row is a sum of cells, its cell) is
enumerated; given those, blocks and prevalences are independent Dirichlets with known moments.
"""

from __future__ import annotations

import zlib
from collections import defaultdict
from dataclasses import dataclass, replace

import numpy as np
import pytest
from scipy.special import gammaln, logsumexp

from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.symmetry import symmetry
from bayeslca.model.table import Table, UnitTable
from bayeslca.model.table_builder import TableBuilder
from bayeslca.sampling.run import sample_table

SEED = 20261201
MISSING = -1


@dataclass(frozen=True)
class Exact:
    """Posterior states: Dirichlet parameters of blocks and prevalences, with log weights."""

    log_weight: np.ndarray  # (S,), log of prior x likelihood of the state
    elements: np.ndarray  # (S, E) posterior Dirichlet parameters
    prevalence: np.ndarray  # (S, groups, K)

    @property
    def log_evidence(self) -> float:
        return float(logsumexp(self.log_weight))

    def mean(self, values: np.ndarray) -> np.ndarray:
        return np.tensordot(np.exp(self.log_weight - self.log_evidence), values, axes=1)


def options(table: Table, units: UnitTable, u: int) -> dict[tuple, float]:
    """All ways in which a case of a unit can come about: (class, elements used) -> constant."""
    out: dict[tuple, float] = defaultdict(float)
    for k in range(table.n_classes):
        weight = np.exp(units.log_weight[u, k]) if units.log_weight.size else 1.0
        ways = [(weight, ())] if weight > 0 else []
        for r in units.row[units.row_start[u] : units.row_start[u + 1]]:
            ways = [
                (constant * c, (*used, *elements))
                for constant, used in ways
                for c, elements in table.cells(int(r), k)
            ]
        for constant, used in ways:
            out[k, tuple(sorted(used))] += constant
    return out


def enumerate_posterior(table: Table, units: UnitTable, concentration: np.ndarray) -> Exact:
    n_elements, (groups, n_classes) = table.n_elements, concentration.shape
    states = {(0,) * (n_elements + groups * n_classes): 1.0}
    for u, count in enumerate(units.count):
        ways = []
        for (k, used), constant in options(table, units, u).items():
            step = np.zeros(n_elements + groups * n_classes, dtype=int)
            np.add.at(step, list(used), 1)
            step[n_elements + units.prevalence_row[u] * n_classes + k] += 1
            ways.append((step, constant))
        for _ in range(count):
            following: dict[tuple, float] = defaultdict(float)
            for state, weight in states.items():
                for step, constant in ways:
                    following[tuple(np.add(state, step).tolist())] += weight * constant
            states = following
    counts = np.array(list(states))
    log_weight = np.log(list(states.values()))
    elements = table.element_prior + counts[:, :n_elements]
    prevalence = concentration + counts[:, n_elements:].reshape(-1, groups, n_classes)
    for first, last in zip(table.block_start[:-1], table.block_start[1:], strict=True):
        log_weight += _log_beta(elements[:, first:last])
        log_weight -= _log_beta(table.element_prior[first:last])
    log_weight += np.sum(_log_beta(prevalence) - _log_beta(concentration), axis=-1)
    return Exact(log_weight, elements, prevalence)


def _log_beta(a: np.ndarray) -> np.ndarray:
    return gammaln(a).sum(axis=-1) - gammaln(a.sum(axis=-1))


def exact_moments(
    table: Table, units: UnitTable, concentration: np.ndarray, *, labelled: bool
) -> dict[str, float]:
    """Posterior means of quantities and of their squares."""
    exact = enumerate_posterior(table, units, concentration)
    out: dict[str, float] = {}
    totals = exact.prevalence.sum(axis=-1)
    square = np.sum(exact.prevalence * (exact.prevalence + 1), axis=-1) / (totals * (totals + 1))
    for g, value in enumerate(exact.mean(square)):
        out[f"sum of squared prevalences {g}"] = float(value)
    for u in range(units.count.size):
        for power in (1, 2):
            more = replace(units, count=units.count + power * (np.arange(units.count.size) == u))
            ratio = enumerate_posterior(table, more, concentration).log_evidence
            out[f"unit {u} ^{power}"] = float(np.exp(ratio - exact.log_evidence))
    if labelled:
        first = exact.prevalence / totals[..., None]
        second = first * (exact.prevalence + 1) / (totals[..., None] + 1)
        for (g, k), value in np.ndenumerate(exact.mean(first)):
            out[f"prevalence {g} {k}"] = float(value)
            out[f"prevalence {g} {k} ^2"] = float(exact.mean(second)[g, k])
        block_sum = np.add.reduceat(exact.elements, table.block_start[:-1], axis=-1)
        total = np.repeat(block_sum, np.diff(table.block_start), axis=-1)
        mean = exact.elements / total
        for e, value in enumerate(exact.mean(mean)):
            out[f"element {e}"] = float(value)
        second = mean * (exact.elements + 1) / (total + 1)
        for e, value in enumerate(exact.mean(second)):
            out[f"element {e} ^2"] = float(value)
    return out


def drawn_quantities(table, units, draws, *, labelled: bool) -> dict[str, np.ndarray]:
    out = {}
    for g in range(draws.prevalence.shape[2]):
        out[f"sum of squared prevalences {g}"] = np.sum(draws.prevalence[:, :, g] ** 2, axis=-1)
    units_probability = np.exp(log_unit_likelihood(table, units, draws.elements, draws.prevalence))
    for u in range(units.count.size):
        out[f"unit {u} ^1"] = units_probability[..., u]
        out[f"unit {u} ^2"] = units_probability[..., u] ** 2
    if labelled:
        for g, k in np.ndindex(draws.prevalence.shape[2:]):
            out[f"prevalence {g} {k}"] = draws.prevalence[:, :, g, k]
            out[f"prevalence {g} {k} ^2"] = draws.prevalence[:, :, g, k] ** 2
        for e in range(table.n_elements):
            out[f"element {e}"] = draws.elements[:, :, e]
            out[f"element {e} ^2"] = draws.elements[:, :, e] ** 2
    return out


def unit_table(
    table: Table, cases: list[tuple[int, tuple[int, ...], int, int | None]]
) -> UnitTable:
    """Units from (group, answers, count, verified class or None)."""
    rows, log_weight = [], []
    for g, answers, _, verified in cases:
        group = table.response_group[g]
        rows.append(
            [
                table.response_row[group, table.item_start[j] + a]
                for j, a in enumerate(answers)
                if a != MISSING
            ]
        )
        weight = np.full(table.n_classes, -np.inf)
        weight[slice(None) if verified is None else verified] = 0.0
        log_weight.append(weight)
    any_verified = any(case[3] is not None for case in cases)
    return UnitTable(
        row_start=np.concatenate([[0], np.cumsum([len(r) for r in rows])]),
        row=np.array([r for unit in rows for r in unit], dtype=np.int64),
        count=np.array([case[2] for case in cases]),
        prevalence_row=np.array([case[0] for case in cases]),
        log_weight=np.array(log_weight) if any_verified else np.zeros((0, table.n_classes)),
    )


def free_table(categories, n_classes, prior, groups=1) -> Table:
    builder = TableBuilder(categories, n_classes, (0,) * groups)
    for j, n in enumerate(categories):
        for k in range(n_classes):
            builder.set_item(0, j, k, builder.block(prior(j, k, n)))
    return builder.build()


def flat(j, k, n):
    return np.ones(n)


def uneven(j, k, n):
    return 0.6 + np.arange(n) * 0.7 + 1.1 * k + 0.3 * j


def two_classes_flat():
    table = free_table([2, 2, 2], 2, flat)
    cases = [(0, (0, 0, 0), 2, None), (0, (0, 1, 0), 1, None), (0, (1, 1, 0), 2, None)]
    return table, unit_table(table, [*cases, (0, (1, 1, 1), 3, None)]), np.ones((1, 2)), False


def three_classes_uneven():
    table = free_table([2, 3], 3, uneven)
    cases = [(0, (0, 0), 2, None), (0, (1, 2), 3, None), (0, (1, MISSING), 1, None)]
    return table, unit_table(table, cases), np.array([[1.0, 2.5, 0.4]]), True


def two_prevalence_rows_and_a_verified_case():
    table = free_table([2, 2, 3], 2, uneven, groups=2)
    cases = [
        (0, (0, 0, 2), 2, None),
        (0, (1, 1, MISSING), 1, 1),
        (1, (1, 0, 1), 3, None),
        (1, (0, MISSING, 0), 1, 0),
        (1, (1, 1, 1), 1, None),
    ]
    return table, unit_table(table, cases), np.array([[1.0, 2.0], [0.5, 1.5]]), True


def pair_half_missing_in_one_class():
    builder = TableBuilder([2, 2, 2], 2, (0,))
    pair = builder.answered_together(0, 1)
    builder.set_joint(0, pair, 0, builder.block([1.0, 0.8, 1.3, 2.0]))
    for j in range(2):
        builder.set_item(0, j, 1, builder.block([1.0 + j, 1.4]))
    for k in range(2):
        builder.set_item(0, 2, k, builder.block([1.0, 2.0 - k]))
    table = builder.build()
    units = unit_table(table, [(0, (1, MISSING, 0), 3, None), (0, (MISSING, 0, 1), 2, None)])
    joint = [table.joint_row[0, 3], table.response_row[0, 5]]  # both yes, third yes
    units = replace(
        units,
        row_start=np.append(units.row_start, units.row_start[-1] + 2),
        row=np.append(units.row, joint),
        count=np.append(units.count, 3),
        prevalence_row=np.append(units.prevalence_row, 0),
    )
    return table, units, np.array([[1.0, 1.5]]), True


def tied_categories_of_different_items_and_a_known_value():
    """P(x=a | 0) = P(y=yes | 0) where x has three categories and y two; one answer is known."""
    builder = TableBuilder([3, 2, 2], 2, (0,))
    split = builder.block([1.2, 0.9])
    builder.set_split(0, 0, 0, 0, split, builder.block([1.0, 2.0]))
    builder.set_item(0, 1, 0, split)
    builder.set_known(0, 0, 1, {1: 0.3}, builder.block([0.7, 1.6]))
    builder.set_item(0, 1, 1, builder.block([1.0, 3.0]))
    builder.set_known(0, 2, 0, {0: 1.0})
    builder.set_item(0, 2, 1, split[::-1])
    table = builder.build()
    cases = [
        (0, (0, 0, 0), 2, None),
        (0, (1, 1, 0), 2, None),
        (0, (2, MISSING, 0), 2, None),
        (0, (1, 1, 1), 2, None),
    ]
    return table, unit_table(table, cases), np.array([[1.0, 1.0]]), True


CASES = [
    two_classes_flat,
    three_classes_uneven,
    two_prevalence_rows_and_a_verified_case,
    pair_half_missing_in_one_class,
    tied_categories_of_different_items_and_a_known_value,
]


def z_scores(table, units, concentration, exact_table, *, labelled: bool, seed: int) -> dict:
    from arviz_stats.base import array_stats

    source = DirichletPrevalence(concentration)
    draws = sample_table(
        table,
        units,
        source,
        symmetry(table, source, units),
        seed=seed,
        draws=4000,
        ess=4000,
        progress=False,
    )
    assert not draws.limit_reached
    exact = exact_moments(exact_table, units, concentration, labelled=labelled)
    scores = {}
    for name, values in drawn_quantities(table, units, draws, labelled=labelled).items():
        if np.ptp(values) == 0.0:
            assert values.flat[0] == pytest.approx(exact[name])
            continue
        assert array_stats.ess(values, method="mean") > 400
        scores[name] = (values.mean() - exact[name]) / array_stats.mcse(values, method="mean")
    return scores


@pytest.mark.parametrize("case", CASES)
def test_moments_equal_the_exact_enumeration(case):
    table, units, concentration, labelled = case()
    seed = SEED + zlib.crc32(case.__name__.encode()) % 1000
    scores = z_scores(table, units, concentration, table, labelled=labelled, seed=seed)
    assert max(abs(z) for z in scores.values()) < 4.0, scores


def test_the_check_fails_when_the_prior_count_is_off():
    table, units, concentration, labelled = three_classes_uneven()
    wrong = replace(table, element_prior=table.element_prior + 0.3)
    scores = z_scores(wrong, units, concentration, table, labelled=labelled, seed=SEED)
    assert max(abs(z) for z in scores.values()) > 8.0


def test_enumeration_reaches_the_evidence_computed_elsewhere():
    """Log evidence of tiny_8 with 1..3 classes, tests/references/references.toml, 'tiny_exact'."""
    published = {1: -17.97458162, 2: -16.92320523, 3: -16.68692803}
    for n_classes, expected in published.items():
        table = free_table([2, 2, 2], n_classes, flat)
        units = two_classes_flat()[1]
        units = replace(units, log_weight=np.zeros((0, n_classes)))
        found = enumerate_posterior(table, units, np.ones((1, n_classes))).log_evidence
        assert found == pytest.approx(expected, abs=1e-7)
