"""Draws of bounded blocks: inside the bounds, the sum kept, nothing else touched."""

from __future__ import annotations

import numba
import numpy as np
import pytest

from bayeslca import Item, LatentClassModel
from bayeslca.model.blocks import inside_blocks
from bayeslca.model.truncated_prior import draw_inside
from bayeslca.sampling.bounded_blocks import draw_bounded, keeps_bounds
from bayeslca.sampling.bounds_layout import bounded
from bayeslca.sampling.chain import make_task

SEED = 20261211
ITEMS = (Item("fees", ("no", "yes"), yes="yes"), Item("type", ("a", "b", "c", "d")))
STATEMENTS = (
    "P(fees | m) > P(fees | l) > 0.1",
    "P(type=a | m) > P(type=b | m)",
    "P(type=a | l) < P(type=a | m)",
    "P(type=d | l) > 0.2",
)


@numba.njit
def many(bounds, parameter, elements, n, rng):
    inside = 0
    for _ in range(n):
        draw_bounded(
            bounds.block,
            bounds.member,
            bounds.lower,
            bounds.upper,
            bounds.over_start,
            bounds.over,
            bounds.under_start,
            bounds.under,
            parameter,
            elements,
            rng,
        )
        inside += keeps_bounds(bounds, elements)
    return inside


@pytest.fixture(scope="module")
def model():
    return LatentClassModel((*ITEMS, Item("free", ("no", "yes"))), ("m", "l"), STATEMENTS)


def test_every_draw_is_inside_and_unbounded_blocks_are_left_alone(model):
    table, rng = model.table, np.random.default_rng(SEED)
    bounds = bounded(table)
    elements = draw_inside(table, 1, rng)[0]
    before = elements.copy()
    parameter = table.element_prior + rng.integers(30, size=table.n_elements)
    assert many(bounds, parameter, elements, 2_000, rng) >= 1_990  # rounding at an edge, if ever
    assert inside_blocks(table, elements)
    sums = np.add.reduceat(elements, table.block_start[:-1])
    np.testing.assert_allclose(sums, 1.0, rtol=1e-14)
    free = np.isin(table.element_block, bounds.free_block)
    assert free.sum() == 4
    np.testing.assert_array_equal(elements[free], before[free])


def test_a_sum_that_has_drifted_is_restored(model):
    table, rng = model.table, np.random.default_rng(SEED)
    elements = draw_inside(table, 1, rng)[0] * (1 + 1e-7)
    many(bounded(table), table.element_prior, elements, 1, rng)
    sums = np.add.reduceat(elements, table.block_start[:-1])
    bounded_blocks = np.setdiff1d(np.arange(table.n_blocks), bounded(table).free_block)
    np.testing.assert_allclose(sums[bounded_blocks], 1.0, rtol=1e-14)


def test_orders_are_refused_by_the_label_move_unless_they_stay(model):
    """No permutation of these classes keeps the orders: the classes are told apart."""
    assert model.symmetry.table_group.n_members == 2
    assert model.symmetry.prior_group.n_members == 1
    task = make_task(
        model.table,
        _units(model),
        model.prevalence_source,
        model.symmetry,
    )
    assert task.is_bounded
    assert len(task.permutations)


def _units(model):
    from bayeslca.model.compile import compile_units

    return compile_units(model.table, model.units(model.simulate(20, seed=SEED).responses))
