"""The sweep against a few lines of NumPy, and its corners."""

from __future__ import annotations

import numpy as np
import pytest

from bayeslca.model.probabilities import log_unit_likelihood, membership
from bayeslca.model.table import Table, UnitTable
from bayeslca.model.table_builder import TableBuilder
from bayeslca.sampling.gibbs import allocate, draw_blocks, draw_prevalence, sweep
from bayeslca.sampling.layout import arrange, workspace

SEED = 20261205


def free_table(categories, n_classes: int, groups: int = 1) -> Table:
    builder = TableBuilder(categories, n_classes, (0,) * groups)
    for j, n in enumerate(categories):
        for k in range(n_classes):
            builder.set_item(0, j, k, builder.block(np.full(n, 1.0 + 0.1 * k)))
    return builder.build()


def random_units(table: Table, rng, n_units: int, groups: int, *, weighted: bool) -> UnitTable:
    rows = []
    for _ in range(n_units):
        observed = rng.random(table.n_items) < 0.8
        sizes = np.diff(table.item_start)
        answers = table.item_start[:-1] + rng.integers(sizes)
        rows.append(table.response_row[0, answers[observed]])
    log_weight = np.zeros((0, table.n_classes))
    if weighted:
        log_weight = rng.normal(size=(n_units, table.n_classes)) * 3.0 - 900.0
        log_weight[0, 1:] = -np.inf
    return UnitTable(
        row_start=np.concatenate([[0], np.cumsum([len(r) for r in rows])]),
        row=np.concatenate(rows),
        count=rng.integers(1, 40, size=n_units),
        prevalence_row=rng.integers(groups, size=n_units),
        log_weight=log_weight,
    )


def start(table: Table, rng, groups: int):
    elements = rng.gamma(1.0, size=table.n_elements)
    sums = np.add.reduceat(elements, table.block_start[:-1])
    elements /= np.repeat(sums, np.diff(table.block_start))
    return elements, rng.dirichlet(np.ones(table.n_classes), size=groups)


@pytest.mark.parametrize("keep_units", [False, True])
@pytest.mark.parametrize("weighted", [False, True])
@pytest.mark.parametrize(("n_classes", "groups"), [(1, 1), (3, 1), (4, 2)])
def test_log_likelihood_and_counts_agree_with_numpy(n_classes, groups, weighted, keep_units):
    rng = np.random.default_rng(SEED)
    table = free_table([2, 3, 2, 4, 2, 2, 3], n_classes, groups)
    units = random_units(table, rng, 60, groups, weighted=weighted)
    elements, prevalence = start(table, rng, groups)
    layout = arrange(table, units, groups)
    work = workspace(layout, keep_units=keep_units)
    found = allocate(layout, work, elements, prevalence, rng)
    each = log_unit_likelihood(table, units, elements, prevalence)
    assert found == pytest.approx(units.count @ each, rel=1e-12)
    in_group = np.bincount(units.prevalence_row, units.count, minlength=groups)
    assert work.class_count.sum(axis=1) == pytest.approx(in_group)
    # every observed answer is counted once, in the class of its case
    row_total = np.bincount(
        units.row, np.repeat(units.count, np.diff(units.row_start)), minlength=table.n_rows
    )
    counted = work.element_parameter - table.element_prior
    assert counted.min() >= 0.0
    per_row = counted[table.direct_element].sum(axis=1)
    assert per_row == pytest.approx(row_total)
    if keep_units:
        assert work.unit_log_probability == pytest.approx(each[layout.unit], rel=1e-12)
        assert np.array_equal(work.unit_count.sum(axis=1), units.count[layout.unit])
        for g in range(groups):
            in_row = layout.prevalence_row == g
            assert np.array_equal(work.unit_count[in_row].sum(axis=0), work.class_count[g])
        for k in range(n_classes):
            rows = np.repeat(np.arange(units.count.size), np.diff(units.row_start))
            by_unit = np.empty(units.count.size)
            by_unit[layout.unit] = work.unit_count[:, k]
            expected = np.bincount(units.row, by_unit[rows], minlength=table.n_rows)
            assert counted[table.direct_element[:, k]] == pytest.approx(expected)


def test_cases_are_split_by_their_membership():
    rng = np.random.default_rng(SEED)
    table = free_table([2, 2, 3], 3)
    units = random_units(table, rng, 12, 1, weighted=True)
    elements, prevalence = start(table, rng, 1)
    layout = arrange(table, units, 1)
    work = workspace(layout, keep_units=True)
    n, total = 4000, np.zeros((12, 3))
    for _ in range(n):
        allocate(layout, work, elements, prevalence, rng)
        total += work.unit_count
    share = membership(table, units, elements, prevalence)[layout.unit]
    cases = layout.cases[:, None]
    se = np.sqrt(share * (1 - share) / (n * cases)) + 1e-12
    z = (total / (n * cases) - share) / se
    assert np.abs(z).max() < 5.0


