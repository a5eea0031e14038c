"""The joint distribution test of Geweke (2004, JASA 99, 799-804) for one Gibbs sweep.

Parameters are drawn by sweeps, data by the model, in turn. If both are right, the parameters'
marginal distribution is the prior, whose moments are known exactly. Mean and square of every
element and prevalence are compared; mutated kernels must fail.
"""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from scipy.stats import norm

from bayeslca.model.probabilities import draw_elements, row_probability
from bayeslca.model.table import Table, UnitTable
from bayeslca.model.table_builder import TableBuilder
from bayeslca.sampling.layout import Layout, arrange, workspace

SEED = 20261202
ROUNDS = 24_000
CONCENTRATION = np.array([[1.0, 2.0, 0.7], [2.0, 1.0, 1.0]])

GROUPS = np.repeat([0, 1], 7)
OBSERVED = np.array(
    [
        [1, 1, 1, 1],
        [1, 1, 1, 1],
        [1, 0, 1, 1],
        [1, 1, 1, 0],
        [1, 1, 0, 1],
        [0, 1, 0, 0],
        [1, 1, 1, 1],
    ]
    * 2,
    dtype=bool,
)
VERIFIED = np.tile([False, False, False, True, False, False, False], 2)


def rich_table() -> Table:
    """Three classes; items of 2, 3, 2, 2 categories; two groups that differ in one block.

    Blocks shared over classes and items (one with its categories exchanged), a known value, a
    pair that depends within one class, a category tied across items of 3 and 2 categories.
    """
    builder = TableBuilder([2, 3, 2, 2], 3, (0, 1))
    pair = builder.answered_together(2, 3)
    a, b = builder.block([2.0, 1.0]), builder.block([1.0, 2.0, 0.5])
    c, d = builder.block([0.8, 1.5]), builder.block([1.5, 0.6])
    e, f = builder.block([1.0, 2.0]), builder.block([1.0, 1.2])
    g, own = builder.block([3.0, 1.0]), builder.block([0.05, 1.0])
    joint = builder.block([1.0, 0.7, 1.2, 2.0])
    for group in range(2):
        builder.set_item(group, 0, 0, own if group else a)
        builder.set_item(group, 1, 0, b)
        builder.set_joint(group, pair, 0, joint)
        builder.set_item(group, 0, 1, c)
        builder.set_known(group, 1, 1, {2: 0.2}, d)
        builder.set_item(group, 2, 1, c)
        builder.set_item(group, 3, 1, a[::-1])
        builder.set_item(group, 0, 2, e)
        builder.set_split(group, 1, 2, 1, e, f)
        builder.set_item(group, 2, 2, g)
        builder.set_item(group, 3, 2, g)
    return builder.build()


class Experiment:
    """All units that the design can give rise to, with counts that change from round to round."""

    def __init__(self, table: Table) -> None:
        self.table = table
        self.rows: list[tuple[int, ...]] = []
        self.number: dict[tuple, int] = {}
        keys = []
        designs = sorted(
            {
                (int(g), tuple(o), bool(v))
                for g, o, v in zip(GROUPS, OBSERVED, VERIFIED, strict=True)
            }
        )
        for g, observed, verified in designs:
            answers = product(
                *(range(n) if o else [-1] for n, o in zip((2, 3, 2, 2), observed, strict=True))
            )
            for pattern in answers:
                for k in range(3) if verified else [-1]:
                    self.number[g, pattern, k] = len(keys)
                    keys.append((g, pattern, k))
        rows = [self._rows(g, pattern) for g, pattern, _ in keys]
        log_weight = np.array(
            [[0.0 if known in (-1, k) else -np.inf for k in range(3)] for _, _, known in keys]
        )
        self.units = UnitTable(
            row_start=np.concatenate([[0], np.cumsum([len(r) for r in rows])]),
            row=np.array([r for unit in rows for r in unit]),
            count=np.ones(len(keys), dtype=np.int64),
            prevalence_row=np.array([g for g, _, _ in keys]),
            log_weight=log_weight,
        )

    def _rows(self, g: int, pattern: tuple[int, ...]) -> list[int]:
        table = self.table
        group = table.response_group[g]
        single = [table.response_row[group, table.item_start[j] + a] for j, a in enumerate(pattern)]
        rows = [int(r) for r, a in zip(single[:2], pattern, strict=False) if a >= 0]
        if pattern[2] >= 0 and pattern[3] >= 0:
            return [*rows, int(table.joint_row[group, 2 * pattern[2] + pattern[3]])]
        return rows + [int(single[j]) for j in (2, 3) if pattern[j] >= 0]

    def simulate(self, elements, prevalence, rng: np.random.Generator) -> np.ndarray:
        """Draw every case anew; return the count of each unit. Plain NumPy, not the kernel's."""
        table = self.table
        probability = row_probability(table, elements)
        counts = np.zeros(len(self.number), dtype=np.int64)
        uniform = rng.random((GROUPS.size, 4))
        for i, g in enumerate(GROUPS.tolist()):
            k = int(np.searchsorted(np.cumsum(prevalence[g]), uniform[i, 0] * 0.9999999999))
            group = table.response_group[g]
            chosen = [-1, -1, -1, -1]
            for j in range(2):
                columns = table.response_row[group, table.item_start[j] : table.item_start[j + 1]]
                chosen[j] = _choose(probability[columns, k], uniform[i, 1 + j])
            joint = _choose(probability[table.joint_row[group], k], uniform[i, 3])
            chosen[2], chosen[3] = divmod(joint, 2)
            pattern = tuple(a if o else -1 for a, o in zip(chosen, OBSERVED[i], strict=True))
            counts[self.number[g, pattern, k if VERIFIED[i] else -1]] += 1
        return counts


