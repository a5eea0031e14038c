"""Identifiability: known answers, and derivatives against finite differences."""

from itertools import product

import numpy as np
import pytest

from bayeslca.model import pattern_derivatives
from bayeslca.model.identifiability import count_free, identifiability
from bayeslca.model.pattern_derivatives import free_directions, scaled_derivatives
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.simulate import Parameters, draw_parameters
from bayeslca.model.table_builder import TableBuilder
from bayeslca.responses.units import Units


def plain(sizes, n_classes, response_group=(0,)):
    builder = TableBuilder(sizes, n_classes, response_group)
    for g, j, k in product(range(builder.n_response_groups), range(len(sizes)), range(n_classes)):
        builder.set_item(g, j, k, builder.block(np.ones(sizes[j])))
    return builder.build()


def names_of(table):
    elements = [f"element {e}" for e in range(table.n_elements)]
    prevalences = [
        [f"prevalence {g} {k}" for k in range(table.n_classes)]
        for g in range(table.n_prevalence_rows)
    ]
    return elements, prevalences


def check(table, **options):
    return identifiability(table, names_of(table), **options)


def all_answered(n_items, n_cases, n_groups=1):
    pattern = np.zeros((n_groups, n_items), dtype=np.int16)
    count = np.full(n_groups, n_cases // n_groups)
    return Units(pattern, np.arange(n_groups), count, np.arange(n_groups))


@pytest.mark.parametrize(
    ("sizes", "n_classes", "n_free", "rank"),
    [
        # common practice, no source: two classes need three binary items
        ((2, 2), 2, 5, 3),
        ((2, 2, 2), 2, 7, 7),
        # Goodman (1974), from memory: four binary items and three classes, 14 parameters and 15
        # free cells, are not identified for all that; five items are
        ((2, 2, 2, 2), 3, 14, 13),
        ((2, 2, 2, 2, 2), 3, 17, 17),
        # Kruskal (1977), from memory: three items of three categories carry three classes
        ((3, 3, 3), 3, 20, 20),
        # a table of rank two, 3 x 3: 2 (3 + 3 - 2) - 1 dimensions
        ((3, 3), 2, 9, 7),
        ((2, 2, 2), 1, 3, 3),
    ],
)
def test_ranks_that_are_known(sizes, n_classes, n_free, rank):
    found = check(plain(sizes, n_classes))
    assert (found.n_free, found.rank) == (n_free, rank)
    assert found.identified == (n_free == rank)
    assert found.n_cells == np.prod(sizes) - 1
    assert found.weak is None


def test_four_binary_items_with_three_classes_are_said_to_be_not_identified():
    found = check(plain((2, 2, 2, 2), 3))
    assert found.message.startswith("Not identified: the model has 14 free parameters")
    assert "determine 13" in found.message
    assert "element 1" in found.message


def test_a_known_probability_identifies_what_was_not():
    """Two tests in one population: 5 parameters, 3 cells; two known ones leave 3 and 3."""
    builder = TableBuilder([2, 2], 2)
    for j in range(2):
        builder.set_item(0, j, 0, builder.block((1.0, 1.0)))
        builder.set_known(0, j, 1, {1: 0.05})
    found = check(builder.build())
    assert (found.n_free, found.rank, found.identified) == (3, 3, True)


def test_two_tests_in_two_populations_are_identified():
    """Hui & Walter (1980), from memory: 6 parameters, 6 free cells."""
    table = plain((2, 2), 2)
    builder = TableBuilder([2, 2], 2, (0, 0))
    for j, k in product(range(2), range(2)):
        builder.set_item(0, j, k, builder.block((1.0, 1.0)))
    found = check(builder.build())
    assert (found.n_free, found.n_cells, found.rank) == (6, 6, 6)
    assert not check(table).identified


def test_shared_parameters_count_once_and_unused_blocks_not_at_all():
    builder = TableBuilder([2, 2, 2], 2)
    builder.block((1.0, 1.0))
    shared = builder.block((1.0, 1.0))
    for j, k in product(range(3), range(2)):
        builder.set_item(0, j, k, shared if k else builder.block((1.0, 1.0)))
    table = builder.build()
    assert count_free(table) == 5
    assert check(table).n_free == 5


def test_only_the_part_that_is_not_determined_is_named():
    """Group 0's items identify it; the other group has two items of its own and does not."""
    builder = TableBuilder([2, 2, 2], 2, (0, 1))
    for g, j, k in product(range(2), range(3), range(2)):
        if g == 1 and j == 2:
            builder.set_known(1, 2, k, {1: 0.5})
        else:
            builder.set_item(g, j, k, builder.block((1.0, 1.0)))
    table = builder.build()
    found = check(table)
    in_group_one = {
        table.direct_element[table.response_row[1, 2 * j + 1], k]
        for j, k in product(range(2), range(2))
    }
    assert set(found.not_identified) == {*(f"element {e}" for e in in_group_one), "prevalence 1 0"}
    assert found.n_free - found.rank == 2


def test_items_that_were_never_answered_together_identify_less():
    """Three items, but each case answered only two of them: pairs of margins alone."""
    pattern = np.array([[0, 0, -1], [-1, 0, 0], [0, -1, 0]], dtype=np.int16)
    units = Units(pattern, np.zeros(3, int), np.full(3, 10), np.arange(3))
    table = plain((2, 2, 2), 2)
    found = check(table, units=units)
    assert found.n_free == 7
    assert found.rank == 6  # three margins and three associations
    assert check(table).rank == 7


def test_the_margins_of_a_set_of_items_add_nothing_to_it():
    pattern = np.array([[0, 0, 0], [-1, 0, 0], [0, -1, -1]], dtype=np.int16)
    units = Units(pattern, np.zeros(3, int), np.full(3, 10), np.arange(3))
    found = check(plain((2, 2, 2), 2), units=units)
    assert (found.n_cells, found.rank) == (7, 7)


@pytest.mark.parametrize("sizes_and_classes", [((2,) * 6, 3), ((3, 2, 3, 2), 2), ((2,) * 4, 3)])
def test_a_selection_of_cells_with_margins_finds_the_same_rank(sizes_and_classes, monkeypatch):
    table = plain(*sizes_and_classes)
    whole = check(table)
    monkeypatch.setattr(pattern_derivatives, "MOST_CELLS", 4)
    assert check(table).rank == whole.rank


def test_many_items_are_checked_by_a_selection():
    found = check(plain((2,) * 14, 3))
    assert found.identified
    assert found.n_cells == 2**14 - 1


def test_derivatives_equal_finite_differences():
    """Pairs, products and constants, two groups: central differences, to 1e-6."""
    builder = TableBuilder([2, 3, 2], 2, (0, 1))
    pair = builder.answered_together(0, 1)
    for g in range(2):
        builder.set_joint(g, pair, 0, builder.block(np.ones(6)))
        builder.set_item(g, 0, 1, builder.block(np.ones(2)))
        builder.set_known(g, 1, 1, {1: 0.2}, builder.block((1.0, 1.0)))
        for k in range(2):
            builder.set_item(g, 2, k, builder.block(np.ones(2)))
    table = builder.build()
    rng = np.random.default_rng(3)
    point = draw_parameters(table, DirichletPrevalence(np.ones((2, 2))), rng)
    free = free_directions(table)
    masks = [[np.ones(3, dtype=bool)]] * 2
    triangle = scaled_derivatives(table, masks, point, free, rng)

    def probabilities(values):
        from bayeslca.model.compile import compile_units
        from bayeslca.model.probabilities import log_unit_likelihood

        pattern = np.array(list(product(range(2), range(3), range(2))) * 2, dtype=np.int16)
        n = len(pattern)
        units = Units(pattern, np.repeat([0, 1], n // 2), np.ones(n, int), np.arange(n))
        elements, prevalence = values[: table.n_elements], values[table.n_elements :]
        return np.exp(
            log_unit_likelihood(
                table, compile_units(table, units), elements, prevalence.reshape(2, 2)
            )
        )

    at = np.concatenate([point.elements, point.prevalence.ravel()])
    step = 1e-6
    columns = [
        (probabilities(at + step * d) - probabilities(at - step * d)) / (2 * step) for d in free.T
    ]
    expected = np.array(columns).T / np.sqrt(probabilities(at))[:, None]
    np.testing.assert_allclose(triangle.T @ triangle, expected.T @ expected, rtol=1e-5, atol=1e-6)


def test_an_empty_class_is_weak_at_the_estimate_only():
    table = plain((2,) * 5, 2)
    elements = np.tile([0.2, 0.8, 0.7, 0.3], 5)
    units = all_answered(5, 200)
    full = check(table, units=units, estimate=Parameters(elements, np.array([[0.6, 0.4]])))
    empty = check(table, units=units, estimate=Parameters(elements, np.array([[0.999, 0.001]])))
    assert full.identified
    assert full.weak is False
    assert full.weak_parameters == ()
    assert "all 11 free parameters" in full.message
    assert empty.identified
    assert empty.weak is True
    # the second class's probabilities are the ones that the cases do not settle
    assert set(empty.weak_parameters) == {f"element {4 * j + 3}" for j in range(5)}
    assert "weakly here" in empty.message


def test_twin_classes_are_weak_at_the_estimate():
    table = plain((2,) * 5, 2)
    twins = Parameters(np.tile([0.5, 0.5, 0.501, 0.499], 5), np.array([[0.5, 0.5]]))
    found = check(table, units=all_answered(5, 200), estimate=twins)
    assert found.identified
    assert found.weak
    assert "prevalence 0 0" in found.weak_parameters