def test_products_that_underflow_are_done_again_in_logs():
    """200 sharp items: each case has a probability around 1e-500."""
    rng = np.random.default_rng(SEED)
    table = free_table([2] * 200, 2)
    rows = table.response_row[0, table.item_start[:-1]]
    units = UnitTable(
        row_start=np.array([0, 200, 399]),
        row=np.concatenate([rows, rows[:199]]),
        count=np.array([3, 30]),
        prevalence_row=np.zeros(2, dtype=np.int64),
        log_weight=np.zeros((0, 2)),
    )
    elements = np.tile([10.0**-2.5, 1 - 10.0**-2.5], table.n_blocks)
    elements[table.direct_element[rows[0], 1]] *= 0.25
    prevalence = np.array([[0.5, 0.5]])
    layout, expected = arrange(table, units, 1), 0.0
    expected = units.count @ log_unit_likelihood(table, units, elements, prevalence)
    work = workspace(layout)
    taken = 0
    for _ in range(2000):
        assert allocate(layout, work, elements, prevalence, rng) == pytest.approx(expected)
        taken += work.class_count[0, 0]
    # class 1 is four times less likely for both units
    assert taken / (2000 * 33) == pytest.approx(0.8, abs=5 * 0.4 / np.sqrt(2000 * 33))


def test_answers_without_any_class_give_nan_and_draw_nothing():
    builder = TableBuilder([2, 2], 2, (0,))
    for k in range(2):
        builder.set_known(0, k, k, {1: 0.0})
        builder.set_item(0, 1 - k, k, builder.block([1.0, 1.0]))
    table = builder.build()
    units = UnitTable(
        row_start=np.array([0, 2]),
        row=np.array([1, 3]),
        count=np.array([1]),
        prevalence_row=np.array([0]),
        log_weight=np.zeros((0, 2)),
    )
    elements, prevalence = np.full(4, 0.5), np.array([[0.5, 0.5]])
    layout = arrange(table, units, 1)
    found = sweep(
        layout, workspace(layout), np.ones((1, 2)), elements, prevalence, np.random.default_rng(1)
    )
    assert np.isnan(found)
    assert np.all(elements == 0.5)


def test_known_values_and_shared_blocks_are_counted_where_they_should():
    builder = TableBuilder([2, 2], 2, (0,))
    shared = builder.block([1.0, 1.0])
    builder.set_item(0, 0, 0, shared)
    builder.set_item(0, 1, 1, shared[::-1])
    builder.set_known(0, 1, 0, {0: 0.25})
    builder.set_known(0, 0, 1, {0: 0.5})
    table = builder.build()
    units = UnitTable(
        row_start=np.array([0, 2, 4]),
        row=np.array([0, 2, 0, 2]),
        count=np.array([10, 7]),
        prevalence_row=np.array([0, 0]),
        log_weight=np.array([[0.0, -np.inf], [-np.inf, 0.0]]),
    )
    layout = arrange(table, units, 1)
    work = workspace(layout)
    elements, prevalence = np.array([0.4, 0.6]), np.array([[0.3, 0.7]])
    found = allocate(layout, work, elements, prevalence, np.random.default_rng(1))
    assert work.class_count.tolist() == [[10, 7]]
    # first unit: item 0 "first answer" in class 0; second: item 1 "first answer" in class 1,
    # which is the shared block's second element
    assert work.element_parameter.tolist() == [1.0 + 10, 1.0 + 7]
    assert found == pytest.approx(10 * np.log(0.3 * 0.4 * 0.25) + 7 * np.log(0.7 * 0.5 * 0.6))


def test_blocks_and_prevalences_are_drawn_from_their_conditionals():
    """Ten lines of NumPy for the conditional means, given the counts that were left."""
    rng = np.random.default_rng(SEED)
    table = free_table([2, 3], 2, groups=2)
    units = random_units(table, rng, 15, 2, weighted=False)
    elements, prevalence = start(table, rng, 2)
    concentration = np.array([[1.0, 2.0], [0.5, 3.0]])
    layout = arrange(table, units, 2)
    work = workspace(layout)
    allocate(layout, work, elements, prevalence, rng)
    n = 20_000
    sums = np.zeros(elements.size + prevalence.size)
    for _ in range(n):
        draw_blocks(layout, work, elements, rng)
        draw_prevalence(layout, work, concentration, prevalence, rng)
        sums += np.concatenate([elements, prevalence.ravel()])
    a = work.element_parameter
    block = np.repeat(np.add.reduceat(a, table.block_start[:-1]), np.diff(table.block_start))
    b = concentration + work.class_count
    parameter = np.concatenate([a, b.ravel()])
    total = np.concatenate([block, np.repeat(b.sum(axis=1), 2)])
    mean = parameter / total
    se = np.sqrt(mean * (1 - mean) / (total + 1) / n)
    assert np.abs((sums / n - mean) / se).max() < 5.0


def test_chunks_do_not_change_what_a_layout_means():
    rng = np.random.default_rng(SEED)
    table = free_table([2, 3, 2, 4, 2, 2, 3], 3)
    units = random_units(table, rng, 60, 1, weighted=False)
    layout = arrange(table, units, 1)
    assert layout.unit_part.shape[1] > 1
    for at, u in enumerate(layout.unit):
        parts = layout.unit_part[at]
        rows = np.concatenate(
            [layout.part_row[layout.part_start[s] : layout.part_start[s + 1]] for s in parts]
        )
        original = units.row[units.row_start[u] : units.row_start[u + 1]]
        assert np.array_equal(np.sort(rows), np.sort(original))
        assert layout.cases[at] == units.count[u]