def _choose(shares: np.ndarray, uniform: float) -> int:
    total = 0.0
    for at, share in enumerate(shares.tolist()):
        total += share
        if uniform < total:
            return at
    return len(shares) - 1


def z_scores(layout: Layout, experiment: Experiment, seed: int, rounds: int) -> np.ndarray:
    """Give z of the mean and of the mean square of every element and prevalence."""
    from arviz_stats.base import array_stats

    from bayeslca.sampling.gibbs import sweep

    table = experiment.table
    kernel_rng, data_rng = (
        np.random.default_rng(child) for child in np.random.SeedSequence(seed).spawn(2)
    )
    elements = draw_elements(table, data_rng)
    prevalence = np.stack([data_rng.dirichlet(a) for a in CONCENTRATION])
    work = workspace(layout)
    kept = np.empty((rounds, elements.size + prevalence.size))
    for i in range(rounds):
        counts = experiment.simulate(elements, prevalence, data_rng)
        layout.cases[:] = counts[layout.unit]
        for _ in range(3):  # any number of sweeps keeps the joint distribution
            sweep(layout, work, CONCENTRATION, elements, prevalence, kernel_rng)
        kept[i] = np.concatenate([elements, prevalence.ravel()])
    first, second = prior_moments(table)
    z = []
    for values, expected in ((kept, first), (kept**2, second)):
        for x, mean in zip(values.T, expected, strict=True):
            chains = x[: rounds // 4 * 4].reshape(4, -1)
            assert array_stats.ess(chains, method="mean") > 400
            z.append((chains.mean() - mean) / array_stats.mcse(chains, method="mean"))
    return np.array(z)


def prior_moments(table: Table) -> tuple[np.ndarray, np.ndarray]:
    """Exact first and second moments of the Dirichlets, elements and then prevalences."""
    vectors = np.split(table.element_prior, table.block_start[1:-1])
    vectors += list(CONCENTRATION)
    first = [a / a.sum() for a in vectors]
    second = [a * (a + 1) / (a.sum() * (a.sum() + 1)) for a in vectors]
    return np.concatenate(first), np.concatenate(second)


def test_the_sweep_keeps_the_joint_distribution():
    experiment = Experiment(rich_table())
    layout = arrange(experiment.table, experiment.units, 2)
    z = z_scores(layout, experiment, SEED, ROUNDS)
    assert np.abs(z).max() < norm.isf(1e-4 / z.size / 2), np.round(z, 1)


def drop_prior_count(layout: Layout) -> Layout:
    prior = layout.element_prior.copy()
    prior[layout.block_start[1] : layout.block_start[2]] -= 0.25
    return layout._replace(element_prior=prior)


def wrong_category(layout: Layout) -> Layout:
    rows = layout.part_row.copy()
    rows[layout.part_row == 2] = 3  # items' second and third category of item 1
    return layout._replace(part_row=rows)


def verified_as_another_class(layout: Layout) -> Layout:
    # Merely ignoring the verified class would be valid: a smaller data set, and no mutation.
    return layout._replace(weight=np.roll(layout.weight, 1, axis=1))


def wrong_prevalence_row(layout: Layout) -> Layout:
    return layout._replace(prevalence_row=np.zeros_like(layout.prevalence_row))


def forget_a_cell(layout: Layout) -> Layout:
    """Let a sum of two cells lose its last."""
    constant = layout.cell_constant.copy()
    n_cells = np.diff(layout.cell_start)
    constant[layout.cell_start[1:][n_cells == 2] - 1] = 0.0
    return layout._replace(cell_constant=constant)


@pytest.mark.parametrize(
    "mutate",
    [
        drop_prior_count,
        wrong_category,
        verified_as_another_class,
        wrong_prevalence_row,
        forget_a_cell,
    ],
)
def test_a_mutated_sweep_fails(mutate):
    experiment = Experiment(rich_table())
    layout = mutate(arrange(experiment.table, experiment.units, 2))
    z = z_scores(layout, experiment, SEED, ROUNDS // 6)
    assert np.abs(z).max() > 6.0
